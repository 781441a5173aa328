"""Rings: found from the IR of the functions that could be part of one, and studied by running them.

Two stages. In a unit, ``ring_functions`` keeps the functions that matter. In the program, ``find_rings`` lays them out
with their helpers, finds storage with indices that walk it round, and for each ring of constant capacity runs its
functions from every index value that can be reached. What a report shows is a ``Ring``; its accesses and steps carry
the evidence that the rules need (``ring_types``).
"""

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace

from stepring.meaning.types import DataModel, Function, IntType, Object, StructLayout
from stepring.places import Origin, Position
from stepring.shapes.ring_apart import defined_often, told_apart
from stepring.shapes.ring_arith import Range
from stepring.shapes.ring_build import build
from stepring.shapes.ring_catalogue import Candidate, Catalogue, candidates, catalogue, instances, partners, stride
from stepring.shapes.ring_facts import FlatFacts
from stepring.shapes.ring_filter import ring_functions
from stepring.shapes.ring_flat import Set, Spoil, Touch
from stepring.shapes.ring_keys import Key, place_keys
from stepring.shapes.ring_orbit import study
from stepring.shapes.ring_search import Scene, Study
from stepring.shapes.ring_writers import Outside, unseen
from stepring.shapes.types import Ring

__all__ = ["find_rings", "ring_functions"]

EVERYTHING = Outside()
"""For a program of which all functions are given."""
LARGEST = 4096
"""Rings with more slots are found, but not run slot by slot."""


def find_rings(
    functions: Sequence[Function],
    objects: Sequence[Object],
    structs: Mapping[str, StructLayout],
    model: DataModel,
    origin: Callable[[Position], Origin],
    outside: Outside = EVERYTHING,
) -> tuple[Ring, ...]:
    """The rings of a program.

    ``functions`` are those that ``ring_functions`` kept, of all units; ``objects`` and ``structs`` are the program's;
    ``origin`` leads from a position to the source as it was written, ``outside`` is what is known of code that is not
    among the functions.
    """
    defined = defined_often(objects)
    functions, objects = told_apart(functions, objects)
    merged = catalogue(functions, objects, structs)
    scene = _scene(merged)
    found = []
    for candidate in candidates(merged):
        studied = None
        if candidate.capacity is not None and candidate.capacity <= LARGEST:
            strides = {key: by for key in candidate.indices for by in (stride(merged, key),) if by}
            groups = [(key, *partners(merged, key, candidate)) for key in candidate.indices]
            studied = study(scene, candidate.storage, candidate.capacity, groups, candidate.counts, strides)
        ring = build(merged, candidate, studied, origin)
        if studied is not None:
            names = dict.fromkeys(access.function for access in ring.accesses)
            missed = unseen(outside, _relied(scene, candidate, studied, groups), names, structs, defined)
            ring = replace(ring, unseen=missed)
        found.append(ring)
    return tuple(found)


def _relied(
    scene: Scene, candidate: Candidate, studied: Study, groups: Sequence[Sequence[Key]]
) -> dict[Key, frozenset[int]]:
    """The integers whose values the study rests on, each with the constants that it was seen to take.

    One that goes through all values of its type is not among them. Where several were followed together, no constant
    is harmless by itself: what the others are at that time counts.
    """
    keys = dict.fromkeys((*(key for group in groups for key in group), *candidate.counts, *sorted(studied.joined)))
    joined = bool(studied.joined) or any(len(group) > 1 for group in groups)
    found: dict[Key, frozenset[int]] = {}
    for key in keys:
        orbit = studied.orbits.get(key)
        values = orbit.possible if orbit is not None and orbit.complete else set()
        whole = scene.whole(key)
        if any(isinstance(value, Range) and value.low <= whole.low and value.high >= whole.high for value in values):
            continue
        numbers = frozenset(value for value in values if isinstance(value, int))
        if len(numbers) == whole.high - whole.low + 1:
            continue
        found[key] = frozenset() if joined else numbers
    return found


