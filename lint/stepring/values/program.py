"""What lasting cells can hold in a whole program (or in what one unit keeps to itself): an inductive range for each.

An optimistic fixpoint: at first a cell holds its initial value only. Every function is analysed under that
assumption; what it leaves in a cell when it returns, or when it calls code that is not run in place, is added, until
nothing is added. A value that a cell holds only in between (an index that is one too large before it is set back) is
not added, unless the cell is shared with an interrupt. A growing bound is widened to the constants of the function
that makes it grow; then functions are analysed once more with what was really added, and the smaller ranges are kept
if they prove inductive.

The result holds under the assumptions in ``ProgramValues.assumptions``.
"""

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Final

from stepring.meaning.types import (
    ArrayType,
    Assign,
    Call,
    Clobber,
    CType,
    Function,
    FunctionName,
    Object,
    StructLayout,
    StructType,
    Variable,
)
from stepring.values.engine import FunctionValues, analyse
from stepring.values.evaluate import compute
from stepring.values.exposure import Leaks, all_expressions, exposure_of, leaks_of
from stepring.values.frames import Frame
from stepring.values.graph import shape_of
from stepring.values.intervals import FALSE, is_subset, number_type, union, whole, widen
from stepring.values.library import CONTRACTS
from stepring.values.scan import places_of, walk_deep
from stepring.values.spots import Exposure, Places, pointee_cell
from stepring.values.surroundings import Effect, Record, Surroundings
from stepring.values.types import Cell, FieldCell, Interval, VariableCell

ROUNDS: Final = 3
"""Times that a cell may grow before it is widened."""
LARGEST: Final = 40
"""Blocks of a callee that is run in place, at most."""
Table = dict[Cell, Interval]

ASSUMPTIONS: Final = (
    "Memory that is reached through pointers and was not given a value by code that was read holds zero.",
    "An object is accessed through pointers of its own type or, where its address was cast so in code that was read, "
    "of a character type (6.5p7).",
    "Code that was not read calls functions only and stores into no object that was not handed to it.",
)


@dataclass(frozen=True, slots=True)
class _Written:
    """What a function stores into, as its text says: cells, through pointers to scalars, or what cannot be told."""

    cells: frozenset[Cell]
    pointees: bool
    outward: bool
    calls: frozenset[str]


@dataclass(slots=True)
class _Logged(Mapping[Cell, Interval]):
    """The summaries as one analysis reads them; what it reads is noted."""

    program: "ProgramValues"
    read: set[Cell] = field(default_factory=set)

    def __getitem__(self, cell: Cell) -> Interval:
        value = self.get(cell)
        if value is None:
            raise KeyError(cell)
        return value

    def __iter__(self) -> Iterator[Cell]:
        return iter(self.program.summaries)

    def __len__(self) -> int:
        return len(self.program.summaries)

    def get(self, cell: Cell, default: object = None) -> Interval | None:  # type: ignore[override]
        self.read.add(cell)
        return self.program.value(cell)


def resolver(functions: Iterable[Function]) -> Callable[[str, Function], Function | None]:
    """How a name in a caller leads to a function: a static one of the same file, else the one with external linkage,
    else a
    header's."""
    named: dict[str, list[Function]] = {}
    for function in functions:
        named.setdefault(function.name, []).append(function)

    def resolve(name: str, caller: Function) -> Function | None:
        candidates = named.get(name, ())
        if not candidates:
            return None
        for candidate in candidates:
            if candidate.position.file == caller.position.file:
                return candidate
        outer = [candidate for candidate in candidates if not candidate.static]
        if outer:
            return outer[0] if len({candidate.identity for candidate in outer}) == 1 else None
        inline = [candidate for candidate in candidates if not candidate.position.file.endswith((".c", ".i", ".C"))]
        return inline[0] if len(inline) == 1 else None

    return resolve


def initial_cells(item: Object, exposure: Exposure) -> Table:
    """What each cell of an object with static storage holds at start (6.7.9p10: zero where nothing is said)."""
    listed: dict[Cell, Interval] = {}
    counts: dict[Cell, int] = {}
    for initial in item.initial:
        path = tuple("[]" if isinstance(step, int) else "." + step for step in initial.path)
        cell: Cell = VariableCell(item.variable.identity, path)
        kind = number_type(initial.value.type)
        if kind is None:
            continue
        value = compute(initial.value, lambda place: whole(place.type))
        known = listed.get(cell)
        listed[cell] = value if known is None else union(known, value)
        counts[cell] = counts.get(cell, 0) + 1
    result: Table = {}
    for path, number in _scalar_paths(item.variable.type, exposure):
        cell = VariableCell(item.variable.identity, path)
        value = listed.get(cell, FALSE)
        result[cell] = value if cell in listed and counts[cell] >= number else union(value, FALSE)
    for cell, value in listed.items():
        result.setdefault(cell, union(value, FALSE) if "[]" in getattr(cell, "path", ()) else value)
    return result


