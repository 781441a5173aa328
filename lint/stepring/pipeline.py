"""The whole inspection in one place: units go through the stages one by one, then the program is judged.

Unit, then program: what is expensive happens once for each unit and ends in a ``UnitSummary`` that can be stored and
sent; the program stage merges summaries and runs the rules. With several jobs each worker process keeps its own
reader; the order of summaries is that of the units, whatever the number of jobs. A unit that fails costs itself and
is said.
"""

import gc
import os
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from concurrent.futures import ProcessPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass, field, replace
from pathlib import Path
from types import MappingProxyType

from stepring.gather.gather import gather
from stepring.gather.settings import Settings, find_settings, read_settings
from stepring.gather.types import Unit
from stepring.meaning.models import MODELS, model_from_macros
from stepring.meaning.types import DataModel, Function, Object, StructLayout, TypedUnit
from stepring.meaning.unit import Meanings, lower_unit
from stepring.paths.symbolic_types import Limits
from stepring.places import Notice, Origin, Position
from stepring.read.preprocess import preprocess
from stepring.read.reader import Reader
from stepring.read.types import FunctionPlace, ReadUnit
from stepring.report.types import Coverage, Inspection, Outcome
from stepring.rule import Obligation, Rule, load_rules
from stepring.shapes.facts import StateFacts
from stepring.shapes.machines import find_machines
from stepring.shapes.positions import positions_of
from stepring.shapes.ring_called import called_by
from stepring.shapes.ring_evidence import Code, UnitCode, with_evidence
from stepring.shapes.ring_ranges import with_ranges
from stepring.shapes.ring_writers import Noter, Writers, outside_of
from stepring.shapes.rings import find_rings, ring_functions
from stepring.shapes.state_facts import state_facts
from stepring.shapes.types import Machine, Program, Ring

DEFAULT_MODEL = "ILP32"
Progress = Callable[[int, int, str], None]


@dataclass(frozen=True, slots=True)
class Options:
    """What the user asked for.

    ``proofs`` False runs no operations and asks no solver: what only they can show stays open. ``query_limit`` bounds
    one query, in the solver's own units of work, which are the same on every machine; ``time_limit`` bounds an
    obligation, in seconds of the clock, and is only for the worst case. None means the engines' own.
    """

    compile_commands: Path | None = None
    data_model: str | None = None
    jobs: int = 1
    compilers: tuple[str, ...] = ()
    use_compiler: bool = True
    proofs: bool = True
    query_limit: int | None = None
    time_limit: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class UnitSummary:
    """What the program stage needs of a unit: plain data, no syntax trees and no way back into the unit.

    ``ring_functions`` is the IR of the functions that may be part of a ring, ``called`` that of the unit's functions
    that these call in turn, ``origins`` the original places of all that both mention. ``writers`` are the other
    functions that store into what may be an index.
    """

    unit: Unit
    model: DataModel
    read: bool
    states: StateFacts
    ring_functions: tuple[Function, ...]
    objects: tuple[Object, ...]
    structs: Mapping[str, StructLayout]
    origins: Mapping[Position, Origin]
    functions: tuple[FunctionPlace, ...]
    notices: tuple[Notice, ...]
    writers: Writers = field(default_factory=dict)
    called: tuple[Function, ...] = ()


class Worker:
    """What one process keeps between units: the reader with its caches, and functions already lowered."""

    def __init__(self, root: Path, options: Options) -> None:
        self.options = options
        self.reader = Reader(root)
        self.meanings = Meanings()
        # A header's inline function is in many units; its part of a summary is made once.
        self.origins: dict[Position, Origin] = {}
        self.noter = Noter()

    def summarise(self, unit: Unit) -> UnitSummary:
        """One unit through gathering's, reading's and meaning's stages to its summary."""
        return self._summary(*self.meaning(unit))

    def meaning(self, unit: Unit) -> tuple[ReadUnit, TypedUnit]:
        """One unit through reading's and meaning's stages."""
        model_name = self.options.data_model or unit.data_model or DEFAULT_MODEL
        pre = preprocess(unit, data_model=model_name, allow_compiler=self.options.use_compiler)
        read = self.reader.read(pre)
        named = MODELS[self.options.data_model] if self.options.data_model else None
        model = named or model_from_macros(pre.predefined) or MODELS[model_name]
        return read, lower_unit(read, model, self.meanings)

    def _summary(self, read: ReadUnit, typed: TypedUnit) -> UnitSummary:
        rings = ring_functions([function for function in typed.functions if function.own])
        writers = self.noter.writers(typed.functions, rings, typed.objects, typed.types.structs)
        called = called_by(rings, typed.functions)
        kept = (*rings, *called)
        wanted = {variable.identity for function in kept for variable in function.variables if variable.lasting}
        objects = tuple(item for item in typed.objects if item.variable.identity in wanted)
        origins = {position: self._origin(read, position) for position in positions_of(kept, objects)}
        lost = {(notice.file, notice.line) for notice in typed.notices}
        functions = tuple(
            replace(place, read=False) if (place.file, place.line) in lost else place for place in read.functions
        )
        return UnitSummary(
            read.unit,
            typed.types.model,
            True,
            state_facts(typed, read),
            rings,
            objects,
            typed.types.structs if rings else {},
            origins,
            functions,
            (*read.notices, *(self._placed(read, notice) for notice in typed.notices)),
            writers,
            called,
        )

    def _origin(self, read: ReadUnit, position: Position) -> Origin:
        known = self.origins.get(position)
        if known is None:
            known = self.origins[position] = read.origin(position)
        return known

    def _placed(self, read: ReadUnit, notice: Notice) -> Notice:
        if notice.file is None or notice.line is None:
            return notice
        where = read.origin(Position(notice.file, notice.line, notice.column or 0))
        return replace(notice, file=where.file, line=where.line, column=where.column)


