"""Where a function can take a state: constant propagation over sets of environments.

For one state variable and the few helpers that carry its values (copies, ``next`` variables, parameters of setters),
a function is run on *sets* of environments without joining them, so that ``next = tms ? A : B; … state = next;``
keeps both steps apart. An environment remembers the value at the latest dispatch or test (the source of a
transition); the values that the function does not mention are one class of their own. Functions that the function
calls are followed. Method: the classic disjunctive constant propagation; bounded, and the result says so when the
bound was met.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import Literal, NamedTuple

from stepring.meaning.fold import apply_binary, apply_unary, convert
from stepring.meaning.show import expr_text
from stepring.meaning.types import (
    AddressOf,
    Assign,
    Begin,
    Binary,
    Branch,
    Call,
    Cast,
    Clobber,
    Const,
    Expr,
    Function,
    FunctionName,
    IntType,
    Jump,
    Load,
    PlaceExpr,
    PointerType,
    Return,
    Statement,
    Switch,
    Unary,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.keys import instance_text, place_key, uncast

MOST_VISITS = 6000
MOST_DEPTH = 3
MOST_HELPERS = 10


class Chosen(NamedTuple):
    """Where a constant was chosen: the block, the place, its enumerator's name."""

    block: int
    position: Position | None
    name: str | None


class Value(NamedTuple):
    """``known`` with its number; ``other``: the entry value, none of those mentioned; ``any``: not known.

    ``chosen`` is None where the number is only what a test told.
    """

    kind: Literal["known", "other", "any"]
    number: int = 0
    chosen: Chosen | None = None


ANY = Value("any")
ELSE = Value("other")


class Environment(NamedTuple):
    """The source of the next transition, the state, and the helpers' values in order."""

    source: Value
    state: Value
    helpers: tuple[Value, ...]


@dataclass(frozen=True, slots=True)
class Move:
    """A store of a constant: from ``source`` (None: a value not mentioned) to ``target``."""

    function: Function
    source: int | None
    target: int
    chosen: Chosen
    store_block: int
    at: Position


@dataclass(frozen=True, slots=True)
class Exit:
    """What holds when the function returns: the state and the returned value."""

    state: Value
    returned: Value


@dataclass(slots=True)
class Setting:
    """What a flow needs of its surroundings: the key, the functions that can be followed, the values mentioned."""

    key: str
    mentioned: frozenset[int]
    resolve: Callable[[str], Function | None]
    writers: frozenset[str]
    moves: set[Move] = field(default_factory=set)
    memo: dict[object, frozenset[Exit]] = field(default_factory=dict)
    followed: set[str] = field(default_factory=set)
    bounded: bool = False


def helpers_of(function: Function, key: str, instance: str) -> tuple[str, ...]:
    """The variables whose values flow into the state, or that hold copies of it that are tested."""
    wanted: list[str] = []

    def want(expr: Expr) -> None:
        for variable in _loaded_variables(expr):
            if variable not in wanted and variable != instance and len(wanted) < MOST_HELPERS:
                wanted.append(variable)

    assigned: list[tuple[str, Expr]] = []
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Assign):
                if _is_state(statement.place, function, key, instance):
                    want(statement.value)
                elif isinstance(statement.place, VariablePlace):
                    assigned.append((statement.place.variable.identity, statement.value))
    for name, value in assigned:
        inner = uncast(value)
        if isinstance(inner, Load) and _is_state(inner.place, function, key, instance) and len(wanted) < MOST_HELPERS:
            if name not in wanted:
                wanted.append(name)
    size = -1
    while size != len(wanted):
        size = len(wanted)
        for name, value in assigned:
            if name in wanted:
                want(value)
    return tuple(wanted)


def _loaded_variables(expr: Expr) -> Iterator[str]:
    stack = [expr]
    while stack:
        node = stack.pop()
        if isinstance(node, Load):
            if isinstance(node.place, VariablePlace) and isinstance(node.type, IntType):
                yield node.place.variable.identity
        elif isinstance(node, Cast | Unary):
            stack.append(node.operand)
        elif isinstance(node, Binary):
            stack.extend((node.left, node.right))


