"""Flow-sensitive abstract interpretation of one function: what each place can hold before each statement.

The published method (Cousot and Cousot, 1977): states are propagated along the graph in reverse postorder until
nothing changes; at the head of a loop a bound that moves is widened to the next constant of the function, and two
descending rounds take back what widening gave away. Small callees whose body is given are run inside the caller, on
the caller's own objects; of other callees an ``Effect`` is asked, the C library's are known, and all else may
change whatever outside code can reach.

What lasts between calls (statics, globals, members behind pointers) has its summary's value when the function starts.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from heapq import heappop, heappush
from typing import Final, TypeAlias

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Begin,
    Branch,
    Call,
    Cast,
    Const,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    IntType,
    Jump,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerType,
    Return,
    Statement,
    StructType,
    Switch,
    Terminator,
    Variable,
    VariablePlace,
)
from stepring.values.intervals import UNBOUNDED, constant, convert, number_type, union, whole, widen, within
from stepring.values.library import CONTRACTS, Contract
from stepring.values.refine import assume, refine_by_case, refine_by_default
from stepring.values.scan import expressions_of, places_in, walk_deep
from stepring.values.spots import Binding, Exposure, Frame, Places, Spot, facts_of, is_fixed
from stepring.values.states import (
    State,
    View,
    end_name,
    forget,
    includes,
    join_optional,
    join_states,
    read_spot,
    store_spot,
)
from stepring.values.types import Cell, Interval, VariableCell

PATIENCE: Final = 2
"""Joins at a loop head before it widens."""
LIMIT: Final = 60
"""Visits of a loop head after which every value that still changes is taken to be anything."""
WIDTHS: Final = (8, 16, 32, 64)


@dataclass(frozen=True, slots=True)
class Effect:
    """What a call of known code does.

    ``writes``: cells it may store into and what they then hold (None: what the summary says). ``certain``: cells
    among them that are stored on every path. ``through_pointers``: it also stores through pointers that it was
    given. ``returns``: its result, None for the type's range. ``comes_back``: False for a function that never
    returns. ``outward``: it calls unknown code.
    """

    writes: Mapping[Cell, Interval | None] = field(default_factory=dict)
    certain: frozenset[Cell] = frozenset()
    through_pointers: bool = False
    returns: Interval | None = None
    comes_back: bool = True
    outward: bool = False


def _nothing(name: str) -> None:
    return None


def _never(cell: Cell) -> bool:
    return False


@dataclass(frozen=True, slots=True, eq=False)
class Surroundings:
    """What a function's analysis may assume of the rest of the program.

    ``summaries``: what each lasting cell can hold whenever code of the program starts; a cell that is missing can
    hold anything. ``exposure``: what the program does with addresses; None where not all of it was read.
    ``effects``: the effect of a callee by its C name. ``bodies``: the body of a callee that is to be run in place.
    ``steady``: volatile cells that only the analysed code stores into. ``foreign``: cells that another context (an
    interrupt) may store into at any moment. ``depth``: how deep bodies are nested. ``track_pointees``: follow what
    pointers to scalars point to (they must not lead to device registers).
    """

    summaries: Mapping[Cell, Interval] = field(default_factory=dict)
    exposure: Exposure | None = None
    effects: Callable[[str], Effect | None] = _nothing
    bodies: Callable[[str], Function | None] = _nothing
    steady: Callable[[Cell], bool] = _never
    foreign: Callable[[Cell], bool] = _never
    depth: int = 2
    track_pointees: bool = False


@dataclass(slots=True)
class Record:
    """What is noted of a run: for each cell what is stored at all, and what it holds where other code can look.

    ``stored``: the join of all stores. ``left``: the join over returns and calls that are not run in place, of the
    cells that were stored into. ``pointees``: what is stored through pointers to scalars, by width. ``returned``:
    the value returned.
    """

    stored: dict[Cell, Interval] = field(default_factory=dict)
    left: dict[Cell, Interval] = field(default_factory=dict)
    pointees: dict[int, Interval] = field(default_factory=dict)
    called: set[str] = field(default_factory=set)
    calls_unknown: bool = False
    returned: Interval | None = None
    looks: list[State] = field(default_factory=list)

    def observe(self, spot: Spot, value: Interval) -> None:
        """Note a store."""
        if spot.private:
            return
        if spot.pointee:
            kind = number_type(spot.type)
            if kind is not None:
                known = self.pointees.get(kind.width)
                self.pointees[kind.width] = value if known is None else union(known, value)
        elif spot.cell is not None and number_type(spot.type) is not None:
            known = self.stored.get(spot.cell)
            self.stored[spot.cell] = value if known is None else union(known, value)


Edge: TypeAlias = tuple[int, State]


@dataclass(slots=True)
class Solution:
    """The states at the starts of the blocks that control reaches, and at the function's end."""

    entries: dict[int, State]
    leaving: State | None


