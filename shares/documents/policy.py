"""The policy: the dealer's TOML file of custodians, groups and the rule, from which a set is planned and split.

Source: TOML 1.0.0; FORMAT.md, sec. 12; NIST SP 800-57 Part 1 rev. 5 (signature keys are not backed up or archived as
a rule, so splitting one needs a reason).
May import: shares.errors, shares.field, shares.sharing.rule, shares.documents.base, .intervals, .members, .rates.
Secret: nothing. Public: nothing either: a policy is confidential, as it tells whom to coerce. Errors name keys and
custodians, never a person, a site or any other value.
Does not: judge whether a policy is wise (``planning`` does), touch files, or look at the party cards it names.
"""

from __future__ import annotations

import difflib
import hashlib
import re
import tomllib
import unicodedata
from codecs import BOM_UTF8
from collections.abc import Iterator
from datetime import timedelta
from typing import Annotated, ClassVar, Literal, Self

from pydantic import AfterValidator, PrivateAttr, ValidationError, model_validator
from pydantic import Field as Member
from pydantic_core import PydanticCustomError

from shares.documents.base import MAX_FILE, Document
from shares.documents.intervals import Duration, Interval
from shares.documents.members import Byte, Text, check_name
from shares.documents.rates import Absence, CommonRates, Rate, Rates
from shares.errors import DocumentError, ParameterError
from shares.field.gf256 import Field
from shares.field.polynomial import Polynomial
from shares.sharing.rule import MAX_CHILDREN, MAX_DEPTH, MAX_POINTS, Rule

_MAX_DOTS = 100
KeyType = Literal["symmetric", "signature", "private-decryption", "password", "other"]


def _custodian_name(name: str) -> str:
    reason = _name_problem(name)
    if reason:
        raise PydanticCustomError("shares_name", "is not a name: {reason}", {"reason": reason})
    return name


def _name_problem(name: str) -> str | None:
    try:
        check_name(name)
    except ParameterError as error:
        return error.what
    return None


def _polynomial(text: str) -> str:
    try:
        Field(Polynomial.parse(text).number)
    except ParameterError as error:
        reason = error.what
    else:
        return text
    raise PydanticCustomError("shares_polynomial", "makes no field: {reason}", {"reason": reason})


def _relative(path: str) -> str:
    if path.startswith("/"):
        raise PydanticCustomError("shares_path", "should be a path relative to the policy's folder")
    return path


def folded(text: str) -> str:
    """Return what two spellings of one person, place or channel have in common: case, width and spacing do not count.

    A slip in spelling must not make one person look like two.

    >>> folded("Harbour  Office") == folded("harbour office")
    True
    """
    return " ".join(unicodedata.normalize("NFKC", text).casefold().split())


class PolicyCustodian(Document):
    """A custodian as the dealer plans them: who holds the share, where, under whom, and how it gets there.

    Attributes:
        carrier: who brings the share to the custodian.
        channel: the way by which it travels.
        card: the path of the custodian's party card, relative to the policy's folder.
        weight: the number of leaves that the custodian gets wherever the policy names them.
        medium: on what the share is kept: paper, a stick, a card, or another kind.
        loss, leak, departure, absent: as in ``Rates``, for this custodian alone.
    """

    name: Annotated[str, AfterValidator(_custodian_name)]
    person: Text
    site: Text
    reports_to: Text
    carrier: Text | None = None
    channel: Text | None = None
    card: Annotated[Text, AfterValidator(_relative)] | None = None
    weight: Byte = 1
    medium: Text | None = None
    loss: Rate | None = None
    leak: Rate | None = None
    departure: Rate | None = None
    absent: Absence | None = None


class PolicyNode(Document):
    """A group, or the rule itself: any ``need`` of the custodians and groups named in ``from``."""

    need: Byte
    children: Annotated[tuple[str, ...], Member(alias="from", min_length=1, max_length=MAX_CHILDREN)]