def _is_state(place: PlaceExpr, function: Function, key: str, instance: str) -> bool:
    found = place_key(place, function.identity)
    return found is not None and found.key == key and found.instance == instance


def flow(
    setting: Setting,
    function: Function,
    instance: str,
    entry: Environment,
    arguments: dict[str, Value],
    depth: int = 0,
) -> frozenset[Exit]:
    """Run a function from one entry environment; moves gather in ``setting``."""
    helpers = helpers_of(function, setting.key, instance)
    start = Environment(entry.source, entry.state, tuple(arguments.get(name, ANY) for name in helpers))
    memo_key = (function.identity, instance, start)
    known = setting.memo.get(memo_key)
    if known is not None:
        return known
    setting.memo[memo_key] = frozenset()  # a recursive call adds nothing to its own exits
    run = _Run(setting, function, instance, {name: number for number, name in enumerate(helpers)}, depth)
    exits: set[Exit] = set()
    seen: set[tuple[int, Environment]] = {(0, start)}
    pending = [(0, start)]
    visits = 0
    while pending:
        number, environment = pending.pop()
        visits += 1
        if visits > MOST_VISITS:
            setting.bounded = True
            break
        block = function.blocks[number]
        current = {environment}
        for statement in block.statements:
            current = {after for before in current for after in _statement(run, number, statement, before)}
        for after in current:
            for target, following in _terminator(run, number, after, exits):
                if (target, following) not in seen:
                    seen.add((target, following))
                    pending.append((target, following))
    setting.memo[memo_key] = frozenset(exits)
    return frozenset(exits)


@dataclass(slots=True)
class _Run:
    """One function being run: its slots for helpers, its depth in the calls."""

    setting: Setting
    function: Function
    instance: str
    slots: dict[str, int]
    depth: int


def _statement(run: _Run, block: int, statement: Statement, environment: Environment) -> Iterator[Environment]:
    match statement:
        case Assign(place=place, value=value, position=position):
            yield _store(run, block, place, _evaluate(run, block, value, environment, position), environment, position)
        case Call():
            yield from _call(run, block, statement, environment)
        case Begin(variable=variable):
            yield _with_helper(run, environment, variable.identity, ANY)
        case Clobber(places=places):
            for place in places:
                environment = _store(run, block, place, ANY, environment, statement.position)
            yield environment


def _store(
    run: _Run, block: int, place: PlaceExpr, value: Value, environment: Environment, at: Position
) -> Environment:
    if _is_state(place, run.function, run.setting.key, run.instance):
        if value.kind == "known" and value.chosen is not None and environment.source.kind != "any":
            source = environment.source.number if environment.source.kind == "known" else None
            run.setting.moves.add(Move(run.function, source, value.number, value.chosen, block, at))
        return environment._replace(state=value)
    if isinstance(place, VariablePlace):
        return _with_helper(run, environment, place.variable.identity, value)
    return environment


def _with_helper(run: _Run, environment: Environment, name: str, value: Value) -> Environment:
    slot = run.slots.get(name)
    if slot is None:
        return environment
    helpers = environment.helpers
    return environment._replace(helpers=(*helpers[:slot], value, *helpers[slot + 1 :]))


def _call(run: _Run, block: int, call: Call, environment: Environment) -> Iterator[Environment]:
    setting = run.setting
    name = call.callee.name if isinstance(call.callee, FunctionName) else ""
    callee = setting.resolve(name) if name else None
    result = call.result.variable.identity if isinstance(call.result, VariablePlace) else ""
    follow = callee is not None and (callee.identity in setting.writers or result in run.slots)
    if callee is None or not follow or run.depth >= MOST_DEPTH:
        if call.result is not None:
            environment = _store(run, block, call.result, ANY, environment, call.position)
        yield environment
        return
    setting.followed.add(callee.identity)
    instance = _instance_in(run, callee, call)
    arguments = {
        parameter.identity: _evaluate(run, block, argument, environment, call.position)
        for parameter, argument in zip(callee.parameters, call.arguments, strict=False)
    }
    exits = flow(setting, callee, instance, environment, arguments, run.depth + 1)
    for leaving in exits or {Exit(environment.state, ANY)}:
        after = environment._replace(state=leaving.state)
        if call.result is not None:
            after = _store(run, block, call.result, leaving.returned, after, call.position)
        yield after