def inspect(paths: Sequence[Path], options: Options, progress: Progress | None = None) -> Outcome:
    """Inspect the C below ``paths`` and judge every rule. Bad input becomes notices; nothing is raised for it."""
    with _without_collector():
        return _inspect(paths, options, progress)


@contextmanager
def _without_collector() -> Iterator[None]:
    """No search for reference cycles meanwhile: trees and IR have none, and going through them again and again costs
    a tenth."""
    was_on = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if was_on:
            gc.enable()


def _inspect(paths: Sequence[Path], options: Options, progress: Progress | None) -> Outcome:
    settings, notices = project_settings(paths)
    options = replace(options, data_model=options.data_model or settings.data_model)
    gathered = gather(paths, database=options.compile_commands, compilers=options.compilers, settings=settings)
    summaries = list(summarise(gathered.root, gathered.units, options, progress))
    rules = load_rules()
    obligations: list[Obligation] = []
    said: list[Notice] = [*notices, *gathered.notices]
    whole = not any(path.is_file() for path in paths)
    program = merge(summaries, said, whole=whole, limits=limits_of(options) if options.proofs else None)
    for summary in summaries:
        said.extend(summary.notices)
    for rule in rules:
        obligations.extend(judge(rule, program, said))
    return Outcome(
        gathered.root,
        rules,
        program,
        tuple(sorted(set(obligations), key=_order)),
        tuple(dict.fromkeys(said)),
        coverage(summaries, len(gathered.units)),
        tuple(sorted({summary.model.name for summary in summaries if summary.read})),
        settings.fail_level,
        asked(paths, options, gathered.root),
    )


def asked(paths: Sequence[Path], options: Options, root: Path) -> Inspection:
    """What a run was asked for, in paths that mean the same wherever the root lies."""

    def inside(path: Path) -> str:
        return Path(os.path.relpath(path, root)).as_posix()

    return Inspection(
        "." if paths else inside(Path.cwd()),
        tuple(inside(path) for path in paths),
        None if options.compile_commands is None else inside(options.compile_commands),
        options.data_model,
        tuple(Path(name).name for name in options.compilers),
        options.use_compiler,
    )


def limits_of(options: Options) -> Limits:
    """The solver's limits: the usual ones where nothing else was asked for."""
    usual = Limits()
    return replace(usual, effort=options.query_limit or usual.effort, seconds=options.time_limit)


def project_settings(paths: Sequence[Path]) -> tuple[Settings, tuple[Notice, ...]]:
    """The settings of the nearest ``stepring.toml`` at or above what is inspected, else of the current folder's if that
    holds what is inspected."""
    here = Path.cwd()
    named = [os.path.normpath(here / path) for path in paths] or [str(here)]
    start = Path(os.path.commonpath(named))
    found = find_settings(start)
    if found is None and start.is_relative_to(here):
        found = find_settings(here)
    if found is None:
        return Settings(), ()
    return read_settings(found, frozenset(MODELS))