@dataclass(frozen=True, slots=True)
class Shape:
    """A function's graph prepared: block numbers in reverse postorder, the heads of loops, widening thresholds."""

    order: Mapping[int, int]
    heads: frozenset[int]
    thresholds: Sequence[int]


_shapes: dict[int, tuple[Function, Shape]] = {}


def shape_of(function: Function) -> Shape:
    """The prepared graph of a function, computed once."""
    known = _shapes.get(id(function))
    if known is not None and known[0] is function:
        return known[1]
    shape = _find_shape(function)
    if len(_shapes) > 4096:
        _shapes.clear()
    _shapes[id(function)] = (function, shape)
    return shape


def targets_of(terminator: Terminator) -> tuple[int, ...]:
    """The blocks that may follow, without repetition."""
    if isinstance(terminator, Jump):
        return (terminator.target,)
    if isinstance(terminator, Branch):
        return (terminator.then, terminator.otherwise)
    if isinstance(terminator, Switch):
        return tuple(dict.fromkeys([*(case.target for case in terminator.cases), terminator.default]))
    return ()


def _find_shape(function: Function) -> Shape:
    finished: list[int] = []
    heads: set[int] = set()
    state: dict[int, int] = {0: 1}
    stack = [(0, iter(targets_of(function.blocks[0].terminator)))]
    while stack:
        block, rest = stack[-1]
        target = next(rest, None)
        if target is None:
            stack.pop()
            state[block] = 2
            finished.append(block)
        elif target not in state:
            state[target] = 1
            stack.append((target, iter(targets_of(function.blocks[target].terminator))))
        elif state[target] == 1:
            heads.add(target)
    order = {block: place for place, block in enumerate(reversed(finished))}
    values: set[int] = {0}
    for width in WIDTHS:
        values.update((-(1 << (width - 1)), (1 << (width - 1)) - 1, (1 << width) - 1))
    for block in order:
        here = function.blocks[block]
        for step in (*here.statements, here.terminator):
            for expression in expressions_of(step):
                for part in walk_deep(expression):
                    if isinstance(part, Const):
                        values.update((part.value - 1, part.value, part.value + 1))
        if isinstance(here.terminator, Switch):
            values.update(case.low for case in here.terminator.cases)
            values.update(case.high for case in here.terminator.cases)
    for variable in function.variables:
        if isinstance(variable.type, ArrayType) and variable.type.length is not None:
            values.update((variable.type.length - 1, variable.type.length))
    return Shape(order, frozenset(heads), sorted(values))