def _instance_in(run: _Run, callee: Function, call: Call) -> str:
    """The way to the caller's object as the callee sees it."""
    for parameter, argument in zip(callee.parameters, call.arguments, strict=False):
        inner = uncast(argument)
        if isinstance(inner, Load):
            prefix = f"*{instance_text(inner.place)}"
        elif isinstance(inner, AddressOf):
            prefix = instance_text(inner.place)
        else:
            continue
        if run.instance.startswith((f"{prefix}.", f"{prefix}[")):
            return f"*{parameter.identity}{run.instance[len(prefix) :]}"
        if isinstance(inner, AddressOf) and run.instance == prefix:
            return f"*{parameter.identity}"
    return run.instance


def _terminator(
    run: _Run, number: int, environment: Environment, exits: set[Exit]
) -> Iterator[tuple[int, Environment]]:
    terminator = run.function.blocks[number].terminator
    match terminator:
        case Jump(target=target):
            yield target, environment
        case Return(value=value, position=position):
            returned = _evaluate(run, number, value, environment, position) if value is not None else ANY
            exits.add(Exit(environment.state, returned))
        case Branch(condition=condition, then=then, otherwise=otherwise, position=position):
            environment = _sourced(run, condition, environment)
            outcome = _evaluate(run, number, condition, environment, position)
            if outcome.kind != "known" or outcome.number:
                yield then, _told(run, condition, environment, True)
            if outcome.kind != "known" or not outcome.number:
                yield otherwise, _told(run, condition, environment, False)
        case Switch(value=control):
            environment = _sourced(run, control, environment)
            outcome = _evaluate(run, number, control, environment, terminator.syntax.position)
            yield from _switch(run, terminator, control, outcome, environment)


def _switch(
    run: _Run, terminator: Switch, control: Expr, outcome: Value, environment: Environment
) -> Iterator[tuple[int, Environment]]:
    for case in terminator.cases:
        if outcome.kind == "known":
            if case.low <= outcome.number <= case.high:
                yield case.target, environment
                return
        elif outcome.kind == "other":
            # A value that the function does not mention can still lie inside a range of labels.
            if case.high - case.low > 64:
                yield case.target, environment
        elif case.low == case.high:
            yield case.target, _sourced(run, control, _assume(run, control, environment, case.low))
        else:
            yield case.target, environment
    yield terminator.default, environment


def _sourced(run: _Run, test: Expr, environment: Environment) -> Environment:
    """At a dispatch or test of the state its value becomes the source of what follows."""
    for value in _tested(run, test, environment):
        if value.kind != "any":
            return environment._replace(source=Value(value.kind, value.number))
    return environment


def _tested(run: _Run, test: Expr, environment: Environment) -> Iterator[Value]:
    stack = [test]
    while stack:
        node = stack.pop()
        if isinstance(node, Load):
            if _is_state(node.place, run.function, run.setting.key, run.instance):
                yield environment.state
            elif isinstance(node.place, VariablePlace):
                slot = run.slots.get(node.place.variable.identity)
                # Only a copy of the state counts, not a constant meant for it.
                if slot is not None and environment.helpers[slot].chosen is None:
                    yield environment.helpers[slot]
        elif isinstance(node, Cast | Unary):
            stack.append(node.operand)
        elif isinstance(node, Binary):
            stack.extend((node.left, node.right))


