"""Where a function can take a state: constant propagation over sets of environments.

A function's slice for one state is run on *sets* of environments without joining them, so that ``next = tms ? A : B;
… state = next;`` keeps both steps apart. The state starts as "any value" and is split only where a test or dispatch
splits it; an environment remembers the value at the latest of these as the source of a transition. Functions that the
function calls are followed. Method: the classic disjunctive constant propagation; it is bounded, and the setting says
so when the bound was met.
"""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Literal, NamedTuple

from stepring.meaning.fold import apply_binary, apply_unary, convert
from stepring.meaning.types import (
    AddressOf,
    Call,
    Function,
    Load,
)
from stepring.places import Position
from stepring.shapes.keys import instance_text, uncast
from stepring.shapes.state_slice import (
    BinaryTerm,
    CallOp,
    CastTerm,
    HelperTerm,
    Number,
    Op,
    OutsideOp,
    Slice,
    SliceBlock,
    StateTerm,
    StoreOp,
    Term,
    UnaryTerm,
    make_slice,
)

MOST_VISITS = 20_000  # blocks run for one key in one unit that dispatches on it
CHAIN_VISITS = 4_000  # the same for a unit that compares it with constants
FEW_VISITS = 400  # the same for a unit that only tests and stores: most such variables are no states at all
MOST_DEPTH = 3


class Chosen(NamedTuple):
    """Where a constant was chosen: the function (its identity) and block, the place, its enumerator's name."""

    function: str
    block: int
    position: Position | None
    name: str | None


class Value(NamedTuple):
    """A value: ``known`` with its number; ``other``: any but those excluded; ``any``: computed, not known.

    ``chosen`` is None where a number is only what a test told; in a source it is the dispatch that told it.
    """

    kind: Literal["known", "other", "any"]
    number: int = 0
    chosen: Chosen | None = None
    excluded: frozenset[int] = frozenset()


ANY = Value("any")
ENTRY = Value("other")


class Environment(NamedTuple):
    """The source of the next transition, the state, and the helpers' values in order."""

    source: Value
    state: Value
    helpers: tuple[Value, ...]


@dataclass(frozen=True, slots=True)
class Move:
    """A store of a constant by a function (its identity): from ``source`` to ``target``.

    A source of None is any value but those in ``excluded``. ``through`` is set where the constant is handed to a
    function of another unit, as its argument of that number: a store if that function turns out to be a setter.
    """

    function: str
    source: int | None
    excluded: frozenset[int]
    target: int
    chosen: Chosen
    at: Position
    through: tuple[str, int] | None = None
    # Whether a dispatch told the source, and not only a test.
    dispatched: bool = False
    # The block that stores it, in ``function``.
    block: int = -1


class Exit(NamedTuple):
    """What holds when a function returns: the source, the state and the returned value."""

    source: Value
    state: Value
    returned: Value


@dataclass(slots=True)
class Setting:
    """What a flow needs of its surroundings: the key, the values mentioned anywhere, the functions that can be
    followed."""

    key: str
    mentioned: frozenset[int]
    resolve: Callable[[str], Function | None]
    writers: frozenset[str]
    instances: Callable[[str], frozenset[str]]
    commits: frozenset[str] = frozenset()
    # Whether code outside the function that is run can store the state, and whether functions of other units can.
    shared: bool = False
    outside: bool = False
    # Variables that stand for the state in a function, by the function and the instance ("" for any).
    aliases: Mapping[tuple[str, str], frozenset[str]] = field(default_factory=dict)
    moves: set[Move] = field(default_factory=set)
    # What each store was seen to store, by function and place; None among them is a value that is not known.
    stored: dict[tuple[str, Position], set[tuple[int, Chosen] | None]] = field(default_factory=dict)
    # What each call was seen to hand over, by the caller, the call's place and the number of the argument.
    handed: dict[tuple[str, Position, int], set[tuple[int, Chosen] | None]] = field(default_factory=dict)
    # Where a function was called from while a state was known: the caller, the block, and the source then.
    sites: dict[str, set[tuple[str, int, int | None]]] = field(default_factory=dict)
    # Whether a call that may store the state was too deep to be followed.
    cut: bool = False
    slices: dict[tuple[str, str], Slice] = field(default_factory=dict)
    memo: dict[object, frozenset[Exit]] = field(default_factory=dict)
    followed: set[str] = field(default_factory=set)
    visits: int = 0
    most_visits: int = MOST_VISITS

    @property
    def bounded(self) -> bool:
        """Whether the bound was met, so that transitions may be missing."""
        return self.visits > self.most_visits