class Engine:
    """One analysis: the spots, the surroundings, the frames of callees that are run in place."""

    def __init__(self, surroundings: Surroundings) -> None:
        self.surroundings = surroundings
        self.places = Places(
            surroundings.summaries,
            surroundings.exposure,
            surroundings.steady,
            surroundings.foreign,
            surroundings.track_pointees,
        )
        self._inner: dict[tuple[int, int], Frame] = {}
        self._reached_by: dict[int, tuple[State, State | None]] = {}

    # ------------------------------------------------------------------------------------------------------ fixpoint

    def solve(self, frame: Frame, start: State, stack: tuple[str, ...]) -> Solution:
        """The states of a function that is entered in the state ``start``."""
        shape = shape_of(frame.function)
        order = shape.order
        entries: dict[int, State] = {0: start}
        visits: dict[int, int] = {}
        waiting = [(0, 0)]
        queued = {0}
        while waiting:
            _, block = heappop(waiting)
            queued.discard(block)
            visits[block] = visits.get(block, 0) + 1
            for target, state in self.flow(frame, block, entries[block], stack, None):
                old = entries.get(target)
                new = self._arrive(shape, target, old, state, visits.get(target, 0))
                if new is None:
                    continue
                entries[target] = new
                if target not in queued:
                    queued.add(target)
                    heappush(waiting, (order[target], target))
        if shape.heads:
            for _ in range(2):
                entries = self._descend(frame, start, entries, shape, stack)
        return Solution(entries, self._leaving(frame, entries, stack))

    def _arrive(self, shape: Shape, target: int, old: State | None, state: State, visits: int) -> State | None:
        """The target's new state when ``state`` arrives, or None if that brings nothing."""
        if old is None:
            return state
        if includes(self.places, old, state):
            return None
        joined = join_states(self.places, old, state)
        if target in shape.heads and visits > PATIENCE:
            self._widen(old, joined, shape.thresholds, visits > LIMIT)
        return joined

    def _widen(self, old: State, new: State, thresholds: Sequence[int], give_up: bool) -> None:
        for spot, value in list(new.values.items()):
            before = old.values.get(spot)
            if before is None:
                if not spot.definite:
                    continue
                before = read_spot(self.places, old, spot)
            if value == before:
                continue
            limits = whole(spot.type)
            wider = limits if give_up else widen(before, value, thresholds)
            new.values[spot] = within(wider, limits.low, limits.high) or limits

    def _descend(
        self, frame: Frame, start: State, entries: dict[int, State], shape: Shape, stack: tuple[str, ...]
    ) -> dict[int, State]:
        """Every block's state once more, from those of its predecessors without widening."""
        result: dict[int, State] = {0: start}
        arrivals: dict[int, State | None] = {}
        back: dict[int, list[State]] = {}
        for block, state in entries.items():
            for target, arriving in self.flow(frame, block, state, stack, None):
                if shape.order[target] <= shape.order[block]:
                    back.setdefault(target, []).append(arriving)
        for block in sorted(entries, key=shape.order.__getitem__):
            here = arrivals.get(block)
            for state in back.get(block, ()):
                here = join_optional(self.places, here, state)
            if block == 0:
                here = start if here is None else join_states(self.places, start, here)
            if here is None:
                continue
            result[block] = here
            for target, arriving in self.flow(frame, block, here, stack, None):
                if shape.order[target] > shape.order[block]:
                    arrivals[target] = join_optional(self.places, arrivals.get(target), arriving)
        return result

    def _leaving(self, frame: Frame, entries: Mapping[int, State], stack: tuple[str, ...]) -> State | None:
        """The joined state at the function's returns."""
        result: State | None = None
        for block, state in entries.items():
            terminator = frame.function.blocks[block].terminator
            if isinstance(terminator, Return):
                view = self.run_statements(frame, block, state, stack, None)
                if view is not None:
                    self.give_result(view, terminator)
                    result = join_optional(self.places, result, view.state)
        return result

    def note(self, frame: Frame, solution: Solution, stack: tuple[str, ...], record: Record) -> None:
        """Go once through all statements of a solution and note what they store and leave."""
        for block, state in solution.entries.items():
            terminator = frame.function.blocks[block].terminator
            view = self.run_statements(frame, block, state, stack, record)
            if view is not None and isinstance(terminator, Return) and terminator.value is not None:
                value = view.evaluate(terminator.value)
                if not frame.prefix and value is not UNBOUNDED:
                    record.returned = value if record.returned is None else union(record.returned, value)
            if view is not None and not targets_of(terminator) and not frame.prefix:
                record.looks.append(view.state.copy())

    # ------------------------------------------------------------------------------------------------------ blocks

    def flow(self, frame: Frame, block: int, state: State, stack: tuple[str, ...], record: Record | None) -> list[Edge]:
        """The states in which control goes on from a block that is entered in ``state``."""
        view = self.run_statements(frame, block, state, stack, record)
        if view is None:
            return []
        return leave(self.places, view, frame.function.blocks[block].terminator)

    def run_statements(
        self, frame: Frame, block: int, state: State, stack: tuple[str, ...], record: Record | None
    ) -> View | None:
        """The state after a block's statements, or None if control does not get past them."""
        view = View(frame, state.copy(), record.observe if record is not None else None)
        for statement in frame.function.blocks[block].statements:
            if not self.execute(view, statement, stack, record):
                return None
        return view

    def execute(self, view: View, statement: Statement, stack: tuple[str, ...], record: Record | None) -> bool:
        """Change the view's state as the statement does; False if control does not get past it."""
        if isinstance(statement, Assign):
            self.assign(view, statement)
            return True
        if isinstance(statement, Call):
            return self.call(view, statement, stack, record)
        if isinstance(statement, Begin):
            self.blur(view, VariablePlace(statement.variable), None)
            return True
        for place in statement.places:
            self.blur(view, place, None)
        return True

    def assign(self, view: View, statement: Assign) -> None:
        """An assignment; of a structure, member by member."""
        place, value = statement.place, statement.value
        if number_type(place.type) is None:
            if isinstance(place.type, StructType):
                self._copy_members(view, place, value)
            return
        view.store(place, view.evaluate(value), value)

    def _copy_members(self, view: View, target: PlaceExpr, value: Expr) -> None:
        source = view.frame.access(value.place) if isinstance(value, Load) else None
        offset = len(view.frame.access(target).path)
        found = []
        for spot in self._members_under(view, target):
            what = whole(spot.type)
            if source is not None and source.definite:
                other = self.places.named(source.root, source.path + spot.path[offset:])
                if other is not None:
                    what = read_spot(self.places, view.state, other)
            found.append((spot, what))
        for spot, what in found:
            store_spot(self.places, view.state, spot, what, view.observe)

    def _members_under(self, view: View, place: PlaceExpr) -> list[Spot]:
        """The spots of an object: its own, or those of its parts."""
        if number_type(place.type) is not None:
            return [view.frame.spot(place)]
        access = view.frame.access(place)
        kind = place.type
        while isinstance(kind, ArrayType):
            kind = kind.element
        exposure = self.surroundings.exposure
        if isinstance(kind, StructType) and kind is place.type and exposure is not None:
            for path, member in exposure.members.get(kind.identity, {}).items():
                view.frame.spot(member_place(place, kind.identity, path, member))
        length = len(access.path)
        result: list[Spot] = []
        for spot in self.places.all():
            if spot.root == access.root and len(spot.path) > length and _under(access.path, spot.path):
                if "->" not in spot.path[length:]:
                    result.append(spot)
        if isinstance(kind, IntType) and isinstance(place.type, ArrayType):
            element = ElementPlace(place, Load(place, kind), kind)
            result.append(view.frame.spot(element))
        return result

    def blur(self, view: View, place: PlaceExpr, value: Interval | None) -> None:
        """The object may hold anything (or ``value`` in each of its parts) from now on."""
        for spot in self._members_under(view, place):
            what = value if value is not None else whole(spot.type)
            store_spot(self.places, view.state, spot, what, view.observe if not spot.private else None)

    # ------------------------------------------------------------------------------------------------------ calls

    def call(self, view: View, call: Call, stack: tuple[str, ...], record: Record | None) -> bool:
        """A call; False if it does not come back."""
        name = call.callee.name if isinstance(call.callee, FunctionName) else None
        result: Interval | None = None
        body = self.body(name, stack)
        if name is not None and body is not None:
            inner = self.enter(view, call, body, stack, record)
            if inner is None:
                return False
            result = inner
        else:
            if record is not None and name not in CONTRACTS:
                if name is None:
                    record.calls_unknown = True
                else:
                    record.called.add(name)
            effect = self.surroundings.effects(name) if name is not None else None
            contract = CONTRACTS.get(name) if name is not None and effect is None else None
            if contract is not None:
                if not contract.returns:
                    return False
                result = self.library(view, call, contract)
            else:
                if record is not None:
                    record.looks.append(view.state.copy())
                result = self.outside(view, effect)
                if effect is not None and not effect.comes_back:
                    return False
        if call.result is not None:
            kind = number_type(call.result.type)
            if kind is None:
                self.blur(view, call.result, None)
            else:
                value = convert(result, kind) if result is not None and result is not UNBOUNDED else None
                view.store(call.result, value if value is not None else whole(kind))
        return True

    def body(self, name: str | None, stack: tuple[str, ...]) -> Function | None:
        """The body to run in place for a callee, if there is one and the nesting allows it."""
        if name is None or len(stack) > self.surroundings.depth:
            return None
        body = self.surroundings.bodies(name)
        return body if body is not None and body.identity not in stack else None

    def frame_for(self, view: View, call: Call, body: Function) -> Frame:
        """The frame in which a callee is run for one call statement."""
        key = (id(view.frame), id(call))
        known = self._inner.get(key)
        if known is not None and known.function is body:
            return known
        caller = facts_of(view.frame.function)
        callee = facts_of(body)
        bindings = {}
        for parameter, argument in zip(body.parameters, call.arguments, strict=False):
            if isinstance(parameter.type, PointerType) and parameter.identity in callee.unassigned:
                if is_fixed(argument, caller.unassigned, caller.fixed):
                    bindings[parameter.identity] = Binding(view.frame, argument)
        frame = Frame(self.places, body, f"{view.frame.prefix}{body.name}#{len(self._inner)}/", bindings)
        self._inner[key] = frame
        return frame

    def begin(self, view: View, call: Call, body: Function) -> View:
        """The callee's view at its start: parameters hold the arguments."""
        frame = self.frame_for(view, call, body)
        inner = View(frame, view.state, view.observe)
        values = [view.evaluate(argument) for argument in call.arguments]
        for number, parameter in enumerate(body.parameters):
            kind = number_type(parameter.type)
            if kind is None:
                continue
            given = number < len(values) and values[number] is not UNBOUNDED
            known = convert(values[number], kind) if given else None
            spot = inner.store(VariablePlace(parameter), known if known is not None else whole(kind))
            if number < len(values):
                definition = view._definition(Cast(call.arguments[number], kind), spot)
                if definition is not None and isinstance(parameter.type, IntType):
                    view.state.definitions[spot] = definition
        return inner

    def enter(
        self, view: View, call: Call, body: Function, stack: tuple[str, ...], record: Record | None
    ) -> Interval | None:
        """Run a callee in place; its result (``UNBOUNDED`` if it has none), or None if it does not come back."""
        inner = self.begin(view, call, body)
        frame = inner.frame
        inner_stack = (*stack, body.identity)
        memory = self._reached_by.get(id(frame))
        if record is None and memory is not None and _same(memory[0], inner.state):
            leaving = memory[1]
        else:
            before = inner.state.copy()
            solution = self.solve(frame, inner.state, inner_stack)
            if record is not None:
                self.note(frame, solution, inner_stack, record)
            leaving = solution.leaving
            self._reached_by[id(frame)] = (before, leaving)
        if leaving is None:
            return None
        after = leaving.copy()
        result = self.take_result(frame, after)
        self.drop_frame(frame, after)
        view.state = after
        return result

    def give_result(self, view: View, terminator: Return) -> None:
        """Keep a return value for the caller, in a place of its own."""
        if terminator.value is not None and number_type(terminator.value.type) is not None:
            place = result_place(view.frame.function)
            if number_type(place.type) is not None:
                View(view.frame, view.state).store(place, view.evaluate(terminator.value), terminator.value)

    def take_result(self, frame: Frame, state: State) -> Interval:
        """The value that a callee returned; ``UNBOUNDED`` if none."""
        place = result_place(frame.function)
        if number_type(place.type) is None:
            return UNBOUNDED
        return read_spot(self.places, state, frame.spot(place))

    def drop_frame(self, frame: Frame, state: State) -> None:
        """A callee's own variables are gone."""
        prefix = frame.prefix
        for spot in [spot for spot in state.values if spot.root.startswith(prefix)]:
            if spot.reached:
                end_name(self.places, state, spot)
            else:
                state.values.pop(spot, None)
        for spot in [
            spot
            for spot, by in state.definitions.items()
            if spot.root.startswith(prefix) or any(read.root.startswith(prefix) for read in by.reads)
        ]:
            del state.definitions[spot]

    def outside(self, view: View, effect: Effect | None) -> Interval | None:
        """Code that is not run in place: apply its effect, or forget everything that it can reach."""
        if effect is None or effect.outward:
            forget(self.places, view.state, lambda spot: not spot.private)
            return effect.returns if effect is not None else None
        for cell, value in effect.writes.items():
            self._write_cell(view, cell, value, cell in effect.certain)
        if effect.through_pointers:
            forget(self.places, view.state, lambda spot: any(bucket[0] == "scalar" for bucket in spot.buckets))
        return effect.returns

    def _write_cell(self, view: View, cell: Cell, value: Interval | None, certain: bool) -> None:
        state = view.state
        touched = [spot for spot in self.places.all() if spot.cell == cell]
        if value is None:
            reach = set(touched)
            for spot in touched:
                reach.update(self.places.aliases(spot))
            forget(self.places, state, reach.__contains__)
            return
        for spot in touched:
            single = isinstance(cell, VariableCell) and spot.definite and "[]" not in cell.path
            store_spot(self.places, state, spot, value, None, weak=not (certain and single))

    def library(self, view: View, call: Call, contract: Contract) -> Interval | None:
        """A function of the C library."""
        filled = None
        if contract.fills and len(call.arguments) > 1 and view.evaluate(call.arguments[1]) == constant(0):
            filled = constant(0)
        for number, argument in enumerate(call.arguments):
            if number in contract.writes or (contract.onward is not None and number >= contract.onward):
                self._write_target(view, argument, filled)
        kind = number_type(call.result.type) if call.result is not None else None
        if kind is None or (contract.low is None and contract.high is None):
            return None
        low = kind.low if contract.low is None else contract.low
        return within(whole(kind), low, kind.high if contract.high is None else contract.high)

    def _write_target(self, view: View, pointer: Expr, value: Interval | None) -> None:
        """Something is written to where an argument points."""
        while isinstance(pointer, Cast) and isinstance(pointer.type, PointerType):
            pointer = pointer.operand
        kind = pointer.type.to if isinstance(pointer.type, PointerType) else None
        if kind is None:
            return
        if isinstance(pointer, AddressOf):
            place = pointer.place
            if isinstance(place, ElementPlace):
                place = place.base
            self.blur(view, place, value if place is pointer.place and isinstance(place.type, StructType) else None)
            if value is not None and place is not pointer.place:
                self.blur(view, place, None)
            return
        if isinstance(kind, StructType):
            self.blur(view, DerefPlace(pointer, kind), value)
            return
        byte = IntType("unsigned char", 8, False, 1)
        self.blur(view, DerefPlace(pointer, byte if number_type(kind) is None else kind), None)

    # ------------------------------------------------------------------------------------------------------ looks

    def settle_looks(self, record: Record) -> None:
        """Other code could see the lasting cells in some states: note what those hold that the run stores into."""
        for state in record.looks:
            for spot in state.values:
                if spot.private or spot.cell is None or spot.cell not in record.stored:
                    continue
                value = read_spot(self.places, state, spot) if spot.definite else state.values[spot]
                known = record.left.get(spot.cell)
                record.left[spot.cell] = value if known is None else union(known, value)
        record.looks.clear()


