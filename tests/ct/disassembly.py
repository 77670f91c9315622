"""Refuse compiled code in which a secret byte could reach an address, a branch or a scalar register.

For: the path ``gfni``, which Valgrind cannot run as it is shipped; the other vector paths beside it.
Source: types flow through registers and the stack as in abstract interpretation (P. Cousot, R. Cousot, POPL 1977):
    start at the arguments, follow every edge, join, until nothing changes. Instructions: Intel 64 and IA-32
    Architectures Software Developer's Manual, volume 2.
Does not: prove the results, or anything about memory that is written beyond its bounds.

A tile function of the kernel gets ``(out, in, factors, number, ...)``: two public lists of pointers to rows of secret
bytes, one pointer to public factors, and public numbers. So every 64-bit register holds one of

    NUMBER    a public number                      FACTORS   points to public bytes
    LIST      points to public pointers to rows    ROW       points to secret bytes
    a place   in the frame of the function         CLASH     one or another of these: never an address
    SECRET    what may be secret

and a vector register always what may be secret. The rule is a list of what is allowed, all else is refused:

    1. a scalar load through FACTORS or of a constant gives NUMBER, through LIST gives ROW, from a known place in the
       frame what was stored there; from anywhere else it gives SECRET;
    2. SECRET in a scalar register is moved, nothing else: it takes part in no address, comparison or calculation;
    3. a scalar store goes to a known place in the frame; a vector store through ROW or to the frame;
    4. nothing moves from a vector register to a scalar one or to the flags, so every comparison is one of public
       numbers;
    5. only instructions listed below occur: no call, no division, no gather, no jump but to a known place within.

Assumed, and not checked: that the code keeps within its arrays, so that a vector store at a computed place in the frame
hits no scalar, and that two frames of one function (before and after it aligns its stack) do not overlap.
"""

from __future__ import annotations

import re
import subprocess
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import NamedTuple

NUMBER, FACTORS, LIST, ROW, CLASH, SECRET = "number", "factors", "list", "row", "clash", "secret"
ORDER = (NUMBER, FACTORS, LIST, ROW, CLASH, SECRET)


class Place(NamedTuple):
    """A place in a frame; the offset is None where it is computed."""

    frame: str
    offset: int | None


Value = str | Place

SCALARS = {
    name: full
    for full, *short in [
        ("rax", "eax", "ax", "al"),
        ("rbx", "ebx", "bx", "bl"),
        ("rcx", "ecx", "cx", "cl"),
        ("rdx", "edx", "dx", "dl"),
        ("rsi", "esi", "si", "sil"),
        ("rdi", "edi", "di", "dil"),
        ("rbp", "ebp", "bp", "bpl"),
        ("rsp", "esp", "sp", "spl"),
        *[(f"r{n}", f"r{n}d", f"r{n}w", f"r{n}b") for n in range(8, 16)],
    ]
    for name in (full, *short)
}
SIZES = {"BYTE": 1, "WORD": 2, "DWORD": 4, "QWORD": 8}

JUMPS = re.compile(r"j(a|ae|b|be|e|ne|g|ge|l|le|s|ns|z|nz)$")
ARITHMETIC = {"add", "sub", "and", "or", "xor", "imul", "shl", "shr", "sar", "inc", "dec", "neg", "not"}
COMPARISONS = {"cmp", "test"}
MOVES = {"mov", "movabs", "movzx", "movsx", "movsxd"}
NOTHING = {"nop", "nopw", "nopl", "endbr64", "vzeroupper", "sfence", "data16", "cs"}
VECTOR = re.compile(
    r"v?(mov(dqa|dqu|aps|ups|apd|upd|ntdq|ntps|q|d)|p?(xor|and|or|andn)(ps|pd)?|ps[rl]l[qdw]|pshufb|pshufd"
    r"|broadcast(i128|f128|ss|sd)|pbroadcast[bwdq]|inserti128|insertf128|punpckl(bw|wd|dq|qdq)|gf2p8affineqb)$"
)
SHIFTS = re.compile(r"v?ps[rl]l[qdw]$")
STREAMS = re.compile(r"v?movnt(dq|ps)$")
MEMORY = re.compile(r"(?:([A-Z]+) PTR )?\[([^\]]+)\]")