def flow(
    setting: Setting,
    function: Function,
    instance: str,
    source: Value,
    state: Value,
    arguments: dict[str, Value],
    depth: int = 0,
) -> frozenset[Exit]:
    """Run a function from one source and state; moves gather in ``setting``."""
    part = setting.slices.get((function.identity, instance))
    if part is None:
        known_as = [setting.aliases.get((function.identity, way), frozenset()) for way in (instance, "")]
        aliases = frozenset().union(*known_as)
        part = make_slice(
            function,
            setting.key,
            instance,
            setting.resolve,
            setting.writers,
            setting.commits,
            aliases,
            setting.outside,
        )
        setting.slices[function.identity, instance] = part
    # A parameter that stands for the state is what it stands for, where no caller says otherwise.
    unknown = [state if slot in part.aliases else ANY for slot in range(len(part.helpers))]
    helpers = tuple(arguments.get(name, unknown[slot]) for slot, name in enumerate(part.helpers))
    start = Environment(source, state, helpers)
    memo_key = (function.identity, instance, start)
    known = setting.memo.get(memo_key)
    if known is not None:
        return known
    setting.memo[memo_key] = frozenset()  # a recursive call adds nothing to its own exits
    run = _Run(setting, part, instance, depth)
    exits: set[Exit] = set()
    seen: set[tuple[int, Environment]] = set()
    pending: list[tuple[int, Environment]] = []

    def visit(targets: tuple[int, ...], environment: Environment) -> None:
        for target in targets:
            live = part.live[target]
            helpers = tuple(value if slot in live else ANY for slot, value in enumerate(environment.helpers))
            item = (target, environment._replace(helpers=helpers))
            if item not in seen:
                seen.add(item)
                pending.append(item)

    visit(part.entry, start)
    while pending and not setting.bounded:
        number, environment = pending.pop()
        setting.visits += 1
        block = part.blocks[number]
        current = {environment}
        for op in block.ops:
            current = {after for before in current for after in _operate(run, number, op, before)}
        for after in current:
            if block.leaves:
                returned = _evaluate(run, number, block.returned, after) if block.returned is not None else ANY
                exits.add(Exit(after.source, after.state, returned))
            elif block.test is None:
                visit(block.plain, after)
            else:
                for targets, following in _leave(run, number, block, after):
                    visit(targets, following)
    setting.memo[memo_key] = frozenset(exits)
    return frozenset(exits)


@dataclass(slots=True)
class _Run:
    """One function being run."""

    setting: Setting
    part: Slice
    instance: str
    depth: int


def _operate(run: _Run, block: int, op: Op, environment: Environment) -> Iterator[Environment]:
    if isinstance(op, CallOp):
        yield from _call(run, block, op, environment)
    elif isinstance(op, OutsideOp):
        for number, term in enumerate(op.arguments):
            _note_move(
                run, block, _evaluate(run, block, term, environment), environment, op.position, (op.name, number)
            )
        yield environment
    else:
        yield _store(run, block, op, _evaluate(run, block, op.term, environment), environment)


def _store(run: _Run, block: int, op: StoreOp, value: Value, environment: Environment) -> Environment:
    if op.slot is None or op.commit:
        _note_move(run, block, value, environment, op.position)
    if op.slot is None:
        _note_seen(run.setting.stored.setdefault((run.part.function.identity, op.position), set()), value)
    if op.slot is not None:
        helpers = environment.helpers
        return environment._replace(helpers=(*helpers[: op.slot], value, *helpers[op.slot + 1 :]))
    return environment._replace(state=value)


def _note_move(
    run: _Run, block: int, value: Value, environment: Environment, at: Position, through: tuple[str, int] | None = None
) -> None:
    if value.kind == "known" and value.chosen is not None and environment.source.kind != "any":
        source = environment.source
        known = source.number if source.kind == "known" else None
        function = run.part.function.identity
        dispatched = source.chosen is not None
        run.setting.moves.add(
            Move(function, known, source.excluded, value.number, value.chosen, at, through, dispatched, block)
        )


def _note_seen(seen: set[tuple[int, Chosen] | None], value: Value) -> None:
    """Note a constant that was chosen, or None for what is not known; the state's own value is nothing new."""
    if value.kind == "any":
        seen.add(None)
    elif value.kind == "known" and value.chosen is not None:
        seen.add((value.number, value.chosen))


