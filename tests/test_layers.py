"""The house stands: imports go down only, third parties stay in their rooms, and each module says what it may use.

Source: this project's own plan (DEVELOPERS.md, "The house"). Every file of ``shares/`` is read as a syntax tree and
nothing is imported, so an import within a function counts as well. Each rule is also seen to fire, on planted lines.
"""

from __future__ import annotations

import ast
import re
import sys
from collections.abc import Iterator
from pathlib import Path
from typing import NamedTuple

import pytest

PACKAGE = Path(__file__).resolve().parent.parent / "shares"

# From the roof to the ground. A room imports rooms of lower floors and itself, never its neighbours.
# "shares" is the library's face, shares/__init__.py: it gathers what is below and serves programs and the commands.
FLOORS = (
    ("__main__",),
    ("cli",),
    ("shares",),
    ("evidence", "keys"),
    ("custody",),
    ("history", "planning"),
    ("paper",),
    ("documents",),
    ("sharing",),
    ("field", "group"),
    ("storage",),
    ("streams",),
    ("memory", "clock"),
    ("errors",),
)
FLOOR_OF = {room: floor for floor, rooms in enumerate(FLOORS) for room in rooms}

THIRD_PARTIES = {
    "click": {"cli"},
    "pydantic": {"documents"},
    "pydantic_core": {"documents"},
    "rfc8785": {"documents"},
    "cryptography": {"documents", "custody", "keys"},
    "nacl": {"group"},
    "jinja2": {"paper"},
    "segno": {"paper"},
    "numpy": {"planning"},
}

# What no module does, with the modules that may: the kernel is chosen by the environment, the command ends the process,
# and only these two import by name.
ONLY_IN = {
    "random": set(),
    "print": set(),
    "breakpoint": set(),
    "sys.exit": {"shares.cli.main"},
    "os._exit": set(),
    "os.environ": {"shares.field"},
    "os.environb": {"shares.field"},
    "os.getenv": {"shares.field"},
    "__import__": set(),
    "importlib": {"shares", "shares.cli.main"},
}

PARTS = ("Source:", "May import:", "Secret:", "Does not:")


class Import(NamedTuple):
    target: str
    typing_only: bool


def module_name(path: Path) -> str:
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


MODULES = {module_name(path): path for path in sorted(PACKAGE.rglob("*.py"))}
STUBS = {module_name(path) for path in PACKAGE.rglob("*.pyi")}  # modules in C


def room(module: str) -> str:
    return module.split(".")[1] if "." in module else module


def is_below(module: str, other: str) -> bool:
    return FLOOR_OF.get(room(module), -1) > FLOOR_OF.get(room(other), len(FLOORS))