def _scene(merged: Catalogue) -> Scene:
    """What the studies need of the program."""
    names = {facts.flat.function.identity for facts in merged.entered if not _left_to_callers(merged, facts)}
    stored = [(facts, *_reach(facts, names)) for facts in merged.entered]

    def events(tracked: frozenset[Key], arrays: frozenset[Key]) -> list[FlatFacts]:
        members = {key[1] for key in tracked if key[0] == "member"}
        return [
            facts
            for facts, keys, structs, touched in stored
            if keys & tracked or touched & arrays or structs & members
        ]

    places, depths = _places(merged)

    def homes(tracked: frozenset[Key], arrays: frozenset[Key]) -> list[tuple[FlatFacts, bool]]:
        members = {key[1] for key in tracked if key[0] == "member"}
        keys = {*tracked, *(("struct", name) for name in members), *(("array", *key) for key in arrays)}
        found = dict.fromkeys(number for key in keys for number in places.get(key, ()))
        chosen = [merged.facts[number] for number in sorted(found)]
        return [(facts, facts.flat.function.identity in names) for facts in chosen]

    def initial(key: Key) -> tuple[int, ...] | None:
        return _initial(merged, key)

    def writes(name: str) -> frozenset[Key]:
        return merged.writers.get(name, frozenset())

    return Scene(events, homes, depths, initial, merged.types, writes)


def _left_to_callers(merged: Catalogue, facts: FlatFacts) -> bool:
    """Whether only its callers, which were read, show what a function's arguments can be."""
    return bool(facts.unchecked) and facts.flat.function.identity in merged.inlined


def _places(merged: Catalogue) -> tuple[dict[Key, list[int]], dict[tuple[Key, Position], int]]:
    """For each lasting integer, structure (``struct``) and array (``array``): the functions in whose text it is stored
    into or accessed.

    A helper that has a pointer for a parameter knows only through its callers what it stores into. Also gives how deep
    in calls the place is seen first.
    """
    depths: dict[tuple[Key, Position], int] = {}
    entries: list[tuple[Key, Position, int, int]] = []
    for number, facts in enumerate(merged.facts):
        for block in facts.flat.blocks:
            depth = len(block.inside)
            for op in block.ops:
                keys: Iterable[Key] = ()
                match op:
                    case Spoil():
                        keys = (*op.keys, *(("struct", name) for name in op.structs))
                    case Touch():
                        keys = (("array", *op.storage),)
                    case Set():
                        keys = place_keys(op.place, op.place_frame, facts.flat.points)
                for key in keys:
                    if key[0] != "local":
                        entries.append((key, op.position, depth, number))
                        mark = (key, op.position)
                        depths[mark] = min(depth, depths.get(mark, depth))
    found: dict[Key, list[int]] = {}
    for key, position, depth, number in entries:
        if depth == depths[key, position]:
            found.setdefault(key, []).append(number)
    return found, depths


def _reach(facts: FlatFacts, entered: set[str]) -> tuple[frozenset[Key], frozenset[str], frozenset[Key]]:
    """What a function stores into and accesses (integers, whole structures, arrays), by itself or through helpers.

    What it does through functions that can be entered themselves is left to those: they are run from every state.
    """
    keys: set[Key] = set()
    structs: set[str] = set()
    arrays: set[Key] = set()
    for block in facts.flat.blocks:
        if not entered.isdisjoint(block.inside):
            continue
        for op in block.ops:
            match op:
                case Spoil():
                    keys |= op.keys
                    structs |= op.structs
                case Touch():
                    arrays.add(op.storage)
                case Set():
                    keys |= place_keys(op.place, op.place_frame, facts.flat.points)
    return frozenset(keys), frozenset(structs), frozenset(arrays)


def _initial(merged: Catalogue, key: Key) -> tuple[int, ...] | None:
    """The values that an integer can have at start; None where its object is not in the code that was read."""
    if key[0] == "var":
        item = merged.objects.get(key[:2])
        if item is None:
            return None
        values = {known for found in item.initial for known in (_constant(found.value),) if known is not None}
        if isinstance(item.variable.type, IntType):
            return tuple(values) or (0,)
        return tuple(sorted(values | {0}))
    found_values: set[int] = set()
    some = False
    for item in instances(merged, key[1]):
        some = True
        listed = [found for found in item.initial if found.path and found.path[-1] == key[2]]
        values = {known for found in listed for known in (_constant(found.value),) if known is not None}
        found_values |= values or {0}
        if len(listed) > 1:
            found_values.add(0)
    if some:
        return tuple(sorted(found_values))
    # No object in sight: it comes from the caller, set up by the code's own reset if there is one.
    resets = {reset.value for reset in merged.moves[key].resets.values()} if key in merged.moves else set()
    return tuple(sorted(resets)) or (0,)


def _constant(value: object) -> int | None:
    found = getattr(value, "value", None)
    while found is None and hasattr(value, "operand"):
        value = value.operand
        found = getattr(value, "value", None)
    return found if isinstance(found, int) else None