def summarise(root: Path, units: Sequence[Unit], options: Options, progress: Progress | None) -> Iterator[UnitSummary]:
    """Every unit's summary, in the units' order."""
    if options.jobs <= 1 or len(units) < 2:
        worker = Worker(root, options)
        for number, unit in enumerate(units):
            if progress is not None:
                progress(number, len(units), unit.source.name)
            yield _guarded(worker, unit)
        return
    with ProcessPoolExecutor(options.jobs, initializer=_start, initargs=(root, options)) as pool:
        chunk = max(1, min(8, len(units) // (4 * options.jobs)))
        for number, summary in enumerate(pool.map(_one, units, chunksize=chunk)):
            if progress is not None:
                progress(number, len(units), summary.unit.source.name)
            yield summary


_worker: Worker | None = None


def _start(root: Path, options: Options) -> None:
    global _worker
    gc.disable()  # as in _without_collector; the process ends with its work
    _worker = Worker(root, options)


def _one(unit: Unit) -> UnitSummary:
    assert _worker is not None
    return _guarded(_worker, unit)


def _guarded(worker: Worker, unit: Unit) -> UnitSummary:
    """A unit's summary; one that makes a stage fail is reported and left out, the rest goes on."""
    try:
        return worker.summarise(unit)
    except Exception as trouble:  # whatever it is, it must not cost the other units
        text = f"{unit.source} was left out: a stage failed on it ({type(trouble).__name__}: {trouble})."
        notice = Notice("internal", "warning", text, str(unit.source))
        empty = StateFacts()
        model = MODELS[DEFAULT_MODEL]
        return UnitSummary(unit, model, False, empty, (), (), {}, {}, (), (notice,))


def merge(
    summaries: Sequence[UnitSummary], said: list[Notice], *, whole: bool = True, limits: Limits | None = None
) -> Program:
    """The program: machines and rings from all summaries. If the search for one kind fails, the other is kept."""
    unread: dict[str, str] = {}
    for summary in summaries:
        if not summary.read:
            unread.setdefault(str(summary.unit.source), summary.unit.source.name)
        for place in summary.functions:
            if not place.read:
                unread.setdefault(place.file, place.name)
    machines: tuple[Machine, ...] = ()
    rings: tuple[Ring, ...] = ()
    try:
        machines = find_machines((summary.states for summary in summaries), unread=unread, whole=whole)
    except Exception as trouble:  # what was found of the other kind must not be lost
        said.append(Notice("internal", "error", f"Machines were not found ({type(trouble).__name__}: {trouble})."))
    try:
        rings = merge_rings(summaries, said, unread=unread, whole=whole, limits=limits)
    except Exception as trouble:
        said.append(Notice("internal", "error", f"Rings were not found ({type(trouble).__name__}: {trouble})."))
    return Program(machines, rings)


def merge_rings(
    summaries: Sequence[UnitSummary],
    said: list[Notice],
    *,
    unread: Mapping[str, str] = MappingProxyType({}),
    whole: bool = True,
    limits: Limits | None = None,
) -> tuple[Ring, ...]:
    """The rings of all units of one data model together; a program has one model, but a tree may hold several."""
    rings: list[Ring] = []
    for model in dict.fromkeys(summary.model for summary in summaries if summary.ring_functions):
        group = [summary for summary in summaries if summary.model == model]
        functions: dict[tuple[str, Position], Function] = {}
        objects: dict[tuple[str, Position], Object] = {}
        structs: dict[str, StructLayout] = {}
        origins: dict[Position, Origin] = {}
        for summary in group:
            functions.update({(function.identity, function.position): function for function in summary.ring_functions})
            for item in summary.objects:
                objects.setdefault((item.variable.identity, item.position), item)
            for name, layout in summary.structs.items():
                if name not in structs or structs[name].size is None:
                    structs[name] = layout
            origins.update(summary.origins)

        def origin(position: Position, origins: Mapping[Position, Origin] = origins) -> Origin:
            column = max(1, position.column)
            return origins.get(position) or Origin(position.file, max(1, position.line), column, column)

        run = frozenset((function.name, function.position) for function in functions.values())
        outside = outside_of((summary.writers for summary in group), run, unread, whole)
        known = tuple(functions.values())
        found = find_rings(known, tuple(objects.values()), structs, model, origin, outside)
        found = with_ranges(found, known, origin)
        if limits is not None and found:
            code = Code(
                known,
                tuple(objects.values()),
                structs,
                model,
                outside,
                tuple(
                    UnitCode(summary.ring_functions, summary.called, summary.objects, summary.structs)
                    for summary in group
                    if summary.ring_functions
                ),
                frozenset(place.name for summary in group for place in summary.functions),
            )
            found = with_evidence(found, code, origin, limits, said)
        else:
            found = tuple(replace(ring, unrun="the ring's operations were not run, as was asked for") for ring in found)
        rings.extend(found)
    return tuple(sorted(rings, key=lambda ring: (ring.where, ring.identity)))


def judge(rule: Rule, program: Program, said: list[Notice]) -> Iterable[Obligation]:
    """A rule's obligations; a rule that fails is reported and costs itself."""
    try:
        return list(rule.check(program))
    except Exception as trouble:  # a private rule's mistake must not cost the others
        said.append(Notice("internal", "warning", f"Rule {rule.id} failed ({type(trouble).__name__}: {trouble})."))
        return ()


def coverage(summaries: Sequence[UnitSummary], total: int) -> Coverage:
    """How much was read; a function that several units contain counts once, as read if one of them read it."""
    functions: dict[tuple[str, int, str], bool] = {}
    for summary in summaries:
        for place in summary.functions:
            key = (place.file, place.line, place.name)
            functions[key] = functions.get(key, False) or place.read
    read = sum(functions.values())
    return Coverage(total, sum(summary.read for summary in summaries), len(functions), read)


def _order(obligation: Obligation) -> tuple[object, ...]:
    return (obligation.where.file, obligation.where.line, obligation.where.column, obligation.rule, obligation.what)
