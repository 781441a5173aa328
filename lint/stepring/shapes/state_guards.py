"""What stands between a state and a step out of it: guard, event, time-out and actions, in the source's words.

A step's guard is the condition under which control comes from the dispatch to the store. It is found on the function's
graph: walking up the dominators of the store's block, the ways between two of them are written as a disjunction of
conjunctions of branch outcomes and simplified (``a && b`` or ``!a && b`` is ``b``; the classic rules of absorption).
Tests of the state itself drop out. What tells a parameter's or a message's value is the event.
"""

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import NamedTuple

import networkx

from stepring.meaning.builder import successors
from stepring.meaning.show import expr_text
from stepring.meaning.types import (
    Assign,
    Binary,
    Branch,
    Call,
    Cast,
    Const,
    Expr,
    Function,
    FunctionName,
    Load,
    MemberPlace,
    PlaceExpr,
    Return,
    Switch,
    Unary,
    VariablePlace,
)
from stepring.places import Origin, Position
from stepring.read.source import SourceFile
from stepring.read.types import ReadUnit
from stepring.shapes.keys import place_key, uncast
from stepring.shapes.names import STATE_NAME
from stepring.shapes.state_spelled import spelled
from stepring.shapes.state_texts import Spelled, condition_at, negated, negated_text

MOST_WAYS = 6
MOST_TEXT = 160
_EVENT_NAME = re.compile(
    r"(?:^|_)(?:event|evt|ev|sig|signal|msg|message|cmd|command|request|req|key|input|trigger|type|code|opcode|reason|"
    r"what|action)(?:_|$|s$)",
    re.IGNORECASE,
)
_TIME_NAME = re.compile(
    r"time|tick|timer|elapsed|clock|millis|deadline|expire|delay|jiffies|uptime|countdown|_ms\b|\bnow\b", re.IGNORECASE
)
# What is counted that is no time: room, places and tries.
_AMOUNT_NAME = re.compile(
    r"pos|idx|index|len|size|buf|byte|char|snd|rcv|recv|sent|retr|tries|head|tail|bit|crc|sum|num|free|used|left_to|item",
    re.IGNORECASE,
)
_EXPIRY_NAME = re.compile(r"time_?out|expire", re.IGNORECASE)


class Literal(NamedTuple):
    """An outcome of a block's test: a branch's arm, or the numbers of a switch's labels (empty: the default)."""

    block: int
    arm: bool | frozenset[int]


Term = frozenset[Literal]


class Condition(NamedTuple):
    """One condition on the way: its text, whether it tells an event, whether it looks at time."""

    text: str
    event: bool
    timed: bool


class Way(NamedTuple):
    """How a step is taken: the guard, the event, the functions called, and whether the guard looks at time."""

    guard: str
    event: str
    actions: tuple[str, ...]
    timed: bool


@dataclass(slots=True)
class Paths:
    """What is found of one function once, whatever key is asked for."""

    function: Function
    read: ReadUnit
    dominators: Mapping[int, int]
    asked: frozenset[Position]
    before: Mapping[int, int]
    counted: frozenset[str]
    reach: dict[int, frozenset[int]] = field(default_factory=dict)
    ways: dict[tuple[int, int], list[Term]] = field(default_factory=dict)
    literals: dict[Literal, Condition | None] = field(default_factory=dict)


@dataclass(slots=True)
class Guards:
    """The conditions of one function, for one key: ``standing`` are variables that hold its value there."""

    paths: Paths
    key: str
    standing: frozenset[str]
    known: dict[int, tuple[Condition, ...]] = field(default_factory=dict)
    called: dict[int, tuple[str, ...]] = field(default_factory=dict)
    tests: dict[int, bool] = field(default_factory=dict)

    @property
    def function(self) -> Function:
        return self.paths.function

    @property
    def read(self) -> ReadUnit:
        return self.paths.read

    @property
    def dominators(self) -> Mapping[int, int]:
        return self.paths.dominators


def paths_of(function: Function, read: ReadUnit) -> Paths:
    """What is needed to find guards in a function."""
    graph: networkx.DiGraph[int] = networkx.DiGraph()
    graph.add_node(0)
    for number, block in enumerate(function.blocks):
        graph.add_edges_from((number, target) for target in successors(block.terminator))
    dominators = networkx.immediate_dominators(graph, 0)
    return Paths(function, read, dominators, _asked(function), _before(function), _counted(function))