def _same(a: State, b: State) -> bool:
    return (
        a.values == b.values
        and a.definitions.keys() == b.definitions.keys()
        and all(other.value is b.definitions[spot].value for spot, other in a.definitions.items())
    )


def _under(prefix: tuple[str, ...], path: tuple[str, ...]) -> bool:
    """Whether a path starts with a prefix, unknown elements taken for equal."""
    return all(x == y or (x[0] == y[0] == "[") for x, y in zip(prefix, path, strict=False))


def member_place(base: PlaceExpr, struct: str, path: tuple[str, ...], kind: object) -> PlaceExpr:
    """The place of a member of a structure by its path of names."""
    place = base
    for name in path[:-1]:
        place = MemberPlace(place, struct, name, StructType(struct))
    return MemberPlace(place, struct, path[-1], kind)  # type: ignore[arg-type]


_RESULTS: dict[int, tuple[Function, VariablePlace]] = {}


def result_place(function: Function) -> VariablePlace:
    """The place in which a function's result is kept for its caller."""
    known = _RESULTS.get(id(function))
    if known is not None and known[0] is function:
        return known[1]
    place = VariablePlace(Variable("%result", "%result", function.type.returns, "temporary"))
    if len(_RESULTS) > 4096:
        _RESULTS.clear()
    _RESULTS[id(function)] = (function, place)
    return place