def _call(run: _Run, block: int, op: CallOp, environment: Environment) -> Iterator[Environment]:
    setting = run.setting
    callee = op.callee
    result = StoreOp(None if op.slot == -1 else op.slot, Number(0, None, None), op.call.position)
    if run.depth >= MOST_DEPTH:
        setting.cut = setting.cut or callee.identity in setting.writers
        yield _store(run, block, result, ANY, environment) if op.slot is not None else environment
        return
    instance = _instance_in(run, callee, op.call)
    if instance in setting.instances(callee.identity):
        setting.followed.add(callee.identity)
    known = environment.source.number if environment.source.kind == "known" else None
    setting.sites.setdefault(callee.identity, set()).add((run.part.function.identity, block, known))
    arguments = {
        parameter.identity: _evaluate(run, block, argument, environment)
        for parameter, argument in zip(callee.parameters, op.arguments, strict=False)
    }
    if callee.identity in setting.writers:
        for number, value in enumerate(arguments.values()):
            _note_seen(setting.handed.setdefault((run.part.function.identity, op.call.position, number), set()), value)
    exits = flow(setting, callee, instance, environment.source, environment.state, arguments, run.depth + 1)
    for leaving in exits or {Exit(environment.source, environment.state, ANY)}:
        # A function that only works on a copy leaves the state as it was until its result is stored.
        state = leaving.state if callee.identity in setting.writers else environment.state
        after = environment._replace(source=leaving.source, state=state)
        yield _store(run, block, result, leaving.returned, after) if op.slot is not None else after


def _instance_in(run: _Run, callee: Function, call: Call) -> str:
    """The way to the caller's object as the callee sees it."""
    instance = run.instance
    for parameter, argument in zip(callee.parameters, call.arguments, strict=False):
        inner = uncast(argument)
        if isinstance(inner, Load):
            text = instance_text(inner.place)
            instance = instance.replace(f"[{text}]", f"[{parameter.identity}]")
            prefix = f"*{text}"
        elif isinstance(inner, AddressOf):
            prefix = instance_text(inner.place)
        else:
            continue
        if instance.startswith((f"{prefix}.", f"{prefix}[")):
            return f"*{parameter.identity}{instance[len(prefix) :]}"
        if isinstance(inner, AddressOf) and instance == prefix:
            return f"*{parameter.identity}"
    return instance


def _leave(
    run: _Run, number: int, block: SliceBlock, environment: Environment
) -> Iterator[tuple[tuple[int, ...], Environment]]:
    test = block.test
    assert test is not None
    if block.cases:
        if block.again and run.setting.shared:
            # Between two rounds of a loop other code can have stored anything.
            environment = environment._replace(state=ENTRY)
        for one in _split_for_switch(run, test, block, environment):
            outcome = _evaluate(run, number, test, one)
            if outcome.kind == "known":
                targets = next(
                    (case.targets for case in block.cases if case.low <= outcome.number <= case.high), block.otherwise
                )
                yield targets, _sourced(run, number, test, one, block.position)
            else:
                if outcome.kind == "any":
                    for case in block.cases:
                        told = _assume(run, number, test, one, case.low) if case.low == case.high else one
                        yield case.targets, _sourced(run, number, test, told, block.position)
                yield block.otherwise, _sourced(run, number, test, one, block.position)
        return
    for one in _split_for_branch(run, test, environment):
        outcome = _evaluate(run, number, test, one)
        if outcome.kind != "known" or outcome.number:
            yield block.then, _sourced(run, number, test, _told(run, number, test, one, True))
        if outcome.kind != "known" or not outcome.number:
            yield block.otherwise, _sourced(run, number, test, _told(run, number, test, one, False))


def _split_for_switch(run: _Run, test: Term, block: SliceBlock, environment: Environment) -> Iterator[Environment]:
    """A dispatch on "any value": one environment for each label, one for the rest."""
    inner = _uncast(test)
    value = _of(inner, environment)
    if value is None or value.kind != "other":
        yield environment
        return
    labels: list[int] = []
    for case in block.cases:
        inside = range(case.low, case.high + 1)
        if len(inside) <= 64:
            labels.extend(inside)
        else:
            labels.extend(number for number in sorted(run.setting.mentioned) if number in inside)
    yield from _each(inner, value, labels, environment)


def _split_for_branch(run: _Run, test: Term, environment: Environment) -> Iterator[Environment]:
    """A test of "any value": split by its constant, or by all values mentioned where the test is no equality."""
    for inner in _tested(test):
        value = _of(inner, environment)
        if value is not None and value.kind == "other":
            numbers = _equality(test)
            yield from _each(inner, value, sorted(run.setting.mentioned) if numbers is None else numbers, environment)
            return
    yield environment


def _equality(test: Term) -> list[int] | None:
    test = _uncast(test)
    if isinstance(test, UnaryTerm) and test.op == "!":
        return _equality(test.operand)
    if isinstance(test, StateTerm | HelperTerm):
        return [0]
    if isinstance(test, BinaryTerm) and test.op in ("==", "!="):
        for side in (test.left, test.right):
            side = _uncast(side)
            if isinstance(side, Number):
                return [side.number]
    return None


def _each(term: Term, value: Value, numbers: list[int], environment: Environment) -> Iterator[Environment]:
    for number in dict.fromkeys(numbers):
        if number not in value.excluded:
            yield _set(term, environment, Value("known", number, None))
    yield _set(term, environment, value._replace(excluded=value.excluded | frozenset(numbers)))