def _scalar_paths(kind: CType, exposure: Exposure) -> list[tuple[tuple[str, ...], int]]:
    """The paths to the scalars of a type, and how many objects each stands for."""
    if isinstance(kind, ArrayType):
        inner = _scalar_paths(kind.element, exposure)
        return [(("[]", *path), number * (kind.length or 1 << 30)) for path, number in inner]
    if isinstance(kind, StructType):
        found = []
        for way in exposure.members.get(kind.identity, ()):
            number = 1
            previous: CType | None = None
            for struct, _, step in way:
                if not struct:
                    number *= (previous.length if isinstance(previous, ArrayType) else None) or 1 << 30
                previous = step
            found.append((tuple("." + name if struct else name for struct, name, _ in way), number))
        return found
    return [((), 1)] if number_type(kind) is not None else []


def _shared_cells(kind: CType, path: tuple[str, ...], exposure: Exposure) -> list[Cell]:
    """The field cells under which a part of an exposed object is also known."""
    while isinstance(kind, ArrayType):
        kind = kind.element
        path = path[1:]
    if not isinstance(kind, StructType):
        return []
    for way in exposure.members.get(kind.identity, ()):
        if tuple("." + name if struct else name for struct, name, _ in way) == path:
            return [
                FieldCell(struct, tuple(name for _, name, _ in way[number:]))
                for number, (struct, _, _) in enumerate(way)
                if struct
            ]
    return []