def _told(run: _Run, condition: Expr, environment: Environment, true: bool) -> Environment:
    """What an equality test tells of a value that was not known."""
    condition = uncast(condition)
    if isinstance(condition, Unary) and condition.op == "!":
        return _told(run, condition.operand, environment, not true)
    if isinstance(condition, Binary) and condition.op in ("==", "!="):
        if (condition.op == "==") == true:
            for side, other in ((condition.left, condition.right), (condition.right, condition.left)):
                number = uncast(other)
                if isinstance(number, Const):
                    told = _assume(run, side, environment, number.value)
                    return _sourced(run, side, told) if told is not environment else environment
    return environment


def _assume(run: _Run, expr: Expr, environment: Environment, number: int) -> Environment:
    inner = uncast(expr)
    if isinstance(inner, Load):
        if _is_state(inner.place, run.function, run.setting.key, run.instance):
            if environment.state.kind == "any":
                return environment._replace(state=Value("known", number))
        elif isinstance(inner.place, VariablePlace):
            slot = run.slots.get(inner.place.variable.identity)
            if slot is not None and environment.helpers[slot].kind == "any":
                return _with_helper(run, environment, inner.place.variable.identity, Value("known", number))
    return environment


def _evaluate(run: _Run, block: int, expr: Expr, environment: Environment, at: Position) -> Value:
    match expr:
        case Const(value=number, position=position, name=name):
            return Value("known", number, Chosen(block, position, name))
        case Load(place=place):
            if _is_state(place, run.function, run.setting.key, run.instance):
                return environment.state
            if isinstance(place, VariablePlace):
                slot = run.slots.get(place.variable.identity)
                if slot is not None:
                    return environment.helpers[slot]
            return ANY
        case Cast(operand=operand, type=type_):
            value = _evaluate(run, block, operand, environment, at)
            if value.kind == "known" and isinstance(type_, IntType | PointerType):
                return value._replace(number=convert(value.number, type_))
            return value
        case Unary(op=op, operand=operand, type=type_):
            value = _evaluate(run, block, operand, environment, at)
            if value.kind == "known":
                result = apply_unary(op, value.number, type_)
                return ANY if result is None else Value("known", result, Chosen(block, at, None))
            return ANY
        case Binary(op=op, left=left, right=right, type=type_):
            a = _evaluate(run, block, left, environment, at)
            b = _evaluate(run, block, right, environment, at)
            if a.kind == "known" and b.kind == "known":
                result = apply_binary(op, a.number, b.number, type_)
                return ANY if result is None else Value("known", result, Chosen(block, at, None))
            if op in ("==", "!=") and {a.kind, b.kind} == {"other", "known"}:
                number = a.number if a.kind == "known" else b.number
                if number in run.setting.mentioned:
                    return Value("known", int(op == "!="))
            return ANY
    return ANY


def guard_text(function: Function, block: int, key: str) -> str:
    """The conditions under which control comes to a block, up to the dispatch on the state, as C text."""
    before: dict[int, list[int]] = {}
    for number, item in enumerate(function.blocks):
        for target in _targets(item.terminator):
            before.setdefault(target, []).append(number)
    parts: list[str] = []
    passed = {block}
    while len(before.get(block, ())) == 1:
        previous = before[block][0]
        if previous in passed:
            break
        passed.add(previous)
        terminator = function.blocks[previous].terminator
        if isinstance(terminator, Branch):
            text = expr_text(terminator.condition)
            parts.append(text if terminator.then == block else f"!({text})")
        elif isinstance(terminator, Switch):
            control = uncast(terminator.value)
            if isinstance(control, Load):
                found = place_key(control.place, function.identity)
                if found is not None and found.key == key:
                    break
            labels = [case.name or str(case.low) for case in terminator.cases if case.target == block]
            if labels:
                parts.append(f"{expr_text(terminator.value)} == {' or '.join(labels)}")
        block = previous
    return " && ".join(reversed(parts))


def _targets(terminator: object) -> tuple[int, ...]:
    match terminator:
        case Jump(target=target):
            return (target,)
        case Branch(then=then, otherwise=otherwise):
            return (then, otherwise) if then != otherwise else (then,)
        case Switch(cases=cases, default=default):
            return tuple(dict.fromkeys((*(case.target for case in cases), default)))
    return ()