def _set(term: Term, environment: Environment, value: Value) -> Environment:
    if isinstance(term, HelperTerm):
        helpers = environment.helpers
        copied = environment._replace(helpers=(*helpers[: term.slot], value, *helpers[term.slot + 1 :]))
        # A copy that still equals the state tells about the state as well.
        same = helpers[term.slot] == environment.state
        return copied._replace(state=value) if same else copied
    if isinstance(term, StateTerm):
        helpers = tuple(value if helper == environment.state else helper for helper in environment.helpers)
        return environment._replace(state=value, helpers=helpers)
    return environment


def _of(term: Term, environment: Environment) -> Value | None:
    if isinstance(term, StateTerm):
        return environment.state
    return environment.helpers[term.slot] if isinstance(term, HelperTerm) else None


def _uncast(term: Term) -> Term:
    while isinstance(term, CastTerm):
        term = term.operand
    return term


def _tested(term: Term) -> Iterator[Term]:
    """The state and the helpers that a test reads."""
    term = _uncast(term)
    if isinstance(term, StateTerm | HelperTerm):
        yield term
    elif isinstance(term, UnaryTerm):
        yield from _tested(term.operand)
    elif isinstance(term, BinaryTerm):
        yield from _tested(term.left)
        yield from _tested(term.right)


def _sourced(run: _Run, block: int, test: Term, environment: Environment, at: Position | None = None) -> Environment:
    """At a dispatch or test of the state (or a copy of it) its value becomes the source of what follows.

    ``at`` is the place of a dispatch: there a constant in a working copy has become the state.
    """
    for term in _tested(test):
        value = _of(term, environment)
        if value is None or value.kind == "any":
            continue
        if isinstance(term, HelperTerm) and value.chosen is not None:
            if term.slot not in run.part.aliases or at is None:
                continue  # a constant meant for the state is no copy of it
            _note_move(run, block, value, environment, at)
        mark = Chosen(run.part.function.identity, -1, at, None) if at is not None else None
        before = environment.source
        if mark is None and before.kind == "known" and (value.kind, value.number) == (before.kind, before.number):
            mark = before.chosen  # a test of what a dispatch has found
        return environment._replace(source=value._replace(chosen=mark))
    return environment


def _told(run: _Run, block: int, test: Term, environment: Environment, true: bool) -> Environment:
    """What an equality test tells of a value that was computed and not known."""
    test = _uncast(test)
    if isinstance(test, UnaryTerm) and test.op == "!":
        return _told(run, block, test.operand, environment, not true)
    if isinstance(test, BinaryTerm) and test.op in ("==", "!=") and (test.op == "==") == true:
        for side, other in ((test.left, test.right), (test.right, test.left)):
            number = _uncast(other)
            if isinstance(number, Number):
                return _assume(run, block, side, environment, number.number)
    return environment


def _assume(run: _Run, block: int, term: Term, environment: Environment, number: int) -> Environment:
    term = _uncast(term)
    value = _of(term, environment)
    if value is None or value.kind != "any":
        return environment
    # A helper that held anything is no copy of the state; what the test told it is as good as chosen here.
    chosen = Chosen(run.part.function.identity, block, None, None) if isinstance(term, HelperTerm) else None
    return _set(term, environment, Value("known", number, chosen))


def _evaluate(run: _Run, block: int, term: Term, environment: Environment) -> Value:
    match term:
        case Number(number=number, position=position, name=name):
            return Value("known", number, Chosen(run.part.function.identity, block, position, name))
        case StateTerm():
            return environment.state
        case HelperTerm(slot=slot):
            return environment.helpers[slot]
        case CastTerm(operand=operand, type=type_):
            value = _evaluate(run, block, operand, environment)
            return value._replace(number=convert(value.number, type_)) if value.kind == "known" else value
        case UnaryTerm(op=op, operand=operand, type=type_):
            value = _evaluate(run, block, operand, environment)
            result = apply_unary(op, value.number, type_) if value.kind == "known" else None
            return ANY if result is None else _computed(run, block, result)
        case BinaryTerm(op=op, left=left, right=right, type=type_):
            a = _evaluate(run, block, left, environment)
            b = _evaluate(run, block, right, environment)
            if a.kind == "known" and b.kind == "known":
                result = apply_binary(op, a.number, b.number, type_)
                return ANY if result is None else _computed(run, block, result)
            if op in ("==", "!="):
                for known, rest in ((a, b), (b, a)):
                    if known.kind == "known" and rest.kind == "other" and known.number in rest.excluded:
                        return Value("known", int(op == "!="))
    return ANY


def _computed(run: _Run, block: int, result: int) -> Value:
    return Value("known", result, Chosen(run.part.function.identity, block, None, None))