class Instruction(NamedTuple):
    """One line of the listing."""

    address: int
    mnemonic: str
    operands: tuple[str, ...]
    text: str


@dataclass
class State:
    """What the scalar registers and the places in the frame hold before an instruction."""

    registers: dict[str, Value]
    places: dict[tuple[str, int], tuple[int, Value]] = field(default_factory=dict)

    def copy(self) -> State:
        return State(dict(self.registers), dict(self.places))


class Refused(Exception):
    """The instruction is not allowed here."""


def functions(obj: Path, *, objdump: str = "objdump") -> dict[str, list[Instruction]]:
    """List the functions of an object file, by name."""
    command = [objdump, "--disassemble", "--disassembler-options=intel", "--no-show-raw-insn", str(obj)]
    listing = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    found: dict[str, list[Instruction]] = {}
    name = ""
    for line in listing.splitlines():
        if heading := re.match(r"[0-9a-f]+ <(.+)>:$", line):
            name = heading[1]
            found[name] = []
        elif body := re.match(r"\s+([0-9a-f]+):\t(.+)$", line):
            text = re.sub(r"\s*(#.*|<[^>]*>)$", "", body[2]).strip()
            mnemonic, _, rest = text.partition(" ")
            operands = tuple(part.strip() for part in re.split(r",(?![^\[]*\])", rest)) if rest.strip() else ()
            found[name].append(Instruction(int(body[1], 16), mnemonic, operands, text))
    return found


def findings(code: list[Instruction]) -> list[str]:
    """Say what is refused in one function; nothing means that it is accepted."""
    if not code:
        return ["no code"]
    refused: dict[int, str] = {}
    index = {instruction.address: n for n, instruction in enumerate(code)}
    states: dict[int, State] = {0: _entry()}
    waiting = [0]
    while waiting:
        n = waiting.pop()
        state = states[n].copy()
        try:
            targets = _step(code[n], state, index, n)
        except Refused as reason:
            refused[n] = f"{code[n].address:x}: {code[n].text}: {reason}"
            continue
        for target in targets:
            if target >= len(code):
                refused[n] = f"{code[n].address:x}: {code[n].text}: runs off the end of the function"
            elif target not in states:
                states[target] = state.copy()
                waiting.append(target)
            elif _join(states[target], state):
                waiting.append(target)
    return [refused[n] for n in sorted(refused)]


def _entry() -> State:
    registers: dict[str, Value] = dict.fromkeys(SCALARS.values(), NUMBER)
    registers |= {"rdi": LIST, "rsi": LIST, "rdx": FACTORS, "rsp": Place("entry", 0)}
    # The return address, then the arguments that do not fit into registers: public numbers.
    places: dict[tuple[str, int], tuple[int, Value]] = {("entry", 8 * n): (8, NUMBER) for n in range(4)}
    return State(registers, places)


def _join(into: State, other: State) -> bool:
    before = into.copy()
    for register, value in other.registers.items():
        into.registers[register] = _either(into.registers[register], value)
    for place in list(into.places):
        if place not in other.places or other.places[place][0] != into.places[place][0]:
            del into.places[place]
        else:
            size, value = into.places[place]
            into.places[place] = size, _either(value, other.places[place][1])
    return into != before


def _either(a: Value, b: Value) -> Value:
    if a == b:
        return a
    if isinstance(a, Place) and isinstance(b, Place):
        return Place(a.frame, None) if a.frame == b.frame else CLASH
    if SECRET in (a, b):
        return SECRET
    if isinstance(a, Place) or isinstance(b, Place):
        return CLASH
    return max(a, b, key=ORDER.index)


