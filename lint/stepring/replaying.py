"""Replaying a log: every witness in it is run once more, in the interpreter and as a program.

A log says how its inspection was asked for, so the same units are gathered and read again; of them only those that a
witness needs are lowered: the ones that define the functions it calls, and what these call and use in turn. Nothing of
the inspected code is run as a program unless the person lets it be compiled.
"""

import os
import re
import tempfile
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any, Literal, TypeAlias

from stepring.gather.gather import gather
from stepring.gather.types import Unit
from stepring.meaning.types import TypedUnit
from stepring.paths.driver import Heading, NotPossible, Plan, driver_text, needed_functions, needed_objects
from stepring.paths.driver_build import (
    FLAGS,
    Host,
    Stop,
    compile_file,
    find_host,
    host_options,
    link,
    run_program,
)
from stepring.paths.interpreter import program
from stepring.paths.library import BUILTINS
from stepring.paths.mentions import functions_mentioned, objects_mentioned
from stepring.paths.replay import Replayed, replay
from stepring.paths.witness import Witness
from stepring.paths.witness_json import BadWitness, witness_from_json
from stepring.pipeline import Options, Worker, project_settings
from stepring.places import Origin, Position
from stepring.read.types import ReadUnit
from stepring.report.serialise import write_whole
from stepring.report.text import clean
from stepring.witness_log import BadLog, Claim, Log

_INSIDE = ("bounds", "overlap", "lifetime")
"""Faults of which the compiler's checks see some only."""

Ended: TypeAlias = Literal["stopped", "did not stop", "not possible", "not tried"]


@dataclass(frozen=True, slots=True)
class Wishes:
    """What the person asked for: ``compile`` False runs the interpreter alone; ``keep`` is where programs are kept;
    ``compilers`` name the one to build them with."""

    compile: bool = True
    keep: Path | None = None
    compilers: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Judged:
    """What came of one claim: in the interpreter (``held``, ``why``), and as a program (``ended``, ``program_why``)."""

    claim: Claim
    held: bool
    why: str
    ended: Ended
    program_why: str
    kept: Path | None = None

    @property
    def replayed(self) -> bool:
        """Whether all that could be done shows the finding again."""
        return self.held and self.ended != "did not stop"


# ----------------------------------------------------------------------------------------------------------- the units


@dataclass(frozen=True, slots=True, eq=False)
class _Lowered:
    """A unit with its meaning."""

    unit: Unit
    read: ReadUnit
    typed: TypedUnit


@dataclass(slots=True)
class _Units:
    """The units of a log, each lowered when it is needed for the first time."""

    root: Path
    units: tuple[Unit, ...]
    worker: Worker
    lowered: dict[int, _Lowered] = field(default_factory=dict)
    texts: dict[int, bytes] = field(default_factory=dict)

    def get(self, number: int) -> _Lowered:
        if number not in self.lowered:
            unit = self.units[number]
            self.lowered[number] = _Lowered(unit, *self.worker.meaning(unit))
        return self.lowered[number]

    def mentions(self, number: int, name: str) -> bool:
        """Whether the unit's own file holds a word."""
        if number not in self.texts:
            try:
                self.texts[number] = self.units[number].source.read_bytes()
            except OSError:
                self.texts[number] = b""
        return re.search(rb"(?<!\w)%s(?!\w)" % re.escape(name.encode()), self.texts[number]) is not None

    def defining(self, identity: str, beside: Sequence[int]) -> int | None:
        """The unit that defines a function or object: one of those at hand, else the first that does."""
        file, _, name = identity.rpartition(":")
        name = name.partition("@")[0]
        source = file.split(":", 1)[0]
        for number in beside:
            if _defines(self.get(number), identity):
                return number
        others = [number for number in range(len(self.units)) if number not in beside]
        own = [number for number in others if str(self.units[number].source) == source]
        header = Path(source).name
        likely = [
            number for number in others if self.mentions(number, name) or (header and self.mentions(number, header))
        ]
        for number in dict.fromkeys((*own, *likely)):
            if _defines(self.get(number), identity):
                return number
        return None


def _defines(lowered: _Lowered, identity: str) -> bool:
    if any(function.identity == identity for function in lowered.typed.functions):
        return True
    if any(item.variable.identity == identity for item in lowered.typed.objects):
        return True
    return any(variable.identity == identity and variable.storage == "static-local" for variable in _lasting(lowered))


