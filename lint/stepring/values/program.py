"""What lasting cells can hold in a whole program (or in what one unit keeps to itself): an inductive range for each.

An optimistic fixpoint: at first a cell holds its initial value only. Every function is analysed under that
assumption; what it leaves in a cell when it returns, or when it calls code that is not run in place, is added, until
nothing is added. A value that a cell holds only in between (an index that is one too large before it is set back) is
not added, unless the cell is shared with an interrupt. A growing bound is widened to the constants of the function
that makes it grow; then functions are analysed once more with what was really added, and the smaller ranges are kept
if they prove inductive.

The result holds under the assumptions in ``ProgramValues.assumptions``.
"""

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace
from heapq import heapify, heappop, heappush
from typing import Final

from stepring.meaning.types import (
    ArrayType,
    Function,
    Object,
    StructLayout,
    StructType,
    Variable,
)
from stepring.values.callees import Callees
from stepring.values.engine import FunctionValues, analyse
from stepring.values.exposure import Leaks, exposure_of, leaks_of
from stepring.values.graph import WIDTHS
from stepring.values.growth import Growth
from stepring.values.initial import Table, field_range, initial_cells, inner_cells, shared_cells
from stepring.values.intervals import FALSE, UNBOUNDED, is_subset, number_type, union, whole
from stepring.values.spots import pointee_cell
from stepring.values.surroundings import Effect, Logged, Record, Surroundings
from stepring.values.types import Cell, FieldCell, Interval, VariableCell

ASSUMPTIONS: Final = (
    "Memory that is reached through pointers and was not given a value by code that was read holds zero.",
    "An object is accessed through pointers of its own type or, where its address was cast so in code that was read, "
    "of a character type (6.5p7).",
    "Code that was not read calls functions only and stores into no object that was not handed to it.",
)


def _enter(entry: Table, parameter: Variable, value: Interval) -> None:
    """Give a parameter a start value, if its type can hold it."""
    kind = number_type(parameter.type)
    if kind is not None and kind.low <= value.low and value.high <= kind.high:
        entry[VariableCell(parameter.identity)] = value
    else:
        entry.pop(VariableCell(parameter.identity), None)