def _step(instruction: Instruction, state: State, index: dict[int, int], n: int) -> list[int]:
    """Carry the state over one instruction and say where it goes on."""
    mnemonic, operands = instruction.mnemonic, instruction.operands
    if mnemonic in NOTHING or (mnemonic, operands) == ("xchg", ("ax", "ax")):
        return [n + 1]
    if mnemonic == "ret":
        return []
    if mnemonic == "jmp" or JUMPS.match(mnemonic):
        target = index.get(int(operands[0], 16)) if re.fullmatch(r"[0-9a-f]+", operands[0]) else None
        if target is None:
            raise Refused("a jump to no known place in the function")
        return [target] if mnemonic == "jmp" else [target, n + 1]
    if mnemonic in {"push", "pop", "leave"}:
        _stack(mnemonic, operands, state)
    elif mnemonic == "lea":
        _set(state, operands[0], _address(operands[1], state))
    elif mnemonic in COMPARISONS:
        for operand in operands:
            _read_public(operand, state)
    elif mnemonic in MOVES:
        _write(operands[0], _read(operands[1], state), state)
    elif mnemonic.startswith("cmov"):
        _set(state, operands[0], _either(_read_public(operands[0], state), _read_public(operands[1], state)))
    elif mnemonic.startswith("set"):
        _write(operands[0], NUMBER, state)
    elif mnemonic in ARITHMETIC:
        _arithmetic(instruction, state)
    elif VECTOR.match(mnemonic):
        _vector(instruction, state)
    else:
        raise Refused("not in the list of what is allowed")
    return [n + 1]


def _stack(mnemonic: str, operands: tuple[str, ...], state: State) -> None:
    if mnemonic == "leave":
        state.registers["rsp"] = state.registers["rbp"]
        mnemonic, operands = "pop", ("rbp",)
    if mnemonic == "push":
        value = _read(operands[0], state)
        state.registers["rsp"] = _sum(state.registers["rsp"], NUMBER, -8)
        _store(state.registers["rsp"], 8, value, state)
    else:
        value = _load(state.registers["rsp"], 8, state)
        state.registers["rsp"] = _sum(state.registers["rsp"], NUMBER, 8)
        _set(state, operands[0], value)


def _arithmetic(instruction: Instruction, state: State) -> None:
    mnemonic, operands = instruction.mnemonic, instruction.operands
    target = operands[0]
    own = _read_public(target, state)
    constant = _constant(operands[1]) if len(operands) == 2 else None
    if mnemonic in {"xor", "sub"} and len(operands) == 2 and operands[0] == operands[1]:
        result: Value = NUMBER
    elif mnemonic in {"add", "sub"} and constant is not None:
        result = _sum(own, NUMBER, constant if mnemonic == "add" else -constant)
    elif mnemonic == "and" and isinstance(own, Place) and SCALARS.get(target) == "rsp":
        result = Place(f"aligned at {instruction.address:x}", 0)
    else:
        sources = [_read_public(operand, state) for operand in operands[1:]]
        if mnemonic == "imul" and len(operands) == 3:
            own = NUMBER
        result = own
        for value in sources:
            result = _sum(result, value, None)
    _write(target, result, state)


def _vector(instruction: Instruction, state: State) -> None:
    mnemonic, operands = instruction.mnemonic, instruction.operands
    if SHIFTS.match(mnemonic) and _constant(operands[-1]) is None:
        raise Refused("a shift by what may be secret")
    target, *sources = operands
    if target in SCALARS:
        raise Refused("a vector register moves to a scalar one")
    if MEMORY.search(target):
        place = _address(target, state)
        if place != ROW and not isinstance(place, Place):
            raise Refused(f"a vector store through {place}")
        if isinstance(place, Place):
            if STREAMS.match(mnemonic):
                raise Refused("a store past the cache into the frame")
            size = next(size for start, size in [("y", 32), ("x", 16)] if sources[-1].startswith(start))
            if place.offset is not None:
                _forget(place.frame, place.offset, size, state)
    for operand in sources:
        if MEMORY.search(operand):
            _address(operand, state)
        elif not re.fullmatch(r"[xy]mm\d+", operand):
            _read(operand, state)


def _read(operand: str, state: State) -> Value:
    if operand in SCALARS:
        return state.registers[SCALARS[operand]]
    if _constant(operand) is not None:
        return NUMBER
    if found := MEMORY.search(operand):
        if found[1] not in SIZES:
            raise Refused("a scalar load of unknown size")
        return _load(_address(operand, state), SIZES[found[1]], state)
    raise Refused(f"unknown operand {operand}")


def _read_public(operand: str, state: State) -> Value:
    value = _read(operand, state)
    if value == SECRET:
        raise Refused("a comparison or calculation of what may be secret")
    return value