def _lasting(lowered: _Lowered) -> Iterator[Any]:
    for function in lowered.typed.functions:
        yield from (variable for variable in function.variables if variable.lasting)


def gathered_units(log: Log, root: Path) -> _Units:
    """The units of the inspection that a log comes from, gathered anew below a root."""
    asked = log.inspection
    here = Path(os.path.normpath(root / asked.folder))
    paths = [Path(os.path.normpath(root / path)) for path in asked.paths]
    settings, _ = project_settings(paths or [here])
    found = gather(
        paths,
        database=None if asked.compile_commands is None else Path(os.path.normpath(root / asked.compile_commands)),
        compilers=asked.compilers,
        settings=settings,
        current=here,
    )
    said = next((notice.text for notice in found.notices if notice.level == "error"), "")
    if said or not found.units:
        raise BadLog(f"the units of the log could not be gathered: {said.rstrip('.') or 'no C was found'}")
    options = Options(data_model=asked.data_model or settings.data_model, use_compiler=asked.use_compiler)
    return _Units(root, found.units, Worker(found.root, options))


@dataclass(frozen=True, slots=True)
class _Chosen:
    """The units that a witness needs: those it names things of, and all, with functions that stand outside left out."""

    named: tuple[_Lowered, ...]
    every: tuple[_Lowered, ...]
    typed: tuple[TypedUnit, ...]


def choose(units: _Units, witness: Witness) -> _Chosen:
    """The units that define what a witness names, then those that define what its calls lead to. ``BadLog``: none."""
    named: list[int] = []
    functions = needed_functions(witness)
    for identity in (*reversed(functions), *needed_objects(witness)):
        number = units.defining(identity, named)
        if number is None and identity in functions:
            raise BadLog(f"no unit defines {clean(identity)}")
        if number is not None and number not in named:
            named.append(number)
    outside = {given.name for call in witness.calls for given in call.outside}
    every = list(named)
    waiting = [identity.rpartition(":")[2] for identity in functions]
    done: set[str] = set(outside) | set(BUILTINS)
    while waiting:
        name = waiting.pop()
        if name in done:
            continue
        done.add(name)
        for function in _bodies(units, every, name):
            waiting.extend(functions_mentioned(function))
            for wanted in (*functions_mentioned(function), *objects_mentioned(function)):
                if wanted not in done:
                    found = units.defining(wanted, every)
                    if found is not None and found not in every:
                        every.append(found)
    typed = tuple(
        replace(one.typed, functions=tuple(item for item in one.typed.functions if item.name not in outside))
        for one in map(units.get, every)
    )
    return _Chosen(tuple(map(units.get, named)), tuple(map(units.get, every)), typed)


def _bodies(units: _Units, chosen: Sequence[int], name: str) -> Iterator[Any]:
    for number in chosen:
        yield from (function for function in units.get(number).typed.functions if function.name == name)


# ------------------------------------------------------------------------------------------------------------ judging


def replay_log(log: Log, root: Path, wishes: Wishes) -> Iterator[Judged]:
    """Every claim of a log, judged in the log's order. ``BadLog`` where the units cannot be gathered."""
    units = gathered_units(log, root)
    names: dict[str, int] = {}
    for claim in log.claims:
        one = _judge(claim, units, wishes, _program_name(claim, names))
        yield replace(one, why=_shown(one.why, root), program_why=_shown(one.program_why, root))


def _shown(text: str, root: Path) -> str:
    """A text without the root's own path."""
    return text.replace(str(root).rstrip("/") + "/", "")


def _program_name(claim: Claim, names: dict[str, int]) -> str:
    """A file name for a claim's program; the same log gives the same names."""
    stem = re.sub(r"\W+", "_", f"{claim.rule}_{Path(claim.file).stem}_{claim.line}", flags=re.ASCII)
    names[stem] = names.get(stem, 0) + 1
    return stem if names[stem] == 1 else f"{stem}_{names[stem]}"


