"""The part of a function that matters for one state variable.

A function is cut down to what can change or test the state or one of its helpers (copies, ``next`` variables, a
setter's parameters): the rest of its statements go, and blocks that neither change nor test anything are passed over,
so that running the slice costs what the machine is worth and not what the function is long. Expressions become small
terms.
"""

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import NamedTuple, TypeAlias

from stepring.meaning.builder import successors
from stepring.meaning.types import (
    Assign,
    Begin,
    Binary,
    Branch,
    Call,
    Cast,
    Clobber,
    Const,
    CType,
    Expr,
    Function,
    FunctionName,
    IntType,
    Load,
    PlaceExpr,
    PointerType,
    Return,
    Switch,
    Unary,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.keys import place_key, uncast
from stepring.shapes.names import sets

MOST_HELPERS = 64


class Number(NamedTuple):
    """A constant, with the place and name it was chosen under."""

    number: int
    position: Position | None
    name: str | None


class StateTerm(NamedTuple):
    """The state's value now."""


class HelperTerm(NamedTuple):
    """A helper's value now."""

    slot: int


class CastTerm(NamedTuple):
    """A conversion."""

    operand: "Term"
    type: CType


class UnaryTerm(NamedTuple):
    """A unary operator."""

    op: str
    operand: "Term"
    type: CType


class BinaryTerm(NamedTuple):
    """A binary operator."""

    op: str
    left: "Term"
    right: "Term"
    type: CType


class AnyTerm(NamedTuple):
    """A value that the slice does not follow."""


Term: TypeAlias = Number | StateTerm | HelperTerm | CastTerm | UnaryTerm | BinaryTerm | AnyTerm
ANY_TERM = AnyTerm()


class StoreOp(NamedTuple):
    """Store a term in the state (slot None) or in a helper; ``commit``: the helper is the state's next value, kept
    till later."""

    slot: int | None
    term: Term
    position: Position
    commit: bool = False


class CallOp(NamedTuple):
    """Call a function that may store the state; its result goes to ``slot`` (None: nowhere, -1: the state)."""

    callee: Function
    call: Call
    arguments: tuple[Term, ...]
    slot: int | None


class OutsideOp(NamedTuple):
    """Hand constants to a function of another unit, which may be a setter."""

    name: str
    arguments: tuple[Term, ...]
    position: Position


Op: TypeAlias = StoreOp | CallOp | OutsideOp


class CaseOp(NamedTuple):
    """One label of a switch on a term."""

    low: int
    high: int
    targets: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class SliceBlock:
    """A block's operations, then where it leads.

    ``test`` is the condition or control if it tells about the state or a helper, else None and ``plain`` are all
    successors. ``then``,
    ``otherwise`` and ``cases`` hold the next blocks of the slice, the blocks between having been passed over.
    """

    ops: tuple[Op, ...]
    test: Term | None
    plain: tuple[int, ...]
    then: tuple[int, ...] = ()
    otherwise: tuple[int, ...] = ()
    cases: tuple[CaseOp, ...] = ()
    returned: Term | None = None
    leaves: bool = False
    # A dispatch on the state itself inside a loop.
    again: bool = False
    position: Position | None = None


@dataclass(frozen=True, slots=True)
class Slice:
    """A function cut down for one key and instance; ``entry`` are the first blocks, ``live`` the helpers needed at a
    block."""

    function: Function
    helpers: tuple[str, ...]
    blocks: dict[int, SliceBlock]
    entry: tuple[int, ...]
    live: dict[int, frozenset[int]]
    # The helpers that stand for the state: a dispatch on one makes its value the state.
    aliases: frozenset[int]


def make_slice(
    function: Function,
    key: str,
    instance: str,
    callee_of: Callable[[str], Function | None],
    writers: frozenset[str],
    commits: frozenset[str],
    aliases: frozenset[str] = frozenset(),
    outside: bool = False,
) -> Slice:
    """The slice of a function for one object's state; ``aliases`` are variables that stand for it there.

    ``outside`` says that functions of other units can store it.
    """
    maker = _Maker(function, key, instance, callee_of, writers, commits, aliases, outside)
    names = maker.helpers()
    maker.slots = {name: number for number, name in enumerate(names)}
    ops = [maker.operations(number) for number in range(len(function.blocks))]
    tests = [maker.test(number) for number in range(len(function.blocks))]
    keep = {
        number
        for number, block in enumerate(function.blocks)
        if ops[number] or tests[number] is not None or isinstance(block.terminator, Return)
    }
    asked = {target for number in keep for target in successors(function.blocks[number].terminator)} | {0}
    onward = {number: _onward(function, number, keep) for number in sorted(asked)}
    blocks = {number: maker.block(number, ops[number], tests[number], onward) for number in keep}
    standing = frozenset(number for number, name in enumerate(names) if name in aliases)
    return Slice(function, names, blocks, onward[0], _liveness(blocks), standing)


def _onward(function: Function, start: int, keep: set[int]) -> tuple[int, ...]:
    """The first blocks of the slice that control comes to from a block, itself included."""
    found: set[int] = set()
    seen = {start}
    pending = [start]
    while pending:
        number = pending.pop()
        if number in keep:
            found.add(number)
            continue
        for target in successors(function.blocks[number].terminator):
            if target not in seen:
                seen.add(target)
                pending.append(target)
    return tuple(sorted(found))


def _liveness(blocks: dict[int, SliceBlock]) -> dict[int, frozenset[int]]:
    """The helpers whose value a block, or what follows it, still reads."""
    live: dict[int, frozenset[int]] = {number: frozenset() for number in blocks}
    changed = True
    while changed:
        changed = False
        for number, block in blocks.items():
            after: set[int] = set()
            for target in following(block):
                after |= live[target]
            for term in (block.test, block.returned):
                if term is not None:
                    after |= set(_slots(term))
            for op in reversed(block.ops):
                if not isinstance(op, OutsideOp) and op.slot is not None and op.slot >= 0:
                    after.discard(op.slot)
                for term in (op.term,) if isinstance(op, StoreOp) else op.arguments:
                    after |= set(_slots(term))
            if after != live[number]:
                live[number] = frozenset(after)
                changed = True
    return live


def following(block: SliceBlock) -> Iterator[int]:
    """Every block of the slice that a block can lead to."""
    yield from block.plain
    yield from block.then
    yield from block.otherwise
    for case in block.cases:
        yield from case.targets


def _slots(term: Term) -> Iterator[int]:
    if isinstance(term, HelperTerm):
        yield term.slot
    elif isinstance(term, CastTerm | UnaryTerm):
        yield from _slots(term.operand)
    elif isinstance(term, BinaryTerm):
        yield from _slots(term.left)
        yield from _slots(term.right)


@dataclass(slots=True)
class _Maker:
    """What making one slice needs at every step."""

    function: Function
    key: str
    instance: str
    callee_of: Callable[[str], Function | None]
    writers: frozenset[str]
    commits: frozenset[str]
    aliases: frozenset[str]
    outside: bool
    slots: dict[str, int] | None = None

    def is_state(self, place: PlaceExpr) -> bool:
        """Whether a place is the state of the object in question."""
        found = place_key(place, self.function.identity)
        return found is not None and found.key == self.key and found.instance == self.instance

    def helpers(self) -> tuple[str, ...]:
        """The variables whose constants flow into the state, or that hold copies of it."""
        assigned: list[tuple[str, Expr | None]] = []
        wanted: list[str] = []
        for block in self.function.blocks:
            for statement in block.statements:
                if isinstance(statement, Assign):
                    if self.is_state(statement.place):
                        wanted.extend(_variables(statement.value))
                    elif isinstance(statement.place, VariablePlace):
                        name = statement.place.variable.identity
                        assigned.append((name, statement.value))
                        inner = uncast(statement.value)
                        if isinstance(inner, Load) and self.is_state(inner.place):
                            wanted.append(name)
                elif isinstance(statement, Call) and isinstance(statement.result, VariablePlace):
                    name = statement.callee.name if isinstance(statement.callee, FunctionName) else ""
                    known = self.callee_of(name) if name else None
                    if known is not None:
                        assigned.append((statement.result.variable.identity, None))
                    if known is not None and self.is_getter(known):
                        wanted.append(statement.result.variable.identity)
                    if known is not None and known.identity in self.writers:
                        for argument in statement.arguments:
                            wanted.extend(_variables(argument))
                elif isinstance(statement, Call):
                    name = statement.callee.name if isinstance(statement.callee, FunctionName) else ""
                    known = self.callee_of(name) if name else None
                    if known is not None and known.identity in self.writers:
                        for argument in statement.arguments:
                            wanted.extend(_variables(argument))
            if isinstance(block.terminator, Return) and block.terminator.value is not None:
                wanted.extend(_variables(block.terminator.value))
        wanted = list(dict.fromkeys([*sorted(self.aliases), *wanted, *self.commits]))
        size = -1
        while size != len(wanted):
            size = len(wanted)
            for name, value in assigned:
                if name in wanted and value is not None:
                    wanted.extend(other for other in _variables(value) if other not in wanted)
        parameters = {parameter.identity for parameter in self.function.parameters}
        useful = {name for name in wanted if name in parameters}
        useful |= {name for name, value in assigned if value is None or self._constant_or_state(value)}
        size = -1
        while size != len(useful):
            size = len(useful)
            for name, value in assigned:
                if value is not None and any(other in useful for other in _variables(value)):
                    useful.add(name)
        return tuple(name for name in wanted if name in useful and name != self.instance)[:MOST_HELPERS]

    def is_getter(self, function: Function) -> bool:
        """Whether a function does nothing but return the state."""
        end = function.blocks[0].terminator
        if len(function.blocks) != 1 or function.blocks[0].statements or not isinstance(end, Return):
            return False
        inner = uncast(end.value) if end.value is not None else None
        found = place_key(inner.place, function.identity) if isinstance(inner, Load) else None
        return found is not None and found.key == self.key

    def _constant_or_state(self, value: Expr) -> bool:
        inner = uncast(value)
        return isinstance(inner, Const) or (isinstance(inner, Load) and self.is_state(inner.place))

    def operations(self, number: int) -> tuple[Op, ...]:
        """A block's statements that store the state or a helper, or call what may."""
        found: list[Op] = []
        for statement in self.function.blocks[number].statements:
            match statement:
                case Assign(place=place, value=value, position=position):
                    slot = self.slot(place)
                    if slot is not None:
                        commit = isinstance(place, VariablePlace) and place.variable.identity in self.commits
                        found.append(StoreOp(None if slot < 0 else slot, self.term(value), position, commit))
                case Call():
                    found.extend(self.call(statement))
                case Begin(variable=variable, position=position):
                    assert self.slots is not None
                    if variable.identity in self.slots:
                        found.append(StoreOp(self.slots[variable.identity], ANY_TERM, position))
                case Clobber(places=places, position=position):
                    for place in places:
                        slot = self.slot(place)
                        if slot is not None:
                            found.append(StoreOp(None if slot < 0 else slot, ANY_TERM, position))
        return tuple(found)

    def slot(self, place: PlaceExpr) -> int | None:
        """-1 for the state, a helper's number, or None."""
        if self.is_state(place):
            return -1
        assert self.slots is not None
        return self.slots.get(place.variable.identity) if isinstance(place, VariablePlace) else None

    def call(self, call: Call) -> Iterator[Op]:
        """A call that can change the state, or whose result is stored in it or a helper."""
        slot = self.slot(call.result) if call.result is not None else None
        name = call.callee.name if isinstance(call.callee, FunctionName) else ""
        callee = self.callee_of(name) if name else None
        if callee is not None and (callee.identity in self.writers or slot is not None):
            yield CallOp(callee, call, tuple(self.term(argument) for argument in call.arguments), slot)
        elif slot is not None:
            yield StoreOp(None if slot < 0 else slot, ANY_TERM, call.position)
        elif self.outside and callee is None and sets(name):
            constants = tuple(
                self.term(argument) if isinstance(uncast(argument), Const) else ANY_TERM for argument in call.arguments
            )
            if any(constant != ANY_TERM for constant in constants):
                yield OutsideOp(name, constants, call.position)

    def term(self, expr: Expr) -> Term:
        """An expression as a term; what holds neither the state nor a helper nor constants alone is any value."""
        match expr:
            case Const(value=value, position=position, name=name):
                return Number(value, position, name)
            case Load(place=place):
                slot = self.slot(place)
                return ANY_TERM if slot is None else StateTerm() if slot < 0 else HelperTerm(slot)
            case Cast(operand=operand, type=type_):
                inner = self.term(operand)
                known = isinstance(type_, IntType | PointerType)
                return inner if isinstance(inner, AnyTerm) or not known else CastTerm(inner, type_)
            case Unary(op=op, operand=operand, type=type_):
                inner = self.term(operand)
                return inner if isinstance(inner, AnyTerm) else UnaryTerm(op, inner, type_)
            case Binary(op=op, left=left, right=right, type=type_):
                one, other = self.term(left), self.term(right)
                if isinstance(one, AnyTerm) or isinstance(other, AnyTerm):
                    return ANY_TERM
                return BinaryTerm(op, one, other, type_)
        return ANY_TERM

    def test(self, number: int) -> Term | None:
        """A terminator's condition or control, if it tells anything."""
        terminator = self.function.blocks[number].terminator
        if isinstance(terminator, Branch):
            term = self.term(terminator.condition)
        elif isinstance(terminator, Switch):
            term = self.term(terminator.value)
        else:
            return None
        return None if isinstance(term, AnyTerm) else term

    def block(
        self, number: int, ops: tuple[Op, ...], test: Term | None, onward: dict[int, tuple[int, ...]]
    ) -> SliceBlock:
        """A block of the slice."""
        terminator = self.function.blocks[number].terminator
        if isinstance(terminator, Return):
            returned = self.term(terminator.value) if terminator.value is not None else None
            return SliceBlock(ops, None, (), returned=returned, leaves=True, position=terminator.position)
        if test is None:
            plain = {block for target in successors(terminator) for block in onward[target]}
            return SliceBlock(ops, None, tuple(sorted(plain)))
        if isinstance(terminator, Branch):
            return SliceBlock(
                ops, test, (), onward[terminator.then], onward[terminator.otherwise], position=terminator.position
            )
        assert isinstance(terminator, Switch)
        cases = tuple(CaseOp(case.low, case.high, onward[case.target]) for case in terminator.cases)
        inner = test
        while isinstance(inner, CastTerm):
            inner = inner.operand
        again = isinstance(inner, StateTerm) and _returns(self.function, number)
        return SliceBlock(
            ops,
            test,
            (),
            otherwise=onward[terminator.default],
            cases=cases,
            again=again,
            position=terminator.syntax.position,
        )


def _returns(function: Function, block: int) -> bool:
    """Whether control can come to a block again."""
    seen: set[int] = set()
    pending = list(successors(function.blocks[block].terminator))
    while pending:
        number = pending.pop()
        if number == block:
            return True
        if number not in seen:
            seen.add(number)
            pending.extend(successors(function.blocks[number].terminator))
    return False


def _variables(expr: Expr) -> Iterator[str]:
    """The integer variables that an expression reads directly."""
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
