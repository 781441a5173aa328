"""Constants get their names back: from a value in the IR to what the source spells there.

After preprocessing ``case 3:`` was ``case FEED_PRIME:``. An enumerator is still named in the IR; a macro is found
through the original text, and counts only if its replacement text has that very value. Groups of constants (families)
are enumerations, or
``#define`` lines close together whose names share a prefix with the constants in use (common practice).
"""

import re
from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field

from stepring.meaning.constants import character, number
from stepring.meaning.types import Const, DataModel, TypeTable
from stepring.places import Origin, Position
from stepring.read.types import Macro
from stepring.shapes.facts import Constant, Family

_TOKENS = re.compile(
    r"\s*(?:([A-Za-z_]\w*)|((?:0[xX][0-9a-fA-F]+|\d+)[uUlL]*)|('(?:[^'\\]|\\.)+')|(<<|>>|[-+*/%&|^~()]))"
)
_HUMP = re.compile(r"(?<=[a-z0-9])(?=[A-Z])")
_NEAR = 3  # lines between two #defines of one group, at most
_MOST = 256

# How functions are named that run once, before a machine does (common practice), and those that may call them.
_STARTS = re.compile(
    r"(?:^|_)(?:init|initiali[sz]e|initiali[sz]ation|setup|set_up|create|construct|constructor|ctor|startup)(?:_|$)",
    re.IGNORECASE,
)
_RUNS = re.compile(r"(?:^|_)(?:main|task|thread)(?:_|$)", re.IGNORECASE)
# How functions that report a fault are named (common practice).
_FAULTS = re.compile(
    r"(?:^|_)(?:err|error|errors|fault|faults|fail|failed|failure|assert|panic|abort|fatal|bug|invalid|illegal|"
    r"unexpected|unreachable|unhandled|trap|die)(?:_|$)",
    re.IGNORECASE,
)
# How functions that store a state for others are named (common practice).
_SETS = re.compile(r"set|change|state|mode|phase|goto|enter|switch|transit|next|new_|advance|move", re.IGNORECASE)

# How a state is named in two thirds of the firmware that was read for this (a survey's figure, not a rule of C).
STATE_NAME = re.compile(r"(?:state(?!ful|less|ment)|phase|fsm|stage)[^.]*\Z|_st\Z", re.IGNORECASE)


def sets(function: str) -> bool:
    """Whether a function's name says that it may be a setter of a state."""
    return bool(_SETS.search(function))


def faults(function: str) -> bool:
    """Whether a function's name says that it reports a fault: ``fault_report``, ``assert_failed``."""
    return bool(_FAULTS.search(_words(function)))


def starts(function: str) -> bool:
    """Whether a function's name says that it sets things up: ``hopper_init``, ``InitHopper``, ``setup``."""
    return bool(_STARTS.search(_words(function)))


def starts_or_runs(function: str) -> bool:
    """Whether a function sets things up or is where a program or one of its tasks begins."""
    return starts(function) or bool(_RUNS.search(_words(function)))


def _words(function: str) -> str:
    """A function's name without its file, camel case told apart by underscores."""
    return re.sub(r"(?<=[a-z0-9])(?=[A-Z])", "_", function.rsplit(":", 1)[-1])


@dataclass(slots=True)
class Names:
    """The unit's way from values to names."""

    macros: Mapping[str, Macro]
    types: TypeTable
    origin: Callable[[Position], Origin]
    values: dict[str, int | None] = field(default_factory=dict)
    by_enumerator: dict[str, str] = field(default_factory=dict)

    def __post_init__(self) -> None:
        for identity, enumeration in self.types.enums.items():
            for item in enumeration.enumerators:
                self.by_enumerator.setdefault(item.name, identity)

    @property
    def model(self) -> DataModel:
        return self.types.model


def macro_value(names: Names, name: str, depth: int = 0) -> int | None:
    """The value of an object-like macro or an enumerator, or None where it is no integer constant."""
    if name in names.values:
        return names.values[name]
    names.values[name] = None
    value: int | None = None
    macro = names.macros.get(name)
    if macro is not None and macro.parameters is None and depth < 20:
        value = _evaluate(names, macro.body, depth)
    elif name in names.by_enumerator:
        enumeration = names.types.enums[names.by_enumerator[name]]
        value = next(item.value for item in enumeration.enumerators if item.name == name)
    names.values[name] = value
    return value


