"""Following a function path by path with values, instead of joining paths: what one call does to an index, step by
step.

Where the values decide a branch only that side is followed; elsewhere the walk forks, and each side knows what its
condition tells. Callees whose body is given are walked through in place. With a single start value for a ring's index
this runs the advance of that index; the events then say which subscripts were used and what was left.

A value *depends* on a tracked cell if it was computed from what the cell held at the start; being chosen by a test of
the cell is no dependence.
"""

from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Literal

from stepring.meaning.types import (
    AddressOf,
    Assign,
    Branch,
    Call,
    Cast,
    Clobber,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerStep,
    Return,
    Statement,
    Switch,
    Terminator,
    VariablePlace,
)
from stepring.places import Position
from stepring.values.engine import Engine
from stepring.values.events import NOTHING, Ending, Event, Walk
from stepring.values.execution import leave, result_place
from stepring.values.frames import Frame
from stepring.values.intervals import number_type, union
from stepring.values.library import CONTRACTS
from stepring.values.scan import expressions_of, inside_place, parts_of, places_in
from stepring.values.spots import Spot
from stepring.values.states import State, View, read_spot
from stepring.values.surroundings import Effect, Surroundings
from stepring.values.types import Cell, FieldCell, Interval


@dataclass(frozen=True, slots=True)
class _Chain:
    """Events, the last one first, shared between the paths that a fork makes."""

    event: Event
    before: "_Chain | None"


@dataclass(slots=True)
class _Activation:
    """A function on the way: where it goes on, and the call that it returns to."""

    frame: Frame
    block: int
    step: int
    call: Call | None


@dataclass(slots=True, eq=False)
class _Path:
    """One path so far. ``disturbed`` are the cells that it stored into and what their spots share with others that
    may be
    the same; None once anything may have been changed."""

    state: State
    activations: list[_Activation]
    taints: dict[Spot, frozenset[Cell]] = field(default_factory=dict)
    visits: dict[tuple[int, int], int] = field(default_factory=dict)
    events: _Chain | None = None
    disturbed: set[object] | None = field(default_factory=set)

    def copy(self, state: State) -> "_Path":
        return _Path(
            state,
            [_Activation(a.frame, a.block, a.step, a.call) for a in self.activations],
            dict(self.taints),
            dict(self.visits),
            self.events,
            set(self.disturbed) if self.disturbed is not None else None,
        )