def _judge(claim: Claim, units: _Units, wishes: Wishes, name: str) -> Judged:
    without: Ended = "not possible" if wishes.compile else "not tried"
    try:
        witness = witness_from_json(claim.data, str(units.root))
    except BadWitness as trouble:
        return Judged(claim, False, f"the log's witness is malformed: {trouble}", without, "it has no witness")
    try:
        chosen = choose(units, witness)
    except BadLog as trouble:
        return Judged(claim, False, str(trouble), without, "the code that it needs is not there")
    done = _interpreted(chosen, witness)
    if not wishes.compile:
        return Judged(claim, done.held, done.why, "not tried", "")
    try:
        ended, why, kept = _as_program(claim, chosen, witness, done, units.root, wishes, name)
    except NotPossible as trouble:
        ended, why, kept = "not possible", str(trouble), None
    return Judged(claim, done.held, done.why, ended, why, kept)


def _interpreted(chosen: _Chosen, witness: Witness) -> Replayed:
    models = {one.types.model.name for one in chosen.typed}
    if models != {witness.model}:
        named = " and ".join(sorted(models))
        return Replayed(False, f"the code is read with the data model {named} and the witness is for {witness.model}")
    places: dict[str, ReadUnit] = {}
    for one in chosen.every:
        for function in one.typed.functions:
            places.setdefault(function.position.file, one.read)

    def origin(position: Position) -> Origin:
        return places.get(position.file, chosen.every[0].read).origin(position)

    try:
        return replay(program(chosen.typed), witness, origin=origin)
    except ValueError as trouble:  # units for different targets
        return Replayed(False, str(trouble))


# ---------------------------------------------------------------------------------------------------------- a program


def _as_program(
    claim: Claim, chosen: _Chosen, witness: Witness, done: Replayed, root: Path, wishes: Wishes, name: str
) -> tuple[Ended, str, Path | None]:
    """Make the witness's program, build it, run it and say where it stopped."""
    model = chosen.typed[0].types.model
    host = find_host(model, chosen.named[0].unit, root, wishes.compilers)
    if isinstance(host, str):
        raise NotPossible(host)
    linked = [one for one in chosen.every if one not in chosen.named]
    where = witness.ending.where
    place = f"{_relative(where.file, root)}:{where.line}"
    plan = Plan(
        program(chosen.typed),
        witness,
        tuple(_relative(str(one.unit.source), root) for one in chosen.named),
        frozenset(_owned(chosen.named)),
        frozenset(function.name for one in chosen.every for function in one.typed.functions),
        place,
        done.before,
    )
    heading = Heading(
        (f"{claim.rule}, {claim.file}, line {claim.line}:", claim.text),
        place.replace(":", ", line "),
        tuple(_build_lines(host, chosen, linked, root, wishes.keep, name)),
    )
    with tempfile.TemporaryDirectory(prefix="stepring-") as made:
        folder = Path(os.path.realpath(made))
        text, target = _built(plan, heading, host, chosen, linked, root, folder)
        kept = _keep(wishes.keep, name, text)
        ran = run_program(target, folder, [root, *(one.unit.source.parent for one in chosen.every)])
    if ran.stop is not None and _same_place(ran.stop, where, place, root):
        found = witness.ending.found
        if witness.ending.kind in ("result", "value") and f" {found};" not in f"{ran.stop.message};":
            return "did not stop", f"another value comes out ({ran.stop.message})", kept
        return "stopped", ran.stop.message, kept
    if ran.stop is not None and ran.stop.line:
        at = f"{_relative(ran.stop.file, root)}, line {ran.stop.line}"
        return "did not stop", f"it stops at {at} instead ({ran.stop.message})", kept
    ending = "it runs to its end" if ran.status == 0 else f"it ends with status {ran.status}"
    if isinstance(ran.status, str):
        ending = f"it {ran.status}"
    if ran.status == 0 and done.held and witness.ending.fault in _INSIDE:
        ending += "; the compiler's checks see only some faults of this kind"
    return "did not stop", ending if ran.stop is None else f"{ending} ({ran.stop.message})", kept