def conditions(guards: Guards, block: int) -> tuple[Condition, ...]:
    """The conditions under which control comes to a block, outermost first, tests of the state left out."""
    found = guards.known.get(block)
    if found is None:
        found = guards.known[block] = tuple(_conditions(guards, block))
    return found


def _conditions(guards: Guards, block: int) -> list[Condition]:
    parts: list[list[Condition]] = []
    above = False
    while block in guards.dominators and guards.dominators[block] != block:
        before = guards.dominators[block]
        terms = _ways(guards, before, block)
        tests = {literal.block for term in terms for literal in term}
        if any(_is_state_test(guards, number) for number in tests):
            above = True
            terms = [frozenset(one for one in term if not _is_state_test(guards, one.block)) for term in terms]
        elif above:
            terms = [] if _leaves_early(guards, terms, block) else terms
        here = _written(guards, _simplified(guards.function, terms))
        parts.append(here)
        block = before
    return list(dict.fromkeys(one for part in reversed(parts) for one in part))


def _ways(guards: Guards, start: int, block: int) -> list[Term]:
    """The outcomes on each way from a dominator to a block; no way where they say nothing."""
    found = guards.paths.ways.get((start, block))
    if found is None:
        found = guards.paths.ways[start, block] = _all_ways(guards, start, block)
    return found


def _all_ways(guards: Guards, start: int, block: int) -> list[Term]:
    blocks = guards.function.blocks
    between = _from(guards, start, block)
    if start not in _targets_of(blocks, between) and not any(
        isinstance(blocks[number].terminator, Return) or not successors(blocks[number].terminator) for number in between
    ):
        return []  # every way leads there
    order = _order(guards.function, start, _leading(blocks, between, block) | {block})
    ways: dict[int, list[Term]] = {start: [frozenset()]}
    for number in order:
        terms = list(dict.fromkeys(ways.get(number, ())))
        if len(terms) > 4 * MOST_WAYS:
            return []
        terms = _simplified(guards.function, terms)
        if number == block or len(terms) > MOST_WAYS:
            return terms if number == block else []
        for target, literals in _outcomes(guards.function, number):
            # An edge back to the start of a loop adds no new way.
            if target in order and order[target] > order[number]:
                ways.setdefault(target, []).extend(term | literals for term in terms)
    return []


def _order(function: Function, start: int, inside: set[int]) -> dict[int, int]:
    """The blocks inside, each after those that lead to it (loops aside), with their numbers in that order."""
    done: list[int] = []
    seen = {start}
    stack = [(start, iter(successors(function.blocks[start].terminator)))]
    while stack:
        number, targets = stack[-1]
        for target in targets:
            if target in inside and target not in seen:
                seen.add(target)
                stack.append((target, iter(successors(function.blocks[target].terminator))))
                break
        else:
            done.append(number)
            stack.pop()
    return {number: place for place, number in enumerate(reversed(done))}


def _targets_of(blocks: Sequence[object], numbers: Iterable[int]) -> set[int]:
    return {target for number in numbers for target in successors(blocks[number].terminator)}  # type: ignore[attr-defined]


def _from(guards: Guards, start: int, stop: int) -> set[int]:
    """The blocks after ``start`` that control can come to without passing ``stop``, and ``start`` itself."""
    seen = {start}
    pending = [start]
    while pending:
        for target in successors(guards.function.blocks[pending.pop()].terminator):
            if target not in seen and target != stop:
                seen.add(target)
                pending.append(target)
    return seen


def _leading(blocks: Sequence[object], between: set[int], stop: int) -> set[int]:
    """Those of the blocks from which ``stop`` can be come to."""
    before: dict[int, list[int]] = {}
    for number in between:
        for target in successors(blocks[number].terminator):  # type: ignore[attr-defined]
            before.setdefault(target, []).append(number)
    seen: set[int] = set()
    pending = [stop]
    while pending:
        for number in before.get(pending.pop(), ()):
            if number not in seen:
                seen.add(number)
                pending.append(number)
    return seen


def _outcomes(function: Function, number: int) -> Iterable[tuple[int, Term]]:
    end = function.blocks[number].terminator
    if isinstance(end, Branch):
        if end.then == end.otherwise:
            yield end.then, frozenset()
        else:
            yield end.then, frozenset((Literal(number, True),))
            yield end.otherwise, frozenset((Literal(number, False),))
    elif isinstance(end, Switch):
        for target in dict.fromkeys(successors(end)):
            labels = frozenset(place for place, case in enumerate(end.cases) if case.target == target)
            # A label that shares its code with the default says no more than the default does.
            yield target, frozenset((Literal(number, frozenset() if target == end.default else labels),))
    else:
        for target in successors(end):
            yield target, frozenset()