@dataclass(slots=True)
class _Overlaid(Mapping[Cell, Interval]):
    """The summaries with some cells holding more."""

    program: "ProgramValues"
    extra: Table

    def __getitem__(self, cell: Cell) -> Interval:
        value = self.get(cell)
        if value is None:
            raise KeyError(cell)
        return value

    def __iter__(self) -> Iterator[Cell]:
        return iter(self.program.summaries)

    def __len__(self) -> int:
        return len(self.program.summaries)

    def get(self, cell: Cell, default: object = None) -> Interval | None:  # type: ignore[override]
        known = self.program.value(cell)
        more = self.extra.get(cell)
        return union(known, more) if known is not None and more is not None else known


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
        closed: bool = False,
        depth: int = 2,
    ) -> None:
        self.functions = {function.identity: function for function in functions}
        self.private = private
        self.shared = shared
        self.resolve = resolver(self.functions.values())
        self.exposure = exposure_of(functions, objects, structs or {})
        self.leaks: Leaks = leaks_of(
            functions, structs or {}, lambda name, caller: self.resolve(name, caller) is not None, closed
        )
        self.assumptions = ASSUMPTIONS
        self.summaries: Table = {}
        self._initial: Table = {}
        self._defined = {item.variable.identity for item in objects}
        self._foreign = foreign
        self._steady = steady
        self._depth = depth
        self._shared_as: dict[Cell, Cell] = {}
        self._growth: dict[Cell, int] = {}
        self._added: dict[str, Table] = {}
        self._read: dict[str, frozenset[Cell]] = {}
        self._found: dict[str, FunctionValues] = {}
        self._records: dict[str, Record] = {}
        self._late: set[str] = set()
        self._called: set[str] = set()
        self._hidden = self._find_hidden(functions, objects)
        self._effects = self._find_effects()
        self._start(objects)
        self._solve()

    # ------------------------------------------------------------------------------------------------------ asking

    def value(self, cell: Cell) -> Interval | None:
        """What the cell can hold whenever code of the program starts; None if nothing is known of it."""
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
        if cell.variable not in self._defined:
            return None
        return known if known is not None else FALSE

    def of(self, function: Function) -> FunctionValues:
        """The function's values, whoever calls it: with what the summaries allow, and with what is on its way between
        two
        states that other code sees where a caller calls it then."""
        known = self._found.get(function.identity)
        if known is None:
            known = self._found[function.identity] = self._final(function)
        return known

    def _final(self, function: Function) -> FunctionValues:
        entered = [
            record.entered[function.identity]
            for identity, record in self._records.items()
            if function.identity in record.entered and self._counts(identity)
        ]
        extra: Table = {}
        arguments: list[Interval] | None = None
        for given, cells in entered:
            for cell, value in cells.items():
                for name in (cell, self._shared_as.get(cell, cell)):
                    known = extra.get(name)
                    extra[name] = value if known is None else union(known, value)
            arguments = given if arguments is None else [union(a, b) for a, b in zip(arguments, given, strict=False)]
        entry = self._entry(function, set()) if function.identity in self._called else None
        if function.identity in self._hidden and arguments is not None:
            if entry is None:
                entry = {}
                for parameter, value in zip(function.parameters, arguments, strict=False):
                    _enter(entry, parameter, value)
            else:
                for parameter, value in zip(function.parameters, arguments, strict=False):
                    cell = VariableCell(parameter.identity)
                    if cell in entry:
                        _enter(entry, parameter, union(entry[cell], value))
        return analyse(function, entry, self.surroundings(_Overlaid(self, extra) if extra else None))

    def _counts(self, identity: str) -> bool:
        """Whether the function is ever started in a state that the summaries describe."""
        return identity not in self._hidden or identity in self._called

    def surroundings(self, summaries: Mapping[Cell, Interval] | None = None) -> Surroundings:
        """What a function's analysis may assume of this program."""
        return Surroundings(
            summaries if summaries is not None else _Logged(self),
            self.exposure,
            self._effect,
            self._body,
            self._steady,
            self._foreign,
            self._depth,
        )

    # ------------------------------------------------------------------------------------------------------ callees

    def _body(self, name: str, caller: Function) -> Function | None:
        body = self.resolve(name, caller)
        return body if body is not None and len(body.blocks) <= LARGEST else None

    def _effect(self, name: str, caller: Function) -> Effect | None:
        body = self.resolve(name, caller)
        if body is None:
            return None
        returned = self.summaries.get(VariableCell(body.identity, ("returned",)))
        return replace(self._effects[body.identity], returns=returned)

    def _find_hidden(self, functions: Sequence[Function], objects: Sequence[Object]) -> frozenset[str]:
        """Static functions that are only ever called by name, so that all their calls are seen."""
        uses: set[str] = set()
        for function in functions:
            callees = {
                id(statement.callee)
                for block in function.blocks
                for statement in block.statements
                if isinstance(statement, Call)
            }
            for expression in all_expressions(function):
                if isinstance(expression, FunctionName) and id(expression) not in callees:
                    uses.add(expression.name)
        for item in objects:
            for initial in item.initial:
                for part in walk_deep(initial.value):
                    if isinstance(part, FunctionName):
                        uses.add(part.name)
        return frozenset(
            function.identity
            for function in functions
            if function.static and not function.attributes and function.name not in uses
        )

    def _find_effects(self) -> dict[str, Effect]:
        written = {identity: self._writes_of(function) for identity, function in self.functions.items()}
        effects: dict[str, Effect] = {}
        for identity in written:
            seen = {identity}
            waiting = [identity]
            cells: set[Cell] = set()
            pointees = outward = False
            while waiting:
                here = written[waiting.pop()]
                cells |= here.cells
                pointees |= here.pointees
                outward |= here.outward
                fresh = here.calls - seen
                seen |= fresh
                waiting.extend(fresh)
            effects[identity] = Effect(
                dict.fromkeys(cells), through_pointers=pointees, outward=outward, callee=identity
            )
        return effects

    def _writes_of(self, function: Function) -> _Written:
        places = Places({}, self.exposure, self._steady, self._foreign)
        frame = Frame(places, function)
        cells: set[Cell] = set()
        calls: set[str] = set()
        pointees = outward = False
        for block in function.blocks:
            for statement in block.statements:
                if isinstance(statement, Clobber):
                    outward = True
                    continue
                for place in places_of(statement):
                    if number_type(place.type) is None:
                        access = frame.access(place)
                        outward |= isinstance(statement, (Assign, Call)) and not (access.local and not access.exposed)
                        continue
                    spot = frame.spot(place)
                    pointees |= spot.pointee
                    if not spot.private and spot.cell is not None:
                        cells.add(spot.cell)
                        for bucket in spot.buckets:
                            if bucket[0] == "member" and isinstance(bucket[1], str):
                                cells.add(FieldCell(bucket[1], tuple(str(step) for step in bucket[2:])))
                if isinstance(statement, Call):
                    name = statement.callee.name if isinstance(statement.callee, FunctionName) else None
                    body = self.resolve(name, function) if name is not None else None
                    if body is not None:
                        calls.add(body.identity)
                    elif name not in CONTRACTS or CONTRACTS[name].writes or CONTRACTS[name].onward is not None:
                        outward = True
        return _Written(frozenset(cells), pointees, outward, frozenset(calls))

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
                    for other in _shared_cells(item.variable.type, cell.path, self.exposure):
                        self._join_initial(other, value)
        self.summaries = dict(self._initial)

    def _join_initial(self, cell: Cell, value: Interval) -> None:
        known = self._initial.get(cell)
        self._initial[cell] = value if known is None else union(known, value)

    def _analyse(self, function: Function) -> tuple[FunctionValues, frozenset[Cell]]:
        summaries = _Logged(self)
        entry = self._entry(function, summaries.read)
        found = analyse(function, entry, self.surroundings(summaries))
        for spot in found.engine.places.all():
            if spot.cell is not None:
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

    def _contribution(self, function: Function, record: Record) -> Table:
        """What a run of the function adds to the summaries."""
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
        cells = dict(record.left)
        for cell, value in record.stored.items():
            if self.shared(cell):
                cells[cell] = union(cells[cell], value) if cell in cells else value
        for cell, value in cells.items():
            add(cell, value)
            other = self._shared_as.get(cell)
            if other is not None and other != cell:
                add(other, value)
        for width, value in record.pointees.items():
            add(pointee_cell(width), value)
        if record.returned is not None:
            add(VariableCell(function.identity, ("returned",)), record.returned)
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
        return self._contribution(function, found.record)

    def _solve(self) -> None:
        waiting = dict.fromkeys(self.functions)
        while waiting:
            identity = next(iter(waiting))
            del waiting[identity]
            added = self._added[identity] = self._run(identity)
            changed = self._grow(added, shape_of(self.functions[identity]).thresholds)
            if changed:
                waiting.update(
                    dict.fromkeys(other for other, read in self._read.items() if not changed.isdisjoint(read))
                )
            waiting.update(dict.fromkeys(callee for callee in self._late if callee in self.functions))
            self._late.clear()
        if self._growth:
            for _ in range(2):
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
            joined = value if base is None else union(base, value)
            self._growth[cell] = self._growth.get(cell, 0) + 1
            if self._growth[cell] > ROUNDS and base is not None:
                joined = widen(base, value, thresholds) or joined
            if self._growth[cell] > 8 * ROUNDS:
                joined = Interval(min(joined.low, -(1 << 63)), max(joined.high, (1 << 64) - 1), 1)
            self.summaries[cell] = joined
            changed.add(cell)
        return changed

    def _shrink(self) -> bool:
        """Replace widened summaries by what was really added, if that is inductive; whether anything changed."""
        smaller: Table = dict(self._initial)
        for added in self._added.values():
            for cell, value in added.items():
                known = smaller.get(cell, FALSE if isinstance(cell, FieldCell) else None)
                smaller[cell] = value if known is None else union(known, value)
        changed = {cell for cell, value in self.summaries.items() if smaller.get(cell, value) != value}
        if not changed:
            return False
        before = (self.summaries, dict(self._added), dict(self._read), dict(self._records))
        self.summaries = {cell: smaller.get(cell, value) for cell, value in self.summaries.items()}
        for identity in [name for name, read in self._read.items() if not changed.isdisjoint(read)]:
            added = self._run(identity)
            self._added[identity] = added
            for cell, value in added.items():
                known = self.summaries.get(cell, FALSE if isinstance(cell, FieldCell) else None)
                if not is_subset(value, known) or self._late:
                    self.summaries, self._added, self._read, self._records = before
                    return False
        return True


def summarise(
    functions: Sequence[Function],
    objects: Sequence[Object],
    private: Callable[[Cell], bool],
    *,
    structs: Mapping[str, StructLayout] | None = None,
    shared: Callable[[Cell], bool] = lambda cell: False,
    foreign: Callable[[Cell], bool] = lambda cell: False,
    steady: Callable[[Cell], bool] = lambda cell: False,
    closed: bool = False,
    depth: int = 2,
) -> ProgramValues:
    """The inductive ranges of a program's lasting cells.

    ``private`` says of a cell that only the given functions store into it. ``shared``: an interrupt can look at the
    cell between any two statements. ``foreign``: one may store into it at any moment. ``steady``: a volatile cell
    into which only the given functions store, from one context. ``closed``: the functions are the whole program, so
    calls through pointers lead to them. ``depth``: how deep callees are run in place.
    """
    return ProgramValues(
        functions, objects, private, structs=structs, shared=shared, foreign=foreign, steady=steady, closed=closed,
        depth=depth,
    )  # fmt: skip


__all__ = ["ASSUMPTIONS", "ProgramValues", "initial_cells", "resolver", "summarise"]
