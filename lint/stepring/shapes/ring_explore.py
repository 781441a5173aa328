"""A ring explored by its own operations: short runs from its start, each compared with an ideal queue.

States are searched breadth first, so that the first run that shows a disagreement is a shortest one. A state is what
the ring's functions can see, with elements known by their order instead of their bytes. An operation is only called
where it is due: one that does not look what the ring holds is called only where the ideal has an element, or room; so
is one that only other functions call. What is found is run again from nothing as a ``Witness`` before it is believed.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

from stepring.meaning.types import TypedUnit
from stepring.paths.interpreter import run as run_program
from stepring.paths.types import ASSEMBLY
from stepring.paths.witness import OutsideValue, Reference, Value, Witness, WitnessCall
from stepring.places import Notice
from stepring.shapes.ring_alone import alone, odd_steps
from stepring.shapes.ring_calls import Purse
from stepring.shapes.ring_classify import classify
from stepring.shapes.ring_compare import search_states
from stepring.shapes.ring_further import all_ones, promised_slots
from stepring.shapes.ring_overflow import near_overflow
from stepring.shapes.ring_pair import pairs
from stepring.shapes.ring_parameters import GIVEN, STORAGE, TAKEN
from stepring.shapes.ring_report import Placer, Search, State
from stepring.shapes.ring_seek import seek
from stepring.shapes.ring_types import Disagreement
from stepring.shapes.ring_uses import (
    Probe,
)
from stepring.shapes.ring_walk import walks
from stepring.shapes.ring_world import Group, World, group_of, world_of
from stepring.shapes.types import Ring

BUDGET = 1_200_000
"""Interpreter steps for one ring; a large one gets more."""
PER_SLOT = 6000
MOST_SLOTS = 1024


@dataclass(frozen=True, slots=True)
class Exploration:
    """What came of exploring a ring.

    ``compared``: its elements were put in and taken out, so that it means something that nothing was found.
    ``unrun``: why none of its operations could be run, empty if some were.
    """

    disagreements: tuple[Disagreement, ...]
    compared: bool
    unrun: str = ""


def explore(ring: Ring, group: Group, origin: Placer, *, budget: int = BUDGET) -> Exploration:
    """The disagreements of a ring with the ideal queue, each with a witness that was run again.

    ``group`` is the program (``ring_world.group_of``), ``origin`` gives a position's original place, ``budget`` bounds
    the interpreter steps (large rings get more).
    """
    purse = Purse(budget + PER_SLOT * max(0, (ring.capacity or 0) - 64))
    sizes = _sizes(ring)
    unrun = "" if sizes else f"rings of {ring.capacity} slots are not run; 2 to {MOST_SLOTS} are"
    compared = False
    for slots in sizes:
        world = world_of(group, ring, slots)
        if world is None or not world.operations:
            unrun = "no object that its operations could be run on was found to be made"
            continue
        unrun = ""
        found = _explored(world, purse, origin)
        compared = compared or found.compared
        if found.disagreements or purse.left <= 0:
            return Exploration(found.disagreements, compared)
    return Exploration((), compared, unrun)


def with_runs(
    rings: Sequence[Ring], units: Sequence[TypedUnit], origin: Placer, said: list[Notice]
) -> tuple[Ring, ...]:
    """The rings of one program with what running their operations showed; where that fails, ``said`` gets a notice."""
    if not rings:
        return ()
    group = group_of(units, frozenset(name for ring in rings for name in ring.functions))
    found: list[Ring] = []
    for ring in rings:
        try:
            done = explore(ring, group, origin)
        except Exception as trouble:  # the other rings must not be lost
            text = f"The operations of {ring.storage} were not run ({type(trouble).__name__}: {trouble})."
            said.append(Notice("internal", "warning", text))
            found.append(replace(ring, unrun="running its operations failed"))
            continue
        found.append(replace(ring, disagreements=done.disagreements, explored=done.compared, unrun=done.unrun))
    return tuple(found)


def _sizes(ring: Ring) -> tuple[int, ...]:
    """How many slots the ring is tried with."""
    if ring.capacity is not None:
        return (ring.capacity,) if 2 <= ring.capacity <= MOST_SLOTS else ()
    if ring.bound is None:
        # Nothing says how many slots there are but the number that subscripts are reduced by.
        moduli = [access.modulus for access in ring.accesses if access.modulus is not None]
        if moduli:
            return (max(moduli),) if 2 <= max(moduli) <= MOST_SLOTS else ()
    masked = (ring.bound is not None and ring.bound.plus == 1) or ring.wrap == "mask"
    masked = masked or any(access.reduction == "mask" for access in ring.accesses)
    return (4, 2) if masked or ring.wrap == "free-running" else (4, 3)


def _explored(world: World, purse: Purse, origin: Placer) -> Exploration:
    probe = Probe(world, purse, world.save())
    base = _set_up(probe)
    search = Search(probe, origin, base)
    classify(search)
    if search.put is not None and search.take is not None:
        search_states(search, State(probe.start, (), (), 0))
        all_ones(search)
        near_overflow(search)
        pairs(search)
        walks(search)
    promised_slots(search)
    odd = odd_steps(world)
    if not search.found:
        alone(search, odd)
    seek(search, odd)
    compared = search.put is not None and search.take is not None and bool(search.uses)
    return Exploration(tuple(search.found.values()), compared)


def _set_up(probe: Probe) -> Witness:
    """Let the ring's own function for setting up do so, if it has one; the base witness with that call."""
    world = probe.world
    base = world.base
    pointers = [item for item in base.start if item.value == Reference(STORAGE)]
    if not pointers:
        return base
    for operation in world.operations:
        if not operation.has("buffer") or not operation.has("ring"):
            continue
        probe.back()
        for start in pointers:
            world.memory.write(start.object + start.path, 0)
        arguments = tuple(_set_up_argument(world, item.role, item.to, item.path) for item in operation.parameters)
        made = WitnessCall(operation.function.identity, arguments)
        done = _runs(world, made)
        if done is not None and _points(world, pointers):
            probe.start = world.save()
            return replace(base, calls=(done,))
    probe.back()
    return base


def _set_up_argument(world: World, role: str, to: str, path: str) -> Value:
    match role:
        case "ring":
            return Reference(to, 0, path)
        case "buffer":
            return Reference(STORAGE)
        case "thing":
            return Reference(path)
        case "null":
            return None
    return world.slots


def _runs(world: World, made: WitnessCall) -> WitnessCall | None:
    """The call with what it asks from outside (always 0); None if it does not return."""
    asked: list[OutsideValue] = []

    def external(name: str, given: Sequence[Any]) -> int:
        if name in world.group.wanted or name == ASSEMBLY:
            asked.append(OutsideValue(name, 0))
        return 0

    values = [world.pointer(item) for item in made.arguments]
    outcome = run_program(world.group.program, made.function, values, external, steps=5000, memory=world.memory)
    return replace(made, outside=tuple(asked)) if outcome.kind == "returned" else None


def _points(world: World, pointers: Sequence[Any]) -> bool:
    """Whether the ring is set up as it is to be: its pointer at the storage, its bound the number of slots."""
    for start in world.base.start:
        if start.object in (GIVEN, TAKEN):
            continue
        value = world.memory.read(start.object + start.path)
        if start.value == Reference(STORAGE):
            if not (isinstance(value, tuple) and value[0] is world.storage and value[1] == 0):
                return False
        elif value != start.value:
            return False
    return True