def _simplified(function: Function, terms: Sequence[Term]) -> list[Term]:
    """The disjunction with as few outcomes as the rules of absorption leave."""
    current = list(dict.fromkeys(terms))
    changed = True
    while changed and len(current) > 1:
        changed = False
        for one in current:
            for other in current:
                if one is other:
                    continue
                less = _less(function, one, other)
                if less is not None:
                    current = list(dict.fromkeys([term for term in current if term is not other] + less))
                    changed = True
                    break
            if changed:
                break
    return [frozenset()] if any(not term for term in current) else current


def _less(function: Function, one: Term, other: Term) -> list[Term] | None:
    """What may stand for ``other`` beside ``one``, if that is less: nothing, or fewer outcomes."""
    if one <= other:
        return []
    for literal in one:
        rest = one - {literal}
        for opposite in other:
            if opposite.block != literal.block or opposite == literal or not rest <= other:
                continue
            if isinstance(literal.arm, bool):
                return [other - {opposite}]
            if isinstance(opposite.arm, frozenset) and other - {opposite} == rest:
                if not literal.arm or not opposite.arm:
                    end = function.blocks[literal.block].terminator
                    assert isinstance(end, Switch)
                    covered = literal.arm | opposite.arm
                    reached = {case.target for case in end.cases}
                    if len(covered) == len(end.cases) or not reached:
                        return [rest]
                    return None
                if opposite.arm <= literal.arm:
                    return []
                if literal.arm <= opposite.arm:
                    return None
                return [rest | {Literal(literal.block, literal.arm | opposite.arm)}]
    return None


def _is_state_test(guards: Guards, number: int) -> bool:
    found = guards.tests.get(number)
    if found is None:
        found = guards.tests[number] = _tests_state(guards, number)
    return found


def _tests_state(guards: Guards, number: int) -> bool:
    end = guards.function.blocks[number].terminator
    value = end.condition if isinstance(end, Branch) else end.value if isinstance(end, Switch) else None
    if value is None:
        return False
    for place in places_read(value):
        if isinstance(place, VariablePlace) and place.variable.identity in guards.standing:
            return True
        found = place_key(place, guards.function.identity)
        if found is not None and found.key == guards.key:
            return True
    return False


def places_read(expr: Expr) -> Iterable[PlaceExpr]:
    """The places that an expression loads directly."""
    stack = [expr]
    while stack:
        node = stack.pop()
        if isinstance(node, Load):
            yield node.place
        elif isinstance(node, Cast | Unary):
            stack.append(node.operand)
        elif isinstance(node, Binary):
            stack.extend((node.left, node.right))


def _leaves_early(guards: Guards, terms: Sequence[Term], block: int) -> bool:
    """Whether the other outcomes only leave the function before the state is looked at."""
    after = _reached(guards, block)
    for term in terms:
        for literal in term:
            end = guards.function.blocks[literal.block].terminator
            if not isinstance(end, Branch) or not isinstance(literal.arm, bool):
                return False
            if _event_like(guards, literal):
                return False
            other = end.otherwise if literal.arm else end.then
            if _reached(guards, other) & after:
                return False
    return True


def _reached(guards: Guards, block: int) -> frozenset[int]:
    found = guards.paths.reach.get(block)
    if found is None:
        found = guards.paths.reach[block] = frozenset(_from(guards, block, -1))
    return found


# ---------------------------------------------------------------------------------------------------------- texts


def _written(guards: Guards, terms: Sequence[Term]) -> list[Condition]:
    if not terms:
        return []
    written = [_term(guards, term) for term in terms]
    if any(not one for one in written):
        return []
    if len(written) == 1:
        return written[0]
    texts = list(dict.fromkeys(" && ".join(one.text for one in part) for part in written))
    flat = [one for part in written for one in part]
    event = all(len(part) == 1 and part[0].event for part in written)
    return [Condition(_joined(texts), event, any(one.timed for one in flat))]


def _joined(texts: Sequence[str]) -> str:
    return texts[0] if len(texts) == 1 else f"({' || '.join(texts)})"


def _term(guards: Guards, term: Term) -> list[Condition]:
    found: list[Condition] = []
    for literal in sorted(term, key=lambda one: one.block):
        if literal not in guards.paths.literals:
            guards.paths.literals[literal] = _literal(guards, literal)
        one = guards.paths.literals[literal]
        if one is not None and one not in found:
            found.append(one)
    return found


