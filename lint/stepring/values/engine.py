"""Flow-sensitive abstract interpretation of one function: what each place can hold before each statement.

The published method (Cousot and Cousot, 1977): states are propagated along the graph in reverse postorder until
nothing changes; at the head of a loop a bound that moves is widened to the next constant of the function, and two
descending rounds take back what widening gave away. Small callees whose body is given are run inside the caller, on
the caller's own objects; of other callees an ``Effect`` is asked, the C library's are known, and all else may
change whatever outside code can reach.

What lasts between calls (statics, globals, members behind pointers) has its summary's value when the function starts.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from heapq import heappop, heappush
from typing import Final

from stepring.meaning.types import (
    Call,
    Function,
    FunctionName,
    Return,
)
from stepring.values.execution import Edge, Execution, leave
from stepring.values.frames import Frame
from stepring.values.graph import Shape, shape_of, targets_of
from stepring.values.intervals import UNBOUNDED, is_subset, number_type, union, whole, widen, within
from stepring.values.scan import places_in
from stepring.values.states import (
    State,
    View,
    includes,
    join_optional,
    join_states,
    read_spot,
    same_state,
)
from stepring.values.surroundings import Record, Surroundings
from stepring.values.types import Cell, Interval

PATIENCE: Final = 2
"""Joins at a loop head before it widens."""
REMEMBERED: Final = 4
"""Start states of a callee for which its solution is kept."""
LIMIT: Final = 60
"""Visits of a loop head after which every value that still changes is taken to be anything."""


@dataclass(slots=True)
class Solution:
    """The states at the starts of the blocks that control reaches, and at the function's end."""

    entries: dict[int, State]
    leaving: State | None