def _evaluate(names: Names, body: str, depth: int) -> int | None:
    """A replacement text of integers, other macros and C's integer operators, read by precedence climbing."""
    tokens: list[str | int] = []
    at = 0
    body = body.strip()
    if not body or len(body) > 200:
        return None
    while at < len(body):
        match = _TOKENS.match(body, at)
        if match is None:
            return None
        at = match.end()
        if match[1]:
            called = names.macros.get(match[1])
            if called is not None and called.parameters is not None:
                expanded = _expanded(called, body, at)
                value = _evaluate(names, expanded[0], depth + 1) if expanded is not None and depth < 20 else None
                if value is None or expanded is None:
                    return None
                tokens.append(value)
                at = expanded[1]
                continue
            inner = macro_value(names, match[1], depth + 1)
            # What has no value can only be the name of a type, in a cast.
            tokens.append(match[1] if inner is None else inner)
        elif match[2]:
            found = number(names.model, match[2])
            if not isinstance(found, tuple):
                return None
            tokens.append(found[0])
        elif match[3]:
            tokens.append(character(match[3], names.model.char_signed))
        else:
            tokens.append(match[4])
    tokens = _without_casts(tokens)
    try:
        value, rest = _climb(tokens, 0, 0)
    except (IndexError, ZeroDivisionError, ValueError):
        return None
    return value if rest == len(tokens) else None


def _expanded(macro: Macro, body: str, at: int) -> tuple[str, int] | None:
    """A function-like macro's replacement with the arguments that stand at ``at``, and where the call ends."""
    opening = body.find("(", at)
    if opening < 0 or body[at:opening].strip() or macro.parameters is None:
        return None
    depth = 0
    arguments: list[str] = []
    start = opening + 1
    for end in range(opening, len(body)):
        if body[end] == "(":
            depth += 1
        elif body[end] == ")":
            depth -= 1
        if depth == 0 or (depth == 1 and body[end] == ","):
            arguments.append(body[start:end].strip())
            start = end + 1
        if depth == 0:
            return _substituted(macro, arguments, end + 1)
    return None


def _substituted(macro: Macro, arguments: Sequence[str], end: int) -> tuple[str, int] | None:
    if macro.parameters is None or len(arguments) != len(macro.parameters):
        return None
    values = dict(zip(macro.parameters, arguments, strict=True))
    return _WORD.sub(lambda match: f"({values[match[0]]})" if match[0] in values else match[0], macro.body), end


_WORD = re.compile(r"[A-Za-z_]\w*")
_PRECEDENCE = {"|": 1, "^": 2, "&": 3, "<<": 4, ">>": 4, "+": 5, "-": 5, "*": 6, "/": 6, "%": 6}


def _without_casts(tokens: list[str | int]) -> list[str | int]:
    out: list[str | int] = []
    number_ = 0
    while number_ < len(tokens):
        end = number_ + 1
        while tokens[number_] == "(" and end < len(tokens) and str(tokens[end]).isidentifier():
            end += 1
        if end > number_ + 1 and end + 1 < len(tokens) and tokens[end] == ")":
            number_ = end + 1
            continue
        out.append(tokens[number_])
        number_ += 1
    return out


def _climb(tokens: list[str | int], at: int, least: int) -> tuple[int, int]:
    token = tokens[at]
    if token == "(":
        left, at = _climb(tokens, at + 1, 0)
        if tokens[at] != ")":
            raise ValueError
        at += 1
    elif token in ("-", "~", "+"):
        inner, at = _climb(tokens, at + 1, 7)
        left = -inner if token == "-" else ~inner if token == "~" else inner
    elif isinstance(token, int):
        left, at = token, at + 1
    else:
        raise ValueError
    while at < len(tokens) and isinstance(tokens[at], str) and _PRECEDENCE.get(str(tokens[at]), -1) >= max(least, 1):
        op = str(tokens[at])
        right, at = _climb(tokens, at + 1, _PRECEDENCE[op] + 1)
        left = _apply(op, left, right)
    return left, at