def _built(
    plan: Plan, heading: Heading, host: Host, chosen: _Chosen, linked: Sequence[_Lowered], root: Path, folder: Path
) -> tuple[str, Path]:
    """The program's text and its executable; symbols that nothing defines are added once the linker has named them."""
    objects = [folder / f"unit{number}.o" for number in range(len(linked))]
    for one, target in zip(linked, objects, strict=True):
        options = (*host_options(one.unit), "-Dmain=replay_main_of_another_unit")
        _or_not_possible(compile_file(host, options, one.unit.source, target, folder))
    source, own, executable = folder / "replay.c", folder / "replay.o", folder / "replay"
    options = (*_shared_options(chosen), f"-I{root}")
    for attempt in (1, 2, 3):
        text = driver_text(plan, heading)
        source.write_text(text, encoding="utf-8", errors="surrogateescape")
        _or_not_possible(compile_file(host, options, source, own, folder))
        trouble, missing = link(host, [own, *objects], executable, folder)
        if not trouble:
            return text, executable
        if not missing or attempt == 3 or set(missing) <= set(plan.undefined):
            raise NotPossible(trouble)
        plan = replace(plan, undefined=tuple(sorted({*plan.undefined, *missing})))
    raise AssertionError("unreachable")


def _or_not_possible(trouble: str) -> None:
    if trouble:
        raise NotPossible(trouble)


def _shared_options(chosen: _Chosen) -> tuple[str, ...]:
    """The options of the included units; two that are built differently cannot be included in one program."""
    options = host_options(chosen.named[0].unit)
    macros = {tuple(word for word in host_options(one.unit) if word[:2] in ("-D", "-U")) for one in chosen.named}
    if len(macros) > 1:
        raise NotPossible("it needs functions or objects of two files that are built with different macros")
    more = [host_options(one.unit) for one in chosen.named[1:]]
    folders = [word for words in more for word in words if word.startswith("-I") and word not in options]
    return (*options, *folders)


def _owned(named: Sequence[_Lowered]) -> Iterator[str]:
    for one in named:
        yield from (function.identity for function in one.typed.functions)
        yield from (item.variable.identity for item in one.typed.objects)
        yield from (variable.identity for variable in _lasting(one))


def _keep(folder: Path | None, name: str, text: str) -> Path | None:
    if folder is None:
        return None
    path = folder / f"{name}.c"
    try:
        folder.mkdir(parents=True, exist_ok=True)
        write_whole(path, text.encode("utf-8", "surrogateescape"))
    except (OSError, ValueError) as trouble:
        why = getattr(trouble, "strerror", None) or trouble
        raise BadLog(f"the program could not be kept as {clean(str(path))}: {why}") from None
    return path


def _build_lines(
    host: Host, chosen: _Chosen, linked: Sequence[_Lowered], root: Path, keep: Path | None, name: str
) -> Iterator[str]:
    """The commands that build a kept program, with paths as seen from the root."""
    own = _relative(os.path.normpath(Path.cwd() / (keep or ".") / f"{name}.c"), root)
    compiler = Path(host.compiler).name
    flags = " ".join((*host.options, *host.checks, *(flag for flag in FLAGS if not flag.startswith("-Wno"))))
    others = []
    for number, one in enumerate(linked):
        others.append(f"{name}_{number}.o")
        words = " ".join(_shown_options(host_options(one.unit), root))
        source = _relative(str(one.unit.source), root)
        yield f"{compiler} {words} {flags} -Dmain=other_main -c {source} -o {others[-1]}".replace("  ", " ")
    words = " ".join((*_shown_options(_shared_options(chosen), root), "-I."))
    parts = (compiler, words, flags, own, *others, "-o", name)
    yield " ".join(part for part in parts if part)


def _shown_options(options: Sequence[str], root: Path) -> Iterator[str]:
    for word in options:
        head = "-I" if word.startswith("-I") else ""
        shown = head + _relative(word[len(head) :], root) if head or word.startswith("/") else word
        yield f"'{shown}'" if re.search(r"[^\w@%+=:,./\-]", shown) else shown


def _relative(path: str, root: Path) -> str:
    """A path as seen from the root where it lies below it."""
    inside = str(root).rstrip("/") + "/"
    real = os.path.realpath(root).rstrip("/") + "/"
    for start in (inside, real):
        if path.startswith(start):
            return path[len(start) :]
    return "." if path == str(root) else path


def _same_place(stop: Stop, where: Origin, place: str, root: Path) -> bool:
    if f"{stop.file}:{stop.line}" == place:
        return True
    return stop.line == where.line and os.path.realpath(stop.file) == os.path.realpath(root / where.file)