def leave(places: Places, view: View, terminator: Terminator) -> list[Edge]:
    """The states in which control goes on after a terminator; the view's state is used up."""
    if isinstance(terminator, Jump):
        return [(terminator.target, view.state)]
    if isinstance(terminator, Branch):
        edges = []
        for target, holds in ((terminator.then, True), (terminator.otherwise, False)):
            side = View(view.frame, view.state.copy() if holds else view.state)
            if assume(side, terminator.condition, holds):
                edges.append((target, side.state))
        return edges
    if isinstance(terminator, Switch):
        return _leave_switch(places, view, terminator)
    return []


def _leave_switch(places: Places, view: View, switch: Switch) -> list[Edge]:
    arriving: dict[int, State] = {}
    for case in switch.cases:
        side = View(view.frame, view.state.copy())
        if refine_by_case(side, switch.value, case.low, case.high):
            known = arriving.get(case.target)
            arriving[case.target] = side.state if known is None else join_states(places, known, side.state)
    side = View(view.frame, view.state)
    ranges = sorted((case.low, case.high) for case in switch.cases)
    if refine_by_default(side, switch.value, ranges):
        known = arriving.get(switch.default)
        arriving[switch.default] = side.state if known is None else join_states(places, known, side.state)
    return list(arriving.items())