def _literal(guards: Guards, literal: Literal) -> Condition | None:
    """An outcome in the source's words, or None for a loop's own condition."""
    function = guards.function
    end = function.blocks[literal.block].terminator
    if isinstance(end, Switch):
        assert isinstance(literal.arm, frozenset)
        return _case(guards, end, literal.arm)
    assert isinstance(end, Branch)
    where = guards.read.origin(end.position)
    macros = guards.read.macros
    found = condition_at(
        guards.read.source(where.file),
        where,
        lambda word: (macro := macros.get(word)) is not None and bool(macro.parameters),
    )
    if found is not None and not found.statement and (macro := macros.get(found.tokens[0])) is not None:
        if macro.parameters is not None:
            return None  # a statement of its own, which a macro makes of a condition: an assertion, a log
    if found is None or _is_opposite(guards, found.tokens[0]):
        text = spelled(function, expr_text(end.condition))
        text = text if literal.arm else negated_text(text)
    elif found.statement in ("while", "for") and literal.arm:
        return None
    else:
        text = found.text if literal.arm else negated(found)
    timed = bool(_TIME_NAME.search(text)) or _is_counted(guards, end.condition)
    return Condition(text[:MOST_TEXT], _event_like(guards, literal), timed)


def _is_opposite(guards: Guards, word: str) -> bool:
    """Whether a word is a macro that can stand for the opposite of what it was expanded to."""
    macro = guards.read.macros.get(word)
    return macro is not None and "!" in macro.body.replace("!=", "")


def _case(guards: Guards, end: Switch, labels: frozenset[int]) -> Condition | None:
    where = guards.read.origin(end.syntax.position)
    control = _control(guards.read.source(where.file), where) or spelled(guards.function, expr_text(end.value))
    chosen = [end.cases[number] for number in sorted(labels)] or [
        case for case in end.cases if case.target != end.default
    ]
    if not chosen or (not labels and len(chosen) > 3):
        return None
    names = []
    for case in chosen:
        spelling = guards.read.origin(case.constant).spelling
        plain = re.fullmatch(r"\w+|L?'.*'", spelling)
        name = case.name or (spelling if plain else str(case.low))
        names.append(name if case.low == case.high else f"{case.low} to {case.high}")
    if labels:
        texts = [f"{control} == {name}" for name in dict.fromkeys(names)]
        return Condition(_joined(texts), not STATE_NAME.search(control), False)
    return Condition(" && ".join(f"{control} != {name}" for name in dict.fromkeys(names)), False, False)


def _control(source: SourceFile | None, where: Origin) -> str | None:
    """What stands in the parentheses of a ``switch``."""
    if source is None:
        return None
    at = source.first_on(where.line)
    while at < len(source.texts) and source.lines[at] == where.line and source.columns[at] < where.column:
        at += 1
    if at + 2 >= len(source.texts) or source.texts[at] != "switch":
        return None
    depth = 0
    for end in range(at + 1, min(len(source.texts), at + 100)):
        depth += (source.texts[end] == "(") - (source.texts[end] == ")")
        if depth == 0:
            inner = Spelled(
                tuple(source.texts[at + 2 : end]),
                tuple(
                    source.columns[number] > source.columns[number - 1] + len(source.texts[number - 1])
                    for number in range(at + 2, end)
                ),
                "switch",
            )
            return inner.text
    return None


def _event_like(guards: Guards, literal: Literal) -> bool:
    """Whether an outcome tells a parameter's value, or that of something named for events."""
    end = guards.function.blocks[literal.block].terminator
    if not isinstance(end, Branch):
        return bool(literal.arm)
    condition = uncast(end.condition)
    if not isinstance(condition, Binary) or condition.op not in ("==", "!="):
        return False
    if (condition.op == "==") != literal.arm:
        return False
    for side, other in ((condition.left, condition.right), (condition.right, condition.left)):
        inner = uncast(side)
        number = uncast(other)
        if not isinstance(number, Const) or not isinstance(inner, Load):
            continue
        place = inner.place
        if isinstance(place, VariablePlace):
            if place.variable.storage == "parameter" or _EVENT_NAME.search(place.variable.name):
                return True
        elif isinstance(place, MemberPlace) and _EVENT_NAME.search(place.name):
            return True
    return False