class Policy(Document):
    """A policy that holds together: every name is known and used, and the rule is within the bounds of the format.

    ``Policy.parse`` reads one.
    """

    KIND: ClassVar[str] = "policy"

    label: Text
    key_type: KeyType | None = None
    reason: Text | None = None
    polynomial: Annotated[str, AfterValidator(_polynomial)] = "x^8 + x^4 + x^3 + x + 1"
    pad: Annotated[int, Member(ge=1, le=4096)] = 16
    attest_every: Interval | None = None
    drill_every: Interval | None = None
    refresh_every: Interval | None = None
    content_every: Interval = timedelta(days=365)
    recover_within: Duration | None = None
    respond_within: Duration = timedelta(hours=24)
    keep_records: Interval = timedelta(days=2 * 365)
    practice: bool = True
    dual_control: bool = False
    strict: bool = False
    acknowledgement: bool = False
    custodians: Annotated[tuple[PolicyCustodian, ...], Member(alias="custodian", min_length=1, max_length=MAX_POINTS)]
    groups: Annotated[dict[str, PolicyNode], Member(alias="group")] = Member(default_factory=dict)
    root: Annotated[PolicyNode, Member(alias="rule")]
    rates: Rates = Member(default_factory=Rates)
    sites: Annotated[tuple[CommonRates, ...], Member(alias="site")] = ()
    lines: Annotated[tuple[CommonRates, ...], Member(alias="line")] = ()
    media: Annotated[tuple[CommonRates, ...], Member(alias="medium")] = ()
    _text: bytes = PrivateAttr(default=b"")
    _rule: Rule = PrivateAttr()

    @classmethod
    def parse(cls, data: bytes, *, where: str | None = None) -> Self:
        """Read a policy from the bytes of its file.

        Args:
            data: TOML 1.0.0 in UTF-8, at most 1 MiB.
            where: what to call it in an error, normally its path.

        Returns:
            The policy; ``text`` holds the bytes as they were given.

        Raises:
            DocumentError: not TOML (says the line), or not a policy (says the key, like ``group.operators.from[2]``,
                and the custodian where their name can be read; places in a list are counted from 0).

        Source: FORMAT.md, sec. 12.
        """
        tables = _tables(data, where)
        try:
            policy = cls.model_validate(tables)
        except ValidationError as error:
            problem = _first_problem(error, tables)
        else:
            policy._text = bytes(data)
            return policy
        # Raised outside the handler: a ValidationError carries its input, and would travel along as the context.
        counting = "; places in a list are counted from 0" if re.search(r"\[\d", problem) else ""
        raise DocumentError(problem, where=where, hint=f"FORMAT.md, section 12, says what a policy holds{counting}")

    @property
    def text(self) -> bytes:
        """The bytes of the file as it was read."""
        return self._text

    def digest(self) -> bytes:
        """Return the SHA-256 of the file as it was read: 32 bytes, for the record."""
        return hashlib.sha256(self._text).digest()

    def field(self) -> Field:
        """Return the field of the policy's polynomial."""
        return Field(Polynomial.parse(self.polynomial).number)

    def rule(self) -> Rule:
        """Return the rule with every group put in its places, and each custodian written as often as their weight."""
        return self._rule

    @model_validator(mode="after")
    def _holds_together(self) -> Self:
        problem = next(self._problems(), None)
        if problem is None:
            try:
                self._rule = _tree(self, "rule", self.root)
            except ParameterError as error:
                problem = f"{error.where}: {error.what}" + (f"; {error.hint}" if error.hint else "")
        if problem:
            raise PydanticCustomError("shares_policy", "{problem}", {"problem": problem})
        return self

    def _nodes(self) -> Iterator[tuple[str, PolicyNode]]:
        """Yield every group and the rule, each with its key path."""
        yield from ((_path("group", name), group) for name, group in self.groups.items())
        yield "rule", self.root

    def _problems(self) -> Iterator[str]:
        if self.key_type == "signature" and self.reason is None:
            yield "reason is missing: signature keys are not backed up as a rule, so say why this one is (SP 800-57)"
        yield from self._names_twice()
        known = dict.fromkeys([*self.groups, *(custodian.name for custodian in self.custodians)])
        for path, node in self._nodes():
            yield from _names_unknown(path, node, known)
        # What the rule leads to by way of groups; a name within a group that is left out counts as left out.
        reached, ahead = set[str](), list(self.root.children)
        while ahead:
            name = ahead.pop()
            if name not in reached:
                reached.add(name)
                ahead += self.groups[name].children if name in self.groups else ()
        yield from (f"{_path('group', name)} is not used by the rule" for name in self.groups if name not in reached)
        for i, custodian in enumerate(self.custodians):
            if custodian.name not in reached:
                yield f"{_custodian(custodian.name, i)} is not used by the rule and would hold no share"
        yield from self._rates_of_nobody()

    def _names_twice(self) -> Iterator[str]:
        places: dict[str, str] = {}
        for i, custodian in enumerate(self.custodians):
            path = f"custodian[{i}].name"
            first = places.setdefault(custodian.name.casefold(), path)
            if first != path:
                yield f"{path}, {custodian.name}, is the same as {first} (upper and lower case do not differ)"
        for name in self.groups:
            path = _path("group", name)
            reason = _name_problem(name)
            if reason:
                yield f"{path} is not named as custodians are: {reason}"
            first = places.setdefault(name.casefold(), path)
            if first != path:
                yield f"{path} has the same name as {first} (upper and lower case do not differ)"

    def _rates_of_nobody(self) -> Iterator[str]:
        labels = (("site", "site", self.sites), ("line", "reports_to", self.lines), ("medium", "medium", self.media))
        for key, label, tables in labels:
            known = {folded(getattr(custodian, label) or "") for custodian in self.custodians}
            places: dict[str, str] = {}
            for i, table in enumerate(tables):
                path = f"{key}[{i}].name"
                if folded(table.name) not in known:
                    yield f"{path} is the {label} of no custodian; write it as theirs, or leave the table out"
                first = places.setdefault(folded(table.name), path)
                if first != path:
                    yield f"{path} is the same as {first} (case, width and spacing do not count); keep one table"