def _apply(op: str, left: int, right: int) -> int:
    match op:
        case "+":
            return left + right
        case "-":
            return left - right
        case "*":
            return left * right
        case "/" | "%":
            quotient = abs(left) // abs(right) * (1 if (left < 0) == (right < 0) else -1)
            return quotient if op == "/" else left - quotient * right
        case "<<" | ">>":
            if not 0 <= right < 64:
                raise ValueError
            return left << right if op == "<<" else left >> right
        case "&":
            return left & right
        case "|":
            return left | right
    return left ^ right


def constant_at(names: Names, value: int, position: Position | None, name: str | None, fallback: Origin) -> Constant:
    """A constant as the source spells it."""
    where = names.origin(position) if position is not None and position.line else fallback
    if name is not None:
        return Constant(value, name, where)
    spelled = where.spelling
    if spelled.isidentifier() and macro_value(names, spelled) == value:
        return Constant(value, spelled, where)
    return Constant(value, None, where)


def constant_of(names: Names, const: Const, fallback: Origin) -> Constant:
    """An IR constant as the source spells it; conversion may have changed its value since."""
    return constant_at(names, const.value, const.position, const.name, fallback)


def families(names: Names, used: Iterable[Constant]) -> tuple[Family, ...]:
    """The enumerations and ``#define`` groups that the used constants belong to."""
    found: dict[str, Family] = {}
    groups: dict[str, set[str]] = {}
    for constant in used:
        if constant.name is None:
            continue
        identity = names.by_enumerator.get(constant.name)
        if identity is not None:
            if identity not in found:
                enumeration = names.types.enums[identity]
                members = tuple(
                    Constant(item.value, item.name, names.origin(item.position))
                    for item in enumeration.enumerators[:_MOST]
                )
                found[identity] = Family(identity, "enumeration", members)
        elif constant.name in names.macros:
            groups.setdefault(names.macros[constant.name].file, set()).add(constant.name)
    for file, together in groups.items():
        for family in _macro_groups(names, file, together):
            found[family.identity] = family
    return tuple(found[identity] for identity in sorted(found))


def _macro_groups(names: Names, file: str, used: set[str]) -> Iterable[Family]:
    """Neighbouring ``#define`` lines of one file, with a prefix that at least two used constants share."""
    first, last = min(used), max(used)
    shared = next((i for i, (a, b) in enumerate(zip(first, last, strict=False)) if a != b), min(len(first), len(last)))
    prefix = first[: first.rfind("_", 0, shared) + 1]
    if not prefix:
        # Names in camel case share whole words: ``feedGateOpen`` and ``feedGateShut``.
        humps = [match.start() for match in _HUMP.finditer(first) if match.start() <= shared]
        prefix = first[: humps[-1]] if humps else ""
    if len(used) < 2 or len(prefix) < 2:
        return
    candidates = sorted(
        (
            macro
            for macro in names.macros.values()
            if macro.file == file and macro.parameters is None and macro.name.startswith(prefix)
        ),
        key=lambda macro: macro.line,
    )
    run: list[Macro] = []
    runs: list[list[Macro]] = []
    for macro in candidates:
        if macro_value(names, macro.name) is None:
            continue
        if run and macro.line - run[-1].line > _NEAR:
            runs.append(run)
            run = []
        run.append(macro)
    runs.append(run)
    chosen = [macro for group in runs if any(macro.name in used for macro in group) for macro in group]
    values = [macro_value(names, macro.name) for macro in chosen]
    if len(set(values)) != len(values):
        # Two names for one value: bounds such as FIRST or COUNT stand among them; keep what is in use.
        chosen = [macro for macro in chosen if macro.name in used]
    members = tuple(
        Constant(value, macro.name, Origin(macro.file, macro.line, 1, 1, macro.name))
        for macro in chosen[:_MOST]
        if (value := macro_value(names, macro.name)) is not None
    )
    if members:
        yield Family(f"{prefix}*@{file}:{members[0].where.line}", "macros", members)
