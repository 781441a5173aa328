"""Rings with their evidence: what runs of their operations showed, and what the solver proved of all runs.

Only here do the two engines meet. Runs come first and are bounded in steps; proofs are asked for what runs cannot
show. Where an engine fails, what the other found is kept, and the failure is said.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace

from stepring.meaning.types import DataModel, Function, Object, StructLayout, TypedUnit, TypeTable
from stepring.paths.aside import Ended, aside
from stepring.paths.symbolic_types import Limits
from stepring.places import Notice, Origin, Position
from stepring.shapes.ring_explore import with_runs
from stepring.shapes.ring_proofs import prove_rings
from stepring.shapes.ring_types import CheckedAccess, CheckedStep, Proof
from stepring.shapes.ring_writers import Outside
from stepring.shapes.types import Ring

LARGE = 150
"""Rings with a function of more blocks than this are not proved: their questions are beyond the solver's limits, and
answering so takes it minutes."""


@dataclass(frozen=True, slots=True)
class UnitCode:
    """What one unit brings: the functions that may be part of a ring, those that they call, objects, structures."""

    rings: tuple[Function, ...]
    called: tuple[Function, ...]
    objects: tuple[Object, ...]
    structs: Mapping[str, StructLayout]


@dataclass(frozen=True, slots=True)
class Code:
    """The program's code of one data model as the ring finder was given it, and unit by unit.

    ``defined`` are the names of all functions that the program defines, read or not.
    """

    functions: tuple[Function, ...]
    objects: tuple[Object, ...]
    structs: Mapping[str, StructLayout]
    model: DataModel
    outside: Outside
    units: tuple[UnitCode, ...]
    defined: frozenset[str]


def with_evidence(
    rings: tuple[Ring, ...],
    code: Code,
    origin: Callable[[Position], Origin],
    limits: Limits,
    said: list[Notice],
) -> tuple[Ring, ...]:
    """The rings with ``disagreements`` and ``proofs``."""
    if not rings:
        return ()
    called: dict[tuple[str, Position], Function] = {}
    for unit in code.units:
        called.update({(function.identity, function.position): function for function in unit.called})

    large = {function.identity for function in code.functions if len(function.blocks) > LARGE}

    def prove(asked: tuple[Ring, ...]) -> tuple[tuple[Proof, ...], ...]:
        done = prove_rings(
            asked,
            code.functions,
            code.objects,
            code.structs,
            code.model,
            origin,
            outside=code.outside,
            called=tuple(called.values()),
            defined=code.defined,
            limits=limits,
        )
        return tuple(ring.proofs for ring in done)

    def proved(found: tuple[Ring, ...]) -> tuple[Ring, ...]:
        asked = tuple(ring for ring in found if _unsettled(ring) and large.isdisjoint(ring.functions))
        if not asked:
            return found
        try:
            proofs = aside(lambda: prove(asked))
        except Ended:
            # One question ended the solver: the other rings shall have their answers.
            proofs = tuple(_alone(ring, prove, said) for ring in asked)
        answers = dict(zip(asked, proofs, strict=True))
        return tuple(replace(ring, proofs=answers.get(ring, ())) for ring in found)

    steps: tuple[tuple[str, Callable[[tuple[Ring, ...]], tuple[Ring, ...]]], ...] = (
        ("The operations of rings were not run", lambda found: _run(found, code, origin, said)),
        ("Nothing was proved of rings", proved),
    )
    for what, step in steps:
        try:
            rings = step(rings)
        except Exception as trouble:  # what is known of the rings so far must not be lost
            said.append(Notice("internal", "warning", f"{what} ({type(trouble).__name__}: {trouble})."))
    return rings


def _alone(
    ring: Ring, prove: Callable[[tuple[Ring, ...]], tuple[tuple[Proof, ...], ...]], said: list[Notice]
) -> tuple[Proof, ...]:
    try:
        return aside(lambda: prove((ring,)))[0]
    except Ended:
        text = f"Nothing was proved of {ring.storage}: a question about it ended the solver."
        said.append(Notice("internal", "warning", text))
        return ()


def _unsettled(ring: Ring) -> bool:
    """Whether running its indices' code left something for the solver: where all is settled, it is not asked."""
    if ring.capacity is None or ring.unseen:
        return True
    for access in ring.accesses:
        settled = isinstance(access, CheckedAccess) and (access.settled or access.bad is not None)
        if not settled or access.kind == "address":
            return True
    return any(
        not step.settled
        for index in ring.indices
        if index.role != "count"
        for step in index.steps
        if isinstance(step, CheckedStep) and step.wrap != "none"
    )


def _run(
    rings: tuple[Ring, ...], code: Code, origin: Callable[[Position], Origin], said: list[Notice]
) -> tuple[Ring, ...]:
    """Run the operations of each ring in the program that it belongs to."""
    units = [
        TypedUnit((*unit.rings, *unit.called), unit.objects, TypeTable(code.model, unit.structs), ())
        for unit in code.units
    ]
    programs: dict[tuple[int, ...], list[Ring]] = {}
    for ring in rings:
        programs.setdefault(_program_of(ring, units), []).append(ring)
    found: dict[str, Ring] = {}
    for numbers, members in programs.items():
        for ring in with_runs(members, [units[number] for number in numbers], origin, said):
            found[ring.identity] = ring
    return tuple(found.get(ring.identity, ring) for ring in rings)


def _program_of(ring: Ring, units: Sequence[TypedUnit]) -> tuple[int, ...]:
    """The numbers of the units that make up the ring's program.

    A tree may hold several programs that define the same names. Those units come first that hold the ring's functions;
    a unit that defines a name once more is of another program.
    """
    mine = {*ring.functions, *ring.helpers}
    file = ring.where.file
    first = [number for number, unit in enumerate(units) if _holds(unit, mine, file)]
    first = first or [number for number, unit in enumerate(units) if _holds(unit, mine, None)]
    taken: dict[str, Position] = {}
    chosen: list[int] = []
    for number in dict.fromkeys((*first, *range(len(units)))):
        given = {item.name: item.position for item in units[number].functions if not item.static}
        if all(taken.get(name, position) == position for name, position in given.items()):
            chosen.append(number)
            taken.update(given)
    return tuple(sorted(chosen))


def _holds(unit: TypedUnit, functions: set[str], file: str | None) -> bool:
    """Whether a unit defines one of the functions, in the ring's own file if that is asked for."""
    return any(item.identity in functions and (file is None or item.position.file == file) for item in unit.functions)