def _names_unknown(path: str, node: PolicyNode, known: dict[str, None]) -> Iterator[str]:
    for i, name in enumerate(node.children):
        if name not in known:
            like = difflib.get_close_matches(name, known, n=1)
            meant = f"; is {like[0]} meant?" if like else ""
            yield f"{path}.from[{i}] names no custodian and no group{meant}"
        if name in node.children[:i]:
            yield f"{path}.from[{i}] names {name} a second time; to count a custodian more than once, use weight"


def _tree(policy: Policy, path: str, node: PolicyNode, trail: tuple[str, ...] = ()) -> Rule:
    """Put groups in the places of their names, all of which are known.

    Raises:
        ParameterError: a group leads back to itself, or the rule is too deep, wide or large; says the key.
    """
    weights = {custodian.name: custodian.weight for custodian in policy.custodians}
    children: list[Rule | str] = []
    for i, name in enumerate(node.children):
        place = f"{path}.from[{i}]"
        if name in weights:
            children += [name] * weights[name]
        elif name in trail:
            circle = " -> ".join((*trail[trail.index(name) :], name))
            raise ParameterError(f"the group leads back to itself: {circle}", where=place)
        elif len(trail) + 1 >= MAX_DEPTH:
            raise ParameterError(f"a rule is at most {MAX_DEPTH} groups deep, itself included", where=place)
        else:
            children.append(_tree(policy, _path("group", name), policy.groups[name], (*trail, name)))
    try:
        return Rule(node.need, tuple(children))
    except ParameterError as error:
        problem = error
    raise ParameterError(problem.what, where=path, hint=problem.hint)


def _path(*keys: str | int) -> str:
    """Write a key path as TOML has it, with the place in a list in brackets."""
    path = ""
    for key in keys:
        if isinstance(key, int):
            path += f"[{key}]"
        else:
            path += f".{key}" if re.fullmatch(r"[A-Za-z0-9_-]+", key) else f'."{key}"'
    return path.removeprefix(".")