class _Walker:
    def __init__(
        self, start: Mapping[Cell, Interval], surroundings: Surroundings, tracked: frozenset[Cell], max_loop: int
    ) -> None:
        self.engine = Engine(surroundings)
        self.places = self.engine.places
        self.start = start
        self.tracked = tracked
        self.max_loop = max_loop
        self.depth = surroundings.depth

    # ------------------------------------------------------------------------------------------------------ paths

    def run(self, function: Function, max_paths: int) -> Iterator[Walk]:
        frame = Frame(self.places, function)
        path = _Path(State(), [_Activation(frame, 0, 0, None)])
        self.enter(path, frame)
        waiting = [path]
        given = 0
        while waiting:
            path = waiting.pop()
            if given >= max_paths:
                yield self.finish(path, None, "cut")
                return
            ended, further = self.advance(path)
            waiting.extend(reversed(further))
            if ended is not None:
                given += 1
                yield ended

    def enter(self, path: _Path, frame: Frame) -> None:
        """Give the cells of the start that a frame names their start values, where nothing has changed them yet."""
        if path.disturbed is None:
            return
        for place in places_in(frame.function):
            if number_type(place.type) is None:
                continue
            spot = frame.spot(place)
            if spot.cell is None or not (spot.tracked and spot.definite) or spot in path.state.values:
                continue
            value = self.start.get(spot.cell)
            if value is not None and path.disturbed.isdisjoint((spot.cell, *spot.buckets)):
                path.state.values[spot] = value

    def finish(self, path: _Path, returned: Interval | None, ended: Ending) -> Walk:
        events: list[Event] = []
        chain = path.events
        while chain is not None:
            events.append(chain.event)
            chain = chain.before
        cells: dict[Cell, Interval] = {}
        depends: dict[Cell, frozenset[Cell]] = {}
        for spot in path.state.values:
            if spot.private or spot.cell is None:
                continue
            value = read_spot(self.places, path.state, spot) if spot.definite else path.state.values[spot]
            known = cells.get(spot.cell)
            cells[spot.cell] = value if known is None else union(known, value)
            depends[spot.cell] = depends.get(spot.cell, NOTHING) | self.taint_of(path, spot)
        return Walk(tuple(reversed(events)), cells, depends, returned, ended)

    def advance(self, path: _Path) -> tuple[Walk | None, list[_Path]]:
        """Follow a path to its next fork or its end."""
        while True:
            here = path.activations[-1]
            block = here.frame.function.blocks[here.block]
            if here.step < len(block.statements):
                statement = block.statements[here.step]
                here.step += 1
                if not self.execute(path, here, statement):
                    return self.finish(path, None, "stopped"), []
                continue
            terminator = block.terminator
            if isinstance(terminator, Return):
                returned = self.give_back(path, here, terminator)
                if not path.activations:
                    return self.finish(path, returned, "returned"), []
                continue
            paths = self.branch(path, here, terminator)
            if not paths:
                return self.finish(path, None, "stopped"), []
            going = [one for one in paths if self.count(one)]
            bounded = next((self.finish(one, None, "bounded") for one in paths if one not in going), None)
            if len(paths) > 1 or bounded is not None:
                return bounded, going
            path = going[0]

    def count(self, path: _Path) -> bool:
        """Count the entry into a block; False if it is one too many."""
        here = path.activations[-1]
        key = (id(here.frame), here.block)
        path.visits[key] = path.visits.get(key, 0) + 1
        return path.visits[key] <= self.max_loop

    # ------------------------------------------------------------------------------------------------------ steps

    def say(self, path: _Path, event: Event) -> None:
        path.events = _Chain(event, path.events)

    def branch(self, path: _Path, here: _Activation, terminator: Terminator) -> list[_Path]:
        """The paths that go on after a block."""
        view = View(here.frame, path.state)
        condition: Expr | None = None
        position: Position | None = None
        if isinstance(terminator, Branch):
            condition, position = terminator.condition, terminator.position
        elif isinstance(terminator, Switch):
            condition, position = terminator.value, terminator.syntax.position
        value: Interval | None = None
        depends = NOTHING
        if condition is not None:
            self.accesses(path, here, condition)
            value = view.evaluate(condition)
            depends = self.taint(path, here.frame, condition)
        edges = leave(self.places, View(here.frame, path.state.copy()), terminator)
        paths = []
        for target, state in edges:
            one = path if len(edges) == 1 else path.copy(state)
            one.state = state
            if condition is not None:
                event = Event(
                    "branch", here.frame.function.name, len(path.activations) - 1, position, None, None, value, depends,
                    None, len(edges) == 1, target,
                )  # fmt: skip
                self.say(one, event)
            one.activations[-1].block = target
            one.activations[-1].step = 0
            paths.append(one)
        return paths

    def execute(self, path: _Path, here: _Activation, statement: Statement) -> bool:
        """One statement; False if control does not get past it."""
        view = View(here.frame, path.state)
        name, depth = here.frame.function.name, len(path.activations) - 1
        if isinstance(statement, Call):
            return self.call(path, here, statement)
        for expression in expressions_of(statement):
            self.accesses(path, here, expression)
        if not isinstance(statement, Assign):
            self.engine.execute(view, statement, (), None)
            if isinstance(statement, Clobber):
                self.upset(path)
            return True
        depends = self.taint(path, here.frame, statement.value)
        value = view.evaluate(statement.value) if number_type(statement.place.type) is not None else None
        self.place_accesses(path, here, statement.place, "store")
        self.engine.assign(view, statement)
        spot = here.frame.spot(statement.place)
        self.changed(path, spot, depends)
        if number_type(statement.place.type) is None:
            self.upset(path)
        event = Event("store", name, depth, statement.position, statement.place, spot.cell, value, depends)
        self.say(path, event)
        return True

    def changed(self, path: _Path, spot: Spot, depends: frozenset[Cell]) -> None:
        """A spot got a value that depends on some tracked cells."""
        path.taints[spot] = depends if spot.definite else depends | self.taint_of(path, spot)
        for other in self.places.aliases(spot):
            if depends - self.taint_of(path, other):
                path.taints[other] = depends | self.taint_of(path, other)
        if path.disturbed is not None:
            path.disturbed.update((spot.cell, *spot.buckets))

    def call(self, path: _Path, here: _Activation, call: Call) -> bool:
        """A call: a callee's body is walked through, other code has its effect."""
        for expression in expressions_of(call):
            self.accesses(path, here, expression)
        view = View(here.frame, path.state)
        name = call.callee.name if isinstance(call.callee, FunctionName) else None
        depth = len(path.activations) - 1
        stack = tuple(activation.frame.function.identity for activation in path.activations)
        body = self.engine.body(name, here.frame.function, stack)
        if body is not None:
            taints = [self.taint(path, here.frame, argument) for argument in call.arguments]
            inner = self.engine.begin(view, call, body)
            for parameter, depends in zip(body.parameters, taints, strict=False):
                path.taints[inner.frame.spot(VariablePlace(parameter))] = depends
            path.activations.append(_Activation(inner.frame, 0, 0, call))
            path.visits = {key: n for key, n in path.visits.items() if key[0] != id(inner.frame)}
            self.enter(path, inner.frame)
            return True
        comes_back = self.engine.call_apart(view, call, None)
        path.state = view.state
        effect = self.engine.surroundings.effects(name, here.frame.function) if name is not None else None
        contract = CONTRACTS.get(name) if name is not None and effect is None else None
        if effect is not None and not effect.outward and not effect.through_pointers:
            self.affected(path, effect)
        elif contract is None or contract.writes or contract.onward is not None:
            self.upset(path)
        value = view.read(call.result) if call.result is not None and number_type(call.result.type) else None
        if call.result is not None:
            path.taints[here.frame.spot(call.result)] = NOTHING
        self.say(
            path, Event("call", here.frame.function.name, depth, call.position, call.result, None, value, name=name)
        )
        return comes_back

    def upset(self, path: _Path) -> None:
        """Anything that lasts may have been changed."""
        path.disturbed = None
        self.fresh(path, lambda spot: not spot.private)

    def affected(self, path: _Path, effect: Effect) -> None:
        """A callee that was not walked through stored into some cells."""
        for cell in effect.writes:
            if path.disturbed is not None:
                path.disturbed.add(cell)
                if isinstance(cell, FieldCell):
                    path.disturbed.add(("member", cell.struct, *cell.path))
        written = {spot for cell in effect.writes for spot in self.places.of_cell(cell)}
        self.fresh(path, written.__contains__)

    def fresh(self, path: _Path, changed: Callable[[Spot], bool]) -> None:
        """What some spots hold no longer comes from the start."""
        for spot in self.places.all():
            if changed(spot):
                path.taints[spot] = NOTHING

    def give_back(self, path: _Path, here: _Activation, terminator: Return) -> Interval | None:
        """Leave the innermost function; its value."""
        name, depth = here.frame.function.name, len(path.activations) - 1
        value: Interval | None = None
        depends = NOTHING
        view = View(here.frame, path.state)
        if terminator.value is not None:
            self.accesses(path, here, terminator.value)
            depends = self.taint(path, here.frame, terminator.value)
            if number_type(terminator.value.type) is not None:
                value = view.evaluate(terminator.value)
        self.say(path, Event("return", name, depth, terminator.position, value=value, depends=depends))
        path.activations.pop()
        if not path.activations:
            return value
        outer = path.activations[-1]
        call = here.call
        assert call is not None
        self.engine.give_result(view, terminator)
        result: Interval | None = self.engine.take_result(here.frame, path.state)
        self.engine.drop_frame(here.frame, path.state)
        place = result_place(here.frame.function)
        if terminator.value is None or number_type(place.type) is None:
            result = None
        outer_view = View(outer.frame, path.state)
        self.engine.keep_result(outer_view, call, result)
        if call.result is not None:
            spot = outer.frame.spot(call.result)
            self.changed(path, spot, depends)
            stored = outer_view.read(call.result) if number_type(call.result.type) is not None else None
            event = Event(
                "store", outer.frame.function.name, depth - 1, call.position, call.result, spot.cell, stored, depends
            )
            self.say(path, event)
        return value

    # ------------------------------------------------------------------------------------------------------ dependence

    def taint_of(self, path: _Path, spot: Spot) -> frozenset[Cell]:
        """The tracked cells that a spot's value depends on."""
        known = path.taints.get(spot)
        if known is not None:
            return known
        return frozenset((spot.cell,)) if spot.cell is not None and spot.cell in self.tracked else NOTHING

    def taint(self, path: _Path, frame: Frame, expression: Expr) -> frozenset[Cell]:
        """The tracked cells that an expression's value is computed from (not those that only choose what is loaded)."""
        found = NOTHING
        stack = [expression]
        while stack:
            part = stack.pop()
            if isinstance(part, Load):
                found |= self.taint_of(path, frame.spot(part.place))
            elif isinstance(part, AddressOf):
                stack.extend(inside_place(part.place))
            stack.extend(parts_of(part))
        return found

    def accesses(self, path: _Path, here: _Activation, expression: Expr) -> None:
        """Note the elements that an expression loads or takes the address of."""
        for part in reversed(_loads(expression)):
            if isinstance(part, (Load, AddressOf)):
                self.place_accesses(path, here, part.place, "load" if isinstance(part, Load) else "address")

    def place_accesses(
        self, path: _Path, here: _Activation, place: PlaceExpr, use: Literal["load", "store", "address"]
    ) -> None:
        """Note the elements on the way to a place, those inside subscripts first."""
        for inner in inside_place(place):
            self.accesses(path, here, inner)
        outer = use
        while not isinstance(place, VariablePlace):
            if isinstance(place, MemberPlace):
                place = place.base
                continue
            if isinstance(place, ElementPlace):
                self._say_access(path, here, place, place.index, place.position, here.frame.access(place).cell, outer)
                place = place.base
                continue
            pointer = place.pointer
            while isinstance(pointer, Cast):
                pointer = pointer.operand
            if isinstance(pointer, PointerStep):
                cell = here.frame.access(place).cell or _pointer_cell(here.frame, path.state, pointer.pointer)
                position = pointer.position or place.position
                self._say_access(path, here, place, pointer.steps, position, cell, outer)
            return

    def _say_access(
        self,
        path: _Path,
        here: _Activation,
        place: ElementPlace | DerefPlace,
        index: Expr,
        position: Position | None,
        cell: Cell | None,
        use: Literal["load", "store", "address"],
    ) -> None:
        value = View(here.frame, path.state).evaluate(index)
        depends = self.taint(path, here.frame, index)
        depth = len(path.activations) - 1
        self.say(path, Event("access", here.frame.function.name, depth, position, place, cell, value, depends, use))