def imports(tree: ast.AST, *, typing_only: bool = False) -> Iterator[Import]:
    """Yield every import below a node. ``from shares import clock`` is an import of the module shares.clock."""
    for node in ast.iter_child_nodes(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield Import(alias.name, typing_only)
        elif isinstance(node, ast.ImportFrom):
            base = "." * node.level + (node.module or "")
            for alias in node.names:
                below = f"{base}.{alias.name}"
                yield Import(below if below in MODULES or below in STUBS else base, typing_only)
        elif isinstance(node, ast.If) and ast.unparse(node.test) == "TYPE_CHECKING":
            yield from imports(ast.Module(node.body, []), typing_only=True)
            yield from imports(ast.Module(node.orelse, []), typing_only=typing_only)
        else:
            yield from imports(node, typing_only=typing_only)


def misplaced_imports(module: str, tree: ast.Module) -> Iterator[str]:
    here = room(module)
    if here not in FLOOR_OF:
        yield f"{here} is not in FLOORS"
        return
    for target, _ in imports(tree):
        top = target.split(".")[0]
        if target.startswith("."):
            yield f"{target} is relative"
        elif top == "shares":
            if room(target) != here and not is_below(target, module):
                yield f"{target} is not below {here}"
        elif top in THIRD_PARTIES:
            if here not in THIRD_PARTIES[top]:
                yield f"{top} in the room {here}"
        elif top not in sys.stdlib_module_names:
            yield f"{top} is no dependency"


def forbidden_names(module: str, tree: ast.Module) -> Iterator[str]:
    used = {target.split(".")[0] for target, _ in imports(tree)}
    for node in ast.walk(tree):
        if isinstance(node, ast.Name):
            used.add(node.id)
        elif isinstance(node, ast.Attribute):
            used.add(ast.unparse(node))
        elif isinstance(node, ast.ImportFrom):
            used |= {f"{node.module}.{alias.name}" for alias in node.names}
            if any(alias.name == "*" for alias in node.names):
                yield f"import * from {node.module}"
    for name in sorted(used & ONLY_IN.keys()):
        if module not in ONLY_IN[name]:
            yield f"use of {name}"


def docstring_parts(module: str, tree: ast.Module) -> Iterator[str]:
    """Check the module docstring: what for; source; may import; what is secret and public; what it does not do.

    Shorter are those of packages without code, of the two entrances, and of the commands: their help says what for.
    """
    text = ast.get_docstring(tree)
    if text is None:
        yield "no docstring comes first"
        return
    functions = {node.name for node in tree.body if isinstance(node, ast.FunctionDef)}
    is_command = room(module) == "cli" and "command" in functions
    if len(tree.body) == 1 or module in ("shares", "shares.__main__") or is_command:
        return
    places = [text.find(f"\n{part}") for part in PARTS]
    missing = [part for part, place in zip(PARTS, places, strict=True) if place < 0]
    if missing:
        yield f"the docstring lacks {', '.join(missing)}"
    elif places != sorted(places):
        yield "the parts of the docstring are in another order"
    elif not re.search(r"Secret:\s+nothing|Public:", text[places[2] : places[3]]):
        yield "the docstring does not say what is public"


def may_import(module: str, text: str) -> set[str] | None:
    """Return the names after ``May import:``, or None where the docstring has no such part.

    ``.verify`` is a module of the same room and ``errors`` one of the ground; what is in brackets or prose is no name.
    """
    found = re.search(r"^May import:(.*?)(?=^\w[\w ]*:|\Z)", text, flags=re.DOTALL | re.MULTILINE)
    if found is None:
        return None
    items = (item.strip().removesuffix(".").rstrip() for item in re.split(r"[,;]", re.sub(r"\(.*?\)", "", found[1])))
    names = set()
    for item in items:
        if re.fullmatch(r"\.\w+", item):
            names.add(f"shares.{room(module)}{item}")
        elif re.fullmatch(r"shares\.[\w.]+", item):
            names.add(item)
        elif re.fullmatch(r"\w+", item):
            names.add(f"shares.{item}")
    return names


def undeclared_imports(module: str, tree: ast.Module) -> Iterator[str]:
    allowed = may_import(module, ast.get_docstring(tree) or "")
    if allowed is None:
        return
    for name in sorted(allowed):
        if name not in MODULES and name not in STUBS:
            yield f"{name} does not exist"
        elif room(name) != room(module) and not is_below(name, module):
            yield f"{name} may not be promised to {room(module)}"
    for target, _ in imports(tree):
        if target.startswith("shares.") and not any(f"{target}.".startswith(f"{name}.") for name in allowed):
            yield f"{target} is not among what it may import"


RULES = (misplaced_imports, forbidden_names, docstring_parts, undeclared_imports)


def violations(module: str, source: str) -> list[str]:
    tree = ast.parse(source)
    return sorted({what for rule in RULES for what in rule(module, tree)})


def cycle(needs: dict[str, set[str]]) -> list[str]:
    """Return one cycle of imports, or nothing."""
    done: set[str] = set()

    def walk(module: str, trail: list[str]) -> list[str]:
        if module in trail:
            return trail[trail.index(module) :]
        if module not in done:
            for other in sorted(needs.get(module, ())):
                if found := walk(other, [*trail, module]):
                    return found
            done.add(module)
        return []

    return next((found for module in sorted(needs) if (found := walk(module, []))), [])


@pytest.mark.parametrize("module", MODULES)
def test_module_keeps_the_rules(module: str) -> None:
    assert "; ".join(violations(module, MODULES[module].read_text("utf-8"))) == ""


def test_no_module_needs_itself_in_the_end() -> None:
    needs = {
        module: {found.target for found in imports(ast.parse(path.read_text("utf-8"))) if not found.typing_only}
        for module, path in MODULES.items()
    }
    assert sum(len(targets & MODULES.keys()) for targets in needs.values()) > len(MODULES)  # the graph is really there
    assert cycle(needs) == []


def test_every_room_is_in_the_house() -> None:
    assert {room(module) for module in MODULES} == FLOOR_OF.keys()


WHOLE = '''"""What for.

Source: none.
May import: shares.errors, shares.sharing (types), shares.field.gf256, .payload;
memory, and nothing else.
Secret: rows. Public: the rest.
Does not: everything else.
"""
from shares.errors import ParameterError
'''


def test_rules_let_a_proper_module_pass() -> None:
    assert violations("shares.custody.new", WHOLE) == []
    for allowed in ("shares.field.gf256 import Field", "shares.custody.payload import x", "shares.sharing import rule"):
        assert violations("shares.custody.new", f"{WHOLE}def f():\n    from {allowed}\n") == []
    assert violations("shares.cli.new", '"""``shares new``."""\nimport click\n\ndef command(): ...\n') == []
    assert violations("shares.sharing", '"""A package that only says what it is for."""\n') == []


@pytest.mark.parametrize(
    ("module", "planted", "finding"),
    [
        (
            "shares.sharing.new",
            "from shares.documents.share import Share",
            "shares.documents.share is not below sharing",
        ),
        ("shares.memory", "def f():\n    from shares import storage", "shares.storage is not below memory"),
        ("shares.memory", "from shares.clock import now", "shares.clock is not below memory"),
        ("shares.custody.new", "import shares", "shares is not below custody"),
        ("shares.custody.new", "from shares import split", "shares is not below custody"),
        ("shares.custody.new", "if True:\n    import shares.cli.main", "shares.cli.main is not below custody"),
        ("shares.custody.new", "from . import verify", ". is relative"),
        ("shares.cellar.new", "import os", "cellar is not in FLOORS"),
        ("shares.custody.new", "import click", "click in the room custody"),
        ("shares.sharing.new", "from pydantic import BaseModel", "pydantic in the room sharing"),
        ("shares.field.new", "import cryptography.hazmat", "cryptography in the room field"),
        ("shares.field.new", "import scipy", "scipy is no dependency"),
        ("shares.field.new", "import numpy", "numpy in the room field"),
        ("shares.field.new", "from os import *", "import * from os"),
        ("shares.field.new", "import random", "use of random"),
        ("shares.field.new", "from random import choice", "use of random"),
        ("shares.field.new", "print(1)", "use of print"),
        ("shares.custody.new", "import sys\nsys.exit(1)", "use of sys.exit"),
        ("shares.custody.new", "from sys import exit", "use of sys.exit"),
        ("shares.custody.new", "import os\nos.environ['A']", "use of os.environ"),
        ("shares.custody.new", "from os import getenv", "use of os.getenv"),
        ("shares.custody.new", "import importlib", "use of importlib"),
        ("shares.custody.new", "__import__('os')", "use of __import__"),
        ("shares.custody.new", "import shares.storage", "shares.storage is not among what it may import"),
        ("shares.custody.new", "from shares import clock", "shares.clock is not among what it may import"),
    ],
)
def test_rules_refuse_what_is_planted(module: str, planted: str, finding: str) -> None:
    assert finding in violations(module, WHOLE + planted + "\n")


@pytest.mark.parametrize(
    ("before", "after", "finding"),
    [
        ('"""What', 'import os\n"""What', "no docstring comes first"),
        ("Source: none.\n", "", "the docstring lacks Source:"),
        ("May import:", "Imports:", "the docstring lacks May import:"),
        ("Does not:", "Never:", "the docstring lacks Does not:"),
        ("Secret: rows. Public: the rest.", "Secret: rows.", "the docstring does not say what is public"),
        ("Source: none.", "Does not: a.\nSource: none.", "the parts of the docstring are in another order"),
        ("shares.field.gf256", "shares.field.gf257", "shares.field.gf257 does not exist"),
        ("shares.field.gf256", "shares.cli.main", "shares.cli.main may not be promised to custody"),
        ("shares.errors", "shares.error", "shares.error does not exist"),
        ("shares.errors", "clock", "shares.errors is not among what it may import"),
        ("shares.errors", "the errors", "shares.errors is not among what it may import"),
    ],
)
def test_rules_refuse_a_docstring_that_says_too_little(before: str, after: str, finding: str) -> None:
    assert before in WHOLE
    assert finding in violations("shares.custody.new", WHOLE.replace(before, after, 1))


def test_a_planted_cycle_is_found() -> None:
    assert cycle({"a": {"b"}, "b": {"c"}, "c": {"d"}, "d": set()}) == []
    assert cycle({"a": {"b"}, "b": {"c"}, "c": {"d", "b"}, "d": set()}) == ["b", "c"]
    assert cycle({"a": {"a"}}) == ["a"]