def _custodian(name: str, i: int) -> str:
    """Name a custodian in an error: people know the name, and the place finds it in the file."""
    return f"custodian {name} ({_path('custodian', i)})"


def _place(loc: tuple[str | int, ...], tables: dict[str, object]) -> str:
    """Write where a value stands: by the custodian's name where there is one that can be read, else by its path."""
    match loc, tables.get("custodian"):
        case ("custodian", int(i), key, *more), tuple(custodians):
            match custodians[i]:
                case {"name": str(name)} if _name_problem(name) is None:
                    return f"{_custodian(name, i)}: {_path(key, *more)}"
    return _path(*loc)


def _tables(data: bytes, where: str | None) -> dict[str, object]:
    """Read TOML; what is wrong with it is told by its line alone."""
    if len(data) > MAX_FILE:
        raise DocumentError("the policy is larger than 1 MiB", where=where, hint="no policy is that large")
    for number, line in enumerate(data.splitlines(), start=1):
        # A dotted key costs the parser time and memory by the square of its parts, and no policy has any.
        if line.count(b".") > _MAX_DOTS and not line.lstrip().startswith(b"#"):
            raise DocumentError(
                f"line {number} holds more than {_MAX_DOTS} dots", where=where, hint="no policy needs them"
            )
    if data.startswith(BOM_UTF8):
        raise DocumentError("it begins with a byte order mark", where=where, hint="save it as UTF-8 without one")
    hint = "look there and just before: a quote or bracket may be missing, or a key or table stand twice"
    try:
        return {key: _with_tuples(value) for key, value in tomllib.loads(data.decode("utf-8")).items()}
    except UnicodeDecodeError:
        problem, hint = "it is not UTF-8 text", "a policy is a text file in TOML: save it as UTF-8"
    except RecursionError:
        problem, hint = "it is nested too deeply", "no policy needs that: brackets may be left open"
    except ValueError as error:
        # The parser's own words may repeat what stands there, so only the place is taken from them.
        place = re.search(r"\(at (line \d+, column \d+|end of document)\)$", str(error))
        problem = f"it is not TOML: {place[1] if place else 'a number is out of range'}"
    raise DocumentError(problem, where=where, hint=hint)


def _with_tuples(value: object) -> object:
    """Turn lists into tuples: the models are frozen throughout, and strict about it."""
    if isinstance(value, dict):
        return {key: _with_tuples(inner) for key, inner in value.items()}
    return tuple(map(_with_tuples, value)) if isinstance(value, list) else value


_PLAIN_WORDS = {
    "missing": "is missing",
    "extra_forbidden": "is no key that a policy has at this place",
    "tuple_type": "should be a list in brackets",
    "model_type": "should be one table",
    "dict_type": "should be one table",
    "int_type": "should be a whole number, without quotes",
    "bool_type": "should be true or false, without quotes",
    "string_type": "should be text in quotes",
    "too_short": "should not be empty",
    "too_long": "is too long",
}


_REPEATED = (("custodian",), ("site",), ("line",), ("medium",))


def _first_problem(error: ValidationError, tables: dict[str, object]) -> str:
    problems = error.errors(include_input=False, include_context=False, include_url=False)
    # A misspelt key is missing under its right name as well: the slip itself is told.
    details = min(problems, key=lambda problem: problem["type"] != "extra_forbidden")
    if details["type"] == "shares_policy":
        return details["msg"]
    said = details["msg"].removeprefix("Input ")
    said = f"is not allowed: {said}" if details["type"] == "shares_text" else said
    said = _PLAIN_WORDS.get(details["type"], said)
    if details["type"] == "tuple_type" and details["loc"] in _REPEATED:
        said = f"should be a table for each, headed [[{details['loc'][0]}]]"
    return f"{_place(details['loc'], tables)} {said}"