class ProgramValues:
    """What the lasting cells of a program can hold, and each function analysed under it.

    ``summaries`` has the cells that some function stores into or that have an initial value; ask ``value`` for any
    cell.
    """

    def __init__(
        self,
        functions: Sequence[Function],
        objects: Sequence[Object],
        private: Callable[[Cell], bool],
        *,
        structs: Mapping[str, StructLayout] | None = None,
        shared: Callable[[Cell], bool] = lambda cell: False,
        foreign: Callable[[Cell], bool] = lambda cell: False,
        steady: Callable[[Cell], bool] = lambda cell: False,
        interrupts: Callable[[Function], bool] = lambda function: False,
        closed: bool = False,
        depth: int = 2,
    ) -> None:
        self.private = private
        self.shared = shared
        self.exposure = exposure_of(functions, objects, structs or {})
        self.callees = Callees(functions, objects, self.exposure, steady, foreign)
        self.functions = self.callees.functions
        self._hidden = self.callees.hidden
        self.leaks: Leaks = leaks_of(
            functions, structs or {}, lambda name, caller: self.callees.resolve(name, caller) is not None, closed
        )
        self.assumptions = ASSUMPTIONS
        self.summaries: Table = {}
        self._initial: Table = {}
        self._types = {item.variable.identity: item.variable.type for item in objects}
        self._foreign = foreign
        self._steady = steady
        self._depth = depth
        self._shared_as: dict[Cell, Cell] = {}
        self._ranges: Table = {}
        self._growth = Growth(self._ranges)
        self._added: dict[str, Table] = {}
        self._read: dict[str, frozenset[Cell]] = {}
        self._found: dict[str, FunctionValues] = {}
        self._records: dict[str, Record] = {}
        self._between: dict[str, Table] = {}
        self._stored: Table = {}
        self._late: set[str] = set()
        self._called: set[str] = set()
        self._interrupts = self.callees.reached_from(
            [function.identity for function in self.functions.values() if interrupts(function)]
        )
        # A store by an interrupt is seen under every name of the object.
        self._interrupted = {cell for name in self._interrupts for cell in self.callees.effects[name].writes}
        self._start(objects)
        self._solve()

    # ------------------------------------------------------------------------------------------------------ asking

    def value(self, cell: Cell) -> Interval | None:
        """What the cell can hold whenever code of the program starts; None if nothing is known of it.

        What may be stored through pointers that lead to the cell's objects is included.
        """
        value = self.own(cell)
        if value is None:
            return None
        for other in self._also(cell):
            more = self.own(other)
            if more is None:
                return None
            value = union(value, more)
        names = [cell, *self._also(cell)]
        bytewise = any(isinstance(name, FieldCell) and name.struct in self.exposure.bytes_of for name in names)
        if bytewise or any(name in self.exposure.cells for name in names):
            limits = self._ranges.get(cell) or next(filter(None, (field_range(n, self.exposure) for n in names)), None)
            for width in WIDTHS:
                stored = self.summaries.get(pointee_cell(width))
                if stored is not None:
                    fitting = limits is not None and is_subset(stored, limits) and (width > 8 or limits.high < 256)
                    value = union(value, stored) if fitting else (limits or UNBOUNDED)
        return value

    def _also(self, cell: Cell) -> list[Cell]:
        """The cells under which the cell's objects are also reached."""
        if isinstance(cell, FieldCell):
            return [other for other in inner_cells(cell, self.exposure) if other != cell]
        kind = self._types.get(cell.variable)
        if kind is None or cell.variable not in self.exposure.variables:
            return []
        return shared_cells(kind, cell.path, self.exposure)

    def own(self, cell: Cell) -> Interval | None:
        """What is kept under the cell's own name; see ``value`` for all that it can hold."""
        known = self.summaries.get(cell)
        if isinstance(cell, VariableCell) and (cell.variable == "*" or cell.variable in self.functions):
            return known
        if not self.private(cell) or cell in self.leaks.cells:
            return None
        if self.leaks.scalars and cell in self.exposure.cells:
            return None
        if isinstance(cell, FieldCell):
            if cell.struct in self.leaks.structs or cell.struct in self.exposure.unions:
                return None
            return known if known is not None else FALSE
        if cell.variable not in self._types:
            return None
        return known if known is not None else FALSE

    def seen(self, cell: Cell) -> Interval | None:
        """What an interrupt can find in the cell: what it holds when code starts or, if it is shared, is ever given."""
        value, stored = self.value(cell), self._stored.get(cell)
        return union(value, stored) if value is not None and stored is not None else value

    def of(self, function: Function) -> FunctionValues:
        """The function's values, whoever calls it: with what the summaries allow, and with what a caller has not yet
        finished changing where it calls it."""
        known = self._found.get(function.identity)
        if known is None:
            known = self._found[function.identity] = self._final(function)
        return known

    def _final(self, function: Function) -> FunctionValues:
        extra: Table = dict(self._between.get(function.identity, {}))
        arguments: list[Interval] | None = None
        for identity, record in self._records.items():
            entered = record.entered.get(function.identity)
            if entered is None or not self._counts(identity):
                continue
            for cell, value in (*entered[1].items(), *self._between.get(identity, {}).items()):
                for name in {cell, self._shared_as.get(cell, cell)}:
                    extra[name] = union(extra[name], value) if name in extra else value
            given = entered[0]
            arguments = given if arguments is None else [union(a, b) for a, b in zip(arguments, given, strict=False)]
        entry: Table = {}
        if function.identity in self._hidden and arguments is not None:
            for parameter, value in zip(function.parameters, arguments, strict=False):
                _enter(entry, parameter, value)
        summaries = Logged(self.own, self._overlay(function.identity, extra))
        inside = function.identity in self._interrupts
        return analyse(function, entry, self.surroundings(summaries, inside_interrupt=inside))

    def _overlay(self, identity: str, between: Table) -> Table:
        """What cells can hold beyond their summaries when a function starts."""
        if identity not in self._interrupts or not self._stored:
            return between
        extra = dict(self._stored)
        for cell, value in between.items():
            extra[cell] = union(extra[cell], value) if cell in extra else value
        return extra

    def _counts(self, identity: str) -> bool:
        """Whether the function is ever started in a state that the summaries describe."""
        return identity not in self._hidden or identity in self._called

    def _changes(self, cell: Cell) -> bool:
        """Whether the cell may change between two statements of a function that interrupts can stop."""
        return cell in self._interrupted or self._foreign(cell)

    def surroundings(
        self, summaries: Mapping[Cell, Interval] | None = None, *, inside_interrupt: bool = False
    ) -> Surroundings:
        """What a function's analysis may assume of this program."""
        return Surroundings(
            summaries if summaries is not None else Logged(self.own),
            self.exposure,
            self._effect,
            self.callees.body,
            self._steady,
            self._foreign if inside_interrupt else self._changes,
            self._depth,
        )

    # ------------------------------------------------------------------------------------------------------ callees

    def _effect(self, name: str, caller: Function) -> Effect | None:
        body = self.callees.resolve(name, caller)
        if body is None:
            return None
        returned = self.summaries.get(VariableCell(body.identity, ("returned",)))
        # As long as no return of it is known the call does not come back; finding one brings its callers here again.
        return replace(self.callees.effects[body.identity], returns=returned, comes_back=returned is not None)

    # ------------------------------------------------------------------------------------------------------ fixpoint

    def _start(self, objects: Sequence[Object]) -> None:
        for item in objects:
            kind = item.variable.type
            while isinstance(kind, ArrayType):
                kind = kind.element
            if isinstance(kind, StructType) and kind.identity not in self.exposure.members:
                # Without its layout nothing is known of what its members hold at start.
                self.leaks = replace(self.leaks, structs=self.leaks.structs | {kind.identity})
            for cell, value in initial_cells(item, self.exposure).items():
                self._join_initial(cell, value)
                if item.variable.identity in self.exposure.variables and isinstance(cell, VariableCell):
                    for other in shared_cells(item.variable.type, cell.path, self.exposure):
                        self._join_initial(other, value)
        self.summaries = dict(self._initial)

    def _join_initial(self, cell: Cell, value: Interval) -> None:
        known = self._initial.get(cell)
        self._initial[cell] = value if known is None else union(known, value)

    def _analyse(self, function: Function) -> tuple[FunctionValues, frozenset[Cell]]:
        summaries = Logged(self.own, self._overlay(function.identity, self._between.get(function.identity, {})))
        entry = self._entry(function, summaries.read)
        inside = function.identity in self._interrupts
        found = analyse(function, entry, self.surroundings(summaries, inside_interrupt=inside))
        for spot in found.engine.places.all():
            if spot.cell is not None:
                if number_type(spot.type) is not None:
                    self._ranges[spot.cell] = whole(spot.type)
                for bucket in spot.buckets:
                    if bucket[0] == "member" and isinstance(bucket[1], str):
                        self._shared_as[spot.cell] = FieldCell(bucket[1], tuple(str(step) for step in bucket[2:]))
        for callee in found.record.arguments:
            summaries.read.add(VariableCell(callee, ("returned",)))
        return found, frozenset(summaries.read)

    def _entry(self, function: Function, read: set[Cell]) -> Table:
        """The parameters of a function all of whose calls are seen."""
        entry: Table = {}
        if function.identity in self._hidden and function.identity in self._called:
            for number, parameter in enumerate(function.parameters):
                cell = VariableCell(function.identity, (str(number),))
                read.add(cell)
                value = self.summaries.get(cell)
                if value is not None:
                    _enter(entry, parameter, value)
        return entry

    def _contribution(self, function: Function, found: FunctionValues) -> Table:
        """What a run of the function adds to the summaries."""
        record = found.record
        added: Table = {}

        def add(cell: Cell, value: Interval) -> None:
            known = added.get(cell)
            added[cell] = value if known is None else union(known, value)

        for callee, arguments in record.arguments.items():
            for number, value in enumerate(arguments):
                add(VariableCell(callee, (str(number),)), value)
        if not self._counts(function.identity):
            # All calls of it were run in place, on the callers' states; nothing else calls it.
            return added
        cells = record.left
        for cell, value in cells.items():
            add(cell, value)
            other = self._shared_as.get(cell)
            if other is not None and other != cell:
                add(other, value)
        for cell, value in self._between.get(function.identity, {}).items():
            single = isinstance(cell, VariableCell) and "[]" not in cell.path
            # Its callers forget what they had there, so what it leaves as it found it is noted here.
            gone = single and cell in record.stored and cell in (record.replaced or ())
            if not gone and self.callees.forgets(function.identity, {cell, *self._also(cell)}):
                add(cell, value)
        for width, value in record.pointees.items():
            add(pointee_cell(width), value)
        if found.solution.leaving is not None:
            add(VariableCell(function.identity, ("returned",)), record.returned or FALSE)
        return added

    def _run(self, identity: str) -> Table:
        function = self.functions[identity]
        found, read = self._analyse(function)
        self._read[identity] = read
        self._records[identity] = found.record
        for callee in found.record.arguments:
            if callee not in self._called:
                self._called.add(callee)
                self._late.add(callee)
        return self._contribution(function, found)

    def _pass_on(self) -> set[str]:
        """Tell callees that are not run in place what their callers have not finished changing, and interrupts what is
        stored at all; the functions that learn something new."""
        between, stored = self._smaller_tables()
        constants = self.callees.all_thresholds()
        told: set[str] = set()
        for callee, table in between.items():
            if self._growth.extend(self._between.setdefault(callee, {}), table, callee, constants):
                told.add(callee)
        if self._growth.extend(self._stored, stored, "*", constants):
            told |= self._interrupts
        return told

    def _passes(self, record: Record, own: Table) -> dict[str, Table]:
        """What callees that are not run in place find in cells beyond their summaries."""
        return {callee: self._joined(own, record.entered[callee][1]) for callee in record.arguments}

    def _shared_stores(self, identity: str, record: Record) -> Table:
        if identity in self._interrupts:
            return {}
        return self._joined({}, {cell: value for cell, value in record.stored.items() if self.shared(cell)})

    def _joined(self, own: Table, cells: Table) -> Table:
        """Tables joined, each cell also under the name that pointers to its structure share."""
        result = dict(own)
        for cell, value in cells.items():
            for name in {cell, self._shared_as.get(cell, cell)}:
                result[name] = union(result[name], value) if name in result else value
        return result

    def _settle(self, start: Iterable[str]) -> None:
        """Run functions until the summaries do not grow, small ones first: what they make grow settles before large
        ones read it."""
        waiting = set(start)
        queue = [(self.callees.size(identity), identity) for identity in waiting]
        heapify(queue)
        while queue:
            _, identity = heappop(queue)
            waiting.discard(identity)
            added = self._added[identity] = self._run(identity)
            changed = self._grow(added, self.callees.thresholds(identity))
            readers = (
                {other for other, read in self._read.items() if not changed.isdisjoint(read)} if changed else set()
            )
            for fresh in (readers | (self._late & self.functions.keys())) - waiting:
                waiting.add(fresh)
                heappush(queue, (self.callees.size(fresh), fresh))
            self._late.clear()

    def _solve(self) -> None:
        waiting = set(self.functions)
        while waiting:
            self._settle(waiting)
            waiting = self._pass_on() & self.functions.keys()
        if self._growth.times:
            for _ in range(3):
                if not self._shrink():
                    break

    def _grow(self, added: Table, thresholds: Sequence[int]) -> set[Cell]:
        """Add to the summaries; the cells that grew."""
        changed: set[Cell] = set()
        for cell, value in added.items():
            known = self.summaries.get(cell)
            base = known if known is not None else (FALSE if isinstance(cell, FieldCell) else None)
            if base is not None and is_subset(value, base):
                if known is None:
                    self.summaries[cell] = base
                continue
            number = self._growth.count("", cell)
            joined = value if base is None else self._growth.grown(cell, base, value, number, thresholds)
            self.summaries[cell] = joined
            changed.add(cell)
        return changed

    def _shrink(self) -> bool:
        """Replace widened ranges by what was really added, if that is inductive; whether anything changed."""
        smaller: Table = dict(self._initial)
        for added in self._added.values():
            for cell, value in added.items():
                known = smaller.get(cell, FALSE if isinstance(cell, FieldCell) else None)
                smaller[cell] = value if known is None else union(known, value)
        between, stored = self._smaller_tables()
        changed = {cell for cell, value in self.summaries.items() if smaller.get(cell, value) != value}
        again = [
            identity
            for identity, read in self._read.items()
            if not changed.isdisjoint(read)
            or between.get(identity, {}) != self._between.get(identity, {})
            or (identity in self._interrupts and stored != self._stored)
        ]
        if not again:
            return False
        before = (
            self.summaries, self._between, self._stored, dict(self._added), dict(self._read), dict(self._records)
        )  # fmt: skip
        self.summaries = {cell: smaller.get(cell, value) for cell, value in self.summaries.items()}
        self._between, self._stored = between, stored
        for identity in again:
            added = self._added[identity] = self._run(identity)
            held = all(
                is_subset(value, self.summaries.get(cell, FALSE if isinstance(cell, FieldCell) else None))
                for cell, value in added.items()
            )
            if not held or self._late:
                break
        else:
            if not self._more_passed():
                return True
        self._late.clear()
        self.summaries, self._between, self._stored, self._added, self._read, self._records = before
        return False

    def _more_passed(self) -> bool:
        """Whether the last runs pass on more than is assumed."""
        between, stored = self._smaller_tables()
        return any(
            not is_subset(value, self._between.get(callee, {}).get(cell))
            for callee, table in between.items()
            for cell, value in table.items()
        ) or any(not is_subset(value, self._stored.get(cell)) for cell, value in stored.items())

    def _smaller_tables(self) -> tuple[dict[str, Table], Table]:
        """What is passed to callees and shown to interrupts, from the last run of every function."""
        between: dict[str, Table] = {}
        stored: Table = {}
        waiting = [identity for identity in self._records if self._counts(identity)]
        for identity in waiting:
            for cell, value in self._shared_stores(identity, self._records[identity]).items():
                stored[cell] = union(stored[cell], value) if cell in stored else value
        while waiting:
            identity = waiting.pop()
            for callee, table in self._passes(self._records[identity], between.get(identity, {})).items():
                known = between.setdefault(callee, {})
                grown = {cell for cell, value in table.items() if not is_subset(value, known.get(cell))}
                for cell in grown:
                    known[cell] = union(known[cell], table[cell]) if cell in known else table[cell]
                if grown and callee in self._records:
                    waiting.append(callee)
        return between, stored


def summarise(
    functions: Sequence[Function],
    objects: Sequence[Object],
    private: Callable[[Cell], bool],
    *,
    structs: Mapping[str, StructLayout] | None = None,
    shared: Callable[[Cell], bool] = lambda cell: False,
    foreign: Callable[[Cell], bool] = lambda cell: False,
    steady: Callable[[Cell], bool] = lambda cell: False,
    interrupts: Callable[[Function], bool] = lambda function: False,
    closed: bool = False,
    depth: int = 2,
) -> ProgramValues:
    """The inductive ranges of a program's lasting cells.

    ``private`` says of a cell that only the given functions store into it. ``interrupts``: the functions that can run
    between any two statements of the others; what they store into is taken to change at any moment elsewhere.
    ``shared``: the cells that interrupts look at; they find all that is ever stored there. ``foreign``: cells that
    still other code may store into at any moment. ``steady``: volatile cells into which only the given functions
    store. ``closed``: the functions are the whole program, so calls through pointers lead to them. ``depth``: how
    deep callees are run in place.
    """
    return ProgramValues(
        functions,
        objects,
        private,
        structs=structs,
        shared=shared,
        foreign=foreign,
        steady=steady,
        interrupts=interrupts,
        closed=closed,
        depth=depth,
    )