def _write(operand: str, value: Value, state: State) -> None:
    if operand in SCALARS:
        _set(state, operand, value)
    elif (found := MEMORY.search(operand)) and found[1] in SIZES:
        _store(_address(operand, state), SIZES[found[1]], value, state)
    else:
        raise Refused(f"unknown operand {operand}")


def _set(state: State, register: str, value: Value) -> None:
    if register not in SCALARS:
        raise Refused(f"unknown register {register}")
    name = SCALARS[register]
    # A write to a quarter of a register or less leaves the rest as it was.
    short = register[-1] in "lwb" or register in {"ax", "bx", "cx", "dx", "si", "di", "bp", "sp"}
    state.registers[name] = _either(state.registers[name], value) if short else value


def _load(place: Value, size: int, state: State) -> Value:
    if place == FACTORS:
        return NUMBER
    if place == LIST:
        return ROW
    if isinstance(place, Place) and place.offset is not None:
        held, value = state.places.get((place.frame, place.offset), (0, SECRET))
        if size > held:
            return SECRET
        return value if size == held or value == SECRET else NUMBER
    if place == ROW or isinstance(place, Place):
        return SECRET
    raise Refused(f"a scalar load through {place}")


def _store(place: Value, size: int, value: Value, state: State) -> None:
    if not isinstance(place, Place) or place.offset is None:
        raise Refused(f"a scalar store through {place}")
    _forget(place.frame, place.offset, size, state)
    state.places[place.frame, place.offset] = size, value


def _forget(frame: str, offset: int, size: int, state: State) -> None:
    for other_frame, start in list(state.places):
        if other_frame == frame and start < offset + size and offset < start + state.places[other_frame, start][0]:
            del state.places[other_frame, start]


def _address(operand: str, state: State) -> Value:
    """Say where an address such as ``[rax+rbx*8-0x20]`` points."""
    found = MEMORY.search(operand)
    if not found:
        raise Refused(f"unknown address {operand}")
    if found[2].startswith("rip"):
        return FACTORS
    known = 0
    parts: list[Value] = []
    for sign, term in re.findall(r"([+-]?)([^+-]+)", found[2]):
        constant = _constant(term)
        if constant is not None:
            known += -constant if sign == "-" else constant
            continue
        register, _, scale = term.partition("*")
        if register not in SCALARS:
            raise Refused(f"unknown address {operand}")
        value = state.registers[SCALARS[register]]
        parts.append(CLASH if isinstance(value, Place) and scale not in {"", "1"} else value)
    result = parts[0] if parts else NUMBER
    for value in parts[1:]:
        result = _sum(result, value, None)
    if result in (CLASH, SECRET):
        raise Refused(f"an address from {result}")
    return _sum(result, NUMBER, known)


def _sum(a: Value, b: Value, constant: int | None) -> Value:
    """Add two values and a constant; None says that a number of unknown size is among them."""
    if isinstance(a, Place) and isinstance(b, Place):
        return NUMBER if a.frame == b.frame else CLASH
    if isinstance(b, Place):
        a, b = b, a
    if isinstance(a, Place):
        if b != NUMBER:
            return CLASH
        return Place(a.frame, None if a.offset is None or constant is None else a.offset + constant)
    return _either(a, b)


def _constant(operand: str) -> int | None:
    return int(operand, 16) if re.fullmatch(r"-?0x[0-9a-f]+|\d+", operand) else None


def main(arguments: list[str]) -> int:
    """Print what is found in the functions whose names begin as said: ``disassembly.py OBJECT PREFIX...``."""
    found = functions(Path(arguments[0]))
    chosen = {name: code for name, code in found.items() if name.startswith(tuple(arguments[1:]))}
    refused = list(_lines(chosen))
    print("\n".join(refused or [f"accepted: {len(chosen)} functions"]))
    return 1 if refused or not chosen else 0


def _lines(chosen: dict[str, list[Instruction]]) -> Iterator[str]:
    for name, code in chosen.items():
        for finding in findings(code):
            yield f"{name}: {finding}"


if __name__ == "__main__":
    import sys

    raise SystemExit(main(sys.argv[1:]))