class Engine(Execution):
    """The fixpoint of a function's states, and what is noted of it."""

    def __init__(self, surroundings: Surroundings) -> None:
        super().__init__(surroundings)
        self._solved: dict[int, list[tuple[State, Solution]]] = {}
        self._thresholds: dict[str, Sequence[int]] = {}
        self._flows: dict[tuple[int, int], tuple[State, list[Edge], State | None]] = {}

    # ------------------------------------------------------------------------------------------------------ fixpoint

    def run_body(self, frame: Frame, start: State, stack: tuple[str, ...], record: Record | None) -> State | None:
        """The joined state at the returns of a callee that is run in place."""
        memory = self._solved.setdefault(id(frame), [])
        solution = next((known for before, known in memory if same_state(before, start)), None)
        if solution is None:
            before = start.copy()
            solution = self.solve(frame, start, stack)
            memory.append((before, solution))
            del memory[:-REMEMBERED]
        if record is not None:
            self.note(frame, solution, stack, record)
        return solution.leaving

    def solve(self, frame: Frame, start: State, stack: tuple[str, ...]) -> Solution:
        """The states of a function that is entered in the state ``start``."""
        shape = shape_of(frame.function)
        thresholds = self._constants(frame.function, stack) if shape.heads else ()
        order = shape.order
        entries: dict[int, State] = {0: start}
        visits: dict[int, int] = {}
        waiting = [(0, 0)]
        queued = {0}
        while waiting:
            _, block = heappop(waiting)
            queued.discard(block)
            visits[block] = visits.get(block, 0) + 1
            for target, state in self.flow(frame, block, entries[block], stack):
                old = entries.get(target)
                new = self._arrive(shape.heads, thresholds, target, old, state, visits.get(target, 0))
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

    def _constants(self, function: Function, stack: tuple[str, ...]) -> Sequence[int]:
        """The constants of a function and of the callees that are run in place in it."""
        known = self._thresholds.get(function.identity)
        if known is None:
            values = set(shape_of(function).thresholds)
            for block in function.blocks:
                for statement in block.statements:
                    if isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                        body = self.body(statement.callee.name, function, stack)
                        if body is not None:
                            values.update(self._constants(body, (*stack, body.identity)))
            known = self._thresholds[function.identity] = sorted(values)
        return known

    def _arrive(
        self,
        heads: frozenset[int],
        thresholds: Sequence[int],
        target: int,
        old: State | None,
        state: State,
        visits: int,
    ) -> State | None:
        """The target's new state when ``state`` arrives, or None if that brings nothing."""
        if old is None:
            return state
        if includes(self.places, old, state):
            return None
        joined = join_states(self.places, old, state)
        if target in heads and visits > PATIENCE:
            self._widen(old, joined, thresholds, visits > LIMIT)
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
            if give_up:
                new.values[spot] = limits
                continue
            # What lasts tends to stay in what its summary says; a bound beyond is sought among the constants.
            inside = is_subset(value, spot.default) and spot.default != limits
            wider = spot.default if inside else widen(before, value, thresholds)
            new.values[spot] = within(wider, limits.low, limits.high) or limits

    def _descend(
        self, frame: Frame, start: State, entries: dict[int, State], shape: Shape, stack: tuple[str, ...]
    ) -> dict[int, State]:
        """Every block's state once more, from those of its predecessors without widening."""
        result: dict[int, State] = {0: start}
        arrivals: dict[int, State | None] = {}
        back: dict[int, list[State]] = {}
        for block, state in entries.items():
            terminator = frame.function.blocks[block].terminator
            if any(shape.order[target] <= shape.order[block] for target in targets_of(terminator)):
                for target, arriving in self.flow(frame, block, state, stack):
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
            if same_state(here, entries[block]):
                here = entries[block]
            result[block] = here
            for target, arriving in self.flow(frame, block, here, stack):
                if shape.order[target] > shape.order[block]:
                    arrivals[target] = join_optional(self.places, arrivals.get(target), arriving)
        return result

    def _leaving(self, frame: Frame, entries: Mapping[int, State], stack: tuple[str, ...]) -> State | None:
        """The joined state at the function's returns."""
        result: State | None = None
        for block, state in entries.items():
            terminator = frame.function.blocks[block].terminator
            if isinstance(terminator, Return):
                self.flow(frame, block, state, stack)
                after = self._flows[id(frame), block][2]
                if after is not None:
                    view = View(frame, after.copy())
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

    def flow(self, frame: Frame, block: int, state: State, stack: tuple[str, ...]) -> list[Edge]:
        """The states in which control goes on from a block that is entered in ``state``."""
        known = self._flows.get((id(frame), block))
        if known is not None and known[0] is state:
            return known[1]
        view = self.run_statements(frame, block, state, stack, None)
        terminator = frame.function.blocks[block].terminator
        edges = leave(self.places, view, terminator) if view is not None else []
        after = view.state if view is not None and not edges else None
        self._flows[id(frame), block] = (state, edges, after)
        return edges

    def run_statements(
        self, frame: Frame, block: int, state: State, stack: tuple[str, ...], record: Record | None
    ) -> View | None:
        """The state after a block's statements, or None if control does not get past them."""
        view = View(frame, state.copy(), record.observe if record is not None else None)
        for statement in frame.function.blocks[block].statements:
            if not self.execute(view, statement, stack, record):
                return None
        return view

    # ------------------------------------------------------------------------------------------------------ looks

    def settle_looks(self, record: Record) -> None:
        """Other code could see the lasting cells in some states: note what those hold that the run stores into."""
        for state in record.looks:
            held = {spot.cell for spot in state.values if spot.definite and not spot.reached and spot.cell is not None}
            record.replaced = frozenset(held if record.replaced is None else held & record.replaced)
            for spot in state.values:
                if spot.private or spot.cell is None or spot.cell not in record.stored:
                    continue
                value = read_spot(self.places, state, spot) if spot.definite else state.values[spot]
                known = record.left.get(spot.cell)
                record.left[spot.cell] = value if known is None else union(known, value)
        record.looks.clear()


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