def _is_counted(guards: Guards, condition: Expr) -> bool:
    """Whether a condition compares something that the function counts up or down."""
    inner = uncast(condition)
    if isinstance(inner, Binary) and inner.op in ("==", "!=", "<", "<=", ">", ">="):
        sides: tuple[Expr, ...] = (inner.left, inner.right)
    elif isinstance(inner, Load):
        sides = (inner,)
    else:
        return False
    identity = guards.function.identity
    keys = {
        found.key
        for side in sides
        for place in places_read(side)
        if (found := place_key(place, identity)) is not None
        and found.scope == "lasting"
        and not _AMOUNT_NAME.search(found.shown.rsplit(".", 1)[-1])
    }
    return bool(keys & guards.paths.counted)


def _counted(function: Function) -> frozenset[str]:
    """The keys that a function counts up or down."""
    found: set[str] = set()
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Assign):
                value = uncast(statement.value)
                if isinstance(value, Binary) and value.op in ("+", "-"):
                    target = place_key(statement.place, function.identity)
                    if target is not None:
                        found.add(target.key)
    return frozenset(found)


# ---------------------------------------------------------------------------------------------------------- actions


def actions(guards: Guards, block: int, setters: frozenset[str]) -> tuple[str, ...]:
    """The functions called between the state's test and the end of the step's own code; conditions call too, but ask.

    ``setters`` are the names of functions that only store the state.
    """
    found = guards.called.get(block)
    if found is None:
        found = guards.called[block] = tuple(name for name in _called(guards, block) if name not in setters)
    return found


def _called(guards: Guards, block: int) -> tuple[str, ...]:
    function = guards.function
    chain = [block]
    number = block
    while number in guards.dominators and guards.dominators[number] != number:
        number = guards.dominators[number]
        if _is_state_test(guards, number):
            break
        chain.append(number)
    chain.reverse()
    number = block
    while len(after := successors(function.blocks[number].terminator)) == 1 and after[0] not in chain:
        number = after[0]
        if guards.paths.before.get(number, 0) != 1:
            break
        chain.append(number)
    found: list[str] = []
    for number in chain:
        for statement in function.blocks[number].statements:
            if isinstance(statement, Call) and statement.position not in guards.paths.asked:
                name = called_name(statement)
                if name:
                    found.append(name)
    return tuple(dict.fromkeys(found))


def called_name(call: Call) -> str:
    """The name of the function called, or the member or variable that holds it."""
    callee = uncast(call.callee)
    if isinstance(callee, FunctionName):
        return callee.name
    if isinstance(callee, Load):
        if isinstance(callee.place, MemberPlace):
            return callee.place.name
        if isinstance(callee.place, VariablePlace):
            return callee.place.variable.name
    return ""


def _before(function: Function) -> dict[int, int]:
    found: dict[int, int] = {}
    for block in function.blocks:
        for target in set(successors(block.terminator)):
            found[target] = found.get(target, 0) + 1
    return found


def _asked(function: Function) -> frozenset[Position]:
    """The calls whose result a branch or switch looks at."""
    tested: set[str] = set()
    for block in function.blocks:
        end = block.terminator
        value = end.condition if isinstance(end, Branch) else end.value if isinstance(end, Switch) else None
        if value is not None:
            tested |= {place.variable.identity for place in places_read(value) if isinstance(place, VariablePlace)}
    return frozenset(
        statement.position
        for block in function.blocks
        for statement in block.statements
        if isinstance(statement, Call)
        and isinstance(statement.result, VariablePlace)
        and statement.result.variable.identity in tested
        and statement.result.variable.storage == "temporary"
    )


def way_of(parts: Iterable[Condition], called: Iterable[str], function: str) -> Way:
    """The conditions brought together, with the event picked out. A function can be named for its time being up."""
    kept = list(dict.fromkeys(parts))
    expiry = bool(_EXPIRY_NAME.search(function.rsplit(":", 1)[-1]))
    guard = " && ".join(one.text for one in kept)
    event = " && ".join(one.text for one in kept if one.event)
    if guard.startswith("(") and guard.endswith(")") and len(kept) == 1:
        guard = guard[1:-1] if _one_group(guard) else guard
    return Way(guard, event, tuple(dict.fromkeys(called)), any(one.timed for one in kept) or expiry)


def _one_group(text: str) -> bool:
    depth = 0
    for number, character in enumerate(text):
        depth += (character == "(") - (character == ")")
        if depth == 0 and number < len(text) - 1:
            return False
    return True