def _pointer_cell(frame: Frame, state: State, pointer: Expr) -> Cell | None:
    """The cell that holds the pointer through which an element is reached, not a temporary that it was copied to."""
    while isinstance(pointer, (Cast, PointerStep)):
        pointer = pointer.operand if isinstance(pointer, Cast) else pointer.pointer
    if not isinstance(pointer, (Load, AddressOf)):
        return None
    if isinstance(pointer.place, VariablePlace) and pointer.place.variable.storage == "temporary":
        copied = state.definitions.get(frame.spot(pointer.place))
        if copied is not None:
            return _pointer_cell(copied.frame, state, copied.value)
    return frame.access(pointer.place).cell


def _loads(expression: Expr) -> list[Expr]:
    """The parts of an expression outside places, the last evaluated first."""
    found: list[Expr] = []
    stack = [expression]
    while stack:
        part = stack.pop()
        found.append(part)
        stack.extend(parts_of(part))
    return found


def walk(
    function: Function,
    start: Mapping[Cell, Interval],
    *,
    surroundings: Surroundings | None = None,
    tracked: Iterable[Cell] | None = None,
    bodies: Callable[[str, Function], Function | None] | None = None,
    max_paths: int = 200,
    max_loop: int = 300,
) -> Iterator[Walk]:
    """The feasible paths of a function that starts with the given cells (parameters and lasting ones) at the given
    values.

    ``tracked`` (else the cells of ``start``) are those whose influence is noted. ``bodies`` replaces that of
    ``surroundings``; its ``depth`` bounds the nesting. No block is entered more than ``max_loop`` times on one path;
    after ``max_paths`` paths the last one given has ``ended`` ``cut``.
    """
    around = surroundings if surroundings is not None else Surroundings(depth=3)
    if bodies is not None:
        around = Surroundings(
            around.summaries, around.exposure, around.effects, bodies, around.steady, around.foreign, around.depth,
            around.track_pointees,
        )  # fmt: skip
    chosen = frozenset(start if tracked is None else tracked)
    return _Walker(start, around, chosen, max_loop).run(function, max_paths)