# ---------------------------------------------------------------------------------------------------------- results


@dataclass(frozen=True, slots=True, eq=False)
class FunctionValues:
    """What the places of a function can hold.

    ``record.left`` is what lasting cells hold at returns and before calls that are not run in place, of those the
    function stores into; ``record.stored`` what is ever stored; ``record.returned`` what is returned.
    """

    function: Function
    engine: Engine
    frame: Frame
    solution: Solution
    record: Record
    _views: dict[int, list[View]] = field(default_factory=dict)

    def reached(self, block: int) -> bool:
        """Whether control can come to the block."""
        return block in self.solution.entries

    def before(self, block: int, statement: int) -> View | None:
        """What holds before a statement, or at the terminator (``statement`` = their number); None if never reached.

        The view has ``read(place)``, ``evaluate(expression)`` and ``cells()``.
        """
        if block not in self.solution.entries:
            return None
        views = self._views.get(block)
        if views is None:
            views = self._replay(block)
            self._views[block] = views
        return views[statement] if statement < len(views) else None

    def at_end(self, block: int) -> View | None:
        """What holds at the block's terminator."""
        return self.before(block, len(self.function.blocks[block].statements))

    def after(self, block: int, target: int) -> View | None:
        """What holds when control goes on from a block to a target; None if it never does."""
        view = self.at_end(block)
        if view is None:
            return None
        edges = leave(self.engine.places, View(self.frame, view.state.copy()), self.function.blocks[block].terminator)
        for number, state in edges:
            if number == target:
                return View(self.frame, state)
        return None

    @property
    def exits(self) -> Mapping[Cell, Interval]:
        """What lasting cells hold where other code can see them."""
        return self.record.left

    @property
    def returned(self) -> Interval | None:
        """The value returned; None if the function returns none or never returns."""
        return self.record.returned

    def _replay(self, block: int) -> list[View]:
        view = View(self.frame, self.solution.entries[block].copy())
        views = []
        for statement in self.function.blocks[block].statements:
            views.append(View(self.frame, view.state.copy()))
            if not self.engine.execute(view, statement, (self.function.identity,), None):
                return views
        views.append(View(self.frame, view.state))
        return views


def start_state(frame: Frame, entry: Mapping[Cell, Interval]) -> State:
    """The state at a function's start, in which the given cells hold the given values."""
    state = State()
    if not entry:
        return state
    for place in places_in(frame.function):
        if number_type(place.type) is not None:
            spot = frame.spot(place)
            value = entry.get(spot.cell) if spot.cell is not None else None
            if value is not None and spot.tracked and spot.definite:
                state.values[spot] = value
    return state


def analyse(
    function: Function, entry: Mapping[Cell, Interval] | None = None, surroundings: Surroundings | None = None
) -> FunctionValues:
    """What the places of a function can hold, if the cells of ``entry`` (parameters too) hold those values at its
    start.

    Only parts of arrays of which all elements share a cell cannot be given a start value.
    """
    engine = Engine(surroundings if surroundings is not None else Surroundings())
    frame = Frame(engine.places, function)
    stack = (function.identity,)
    solution = engine.solve(frame, start_state(frame, entry or {}), stack)
    record = Record()
    engine.note(frame, solution, stack, record)
    engine.settle_looks(record)
    return FunctionValues(function, engine, frame, solution, record)
