"""RB06: a wrap limit that differs from the storage's size.

Typical sources are ``sizeof`` taken for a number of elements and the size of the buffer next to it. CWE-131.
"""

from collections.abc import Iterator

from stepring.places import Origin
from stepring.rule import Level, Obligation, Related, Rule, WitnessStep
from stepring.shapes.ring_types import CheckedAccess
from stepring.shapes.types import Program, Ring
from stepring_rules.ring_common import (
    Turn,
    about,
    checked,
    declared,
    is_spare,
    mask_cause,
    once,
    shared_capacities,
    short,
    story,
    turns,
)
from stepring_rules.ring_runs import witnessed


def wrap_limit(program: Program) -> Iterator[Obligation]:
    """One obligation for each wrap of an index, at its update or on an access."""
    return witnessed(program, from_code(program))


def from_code(program: Program) -> Iterator[Obligation]:
    """The same, decided from the code alone."""
    return once(_all(program))


def _all(program: Program) -> Iterator[Obligation]:
    shared = shared_capacities(program)
    for turn in turns(program):
        step, capacity = turn.step, turn.capacity
        where = step.wrap_where or step.where
        if turn.cause == "RB06" and step.limit is not None:
            yield _wrong(program, turn, step.limit, where, step.function)
        elif step.limit == capacity and turn.cause is None:
            yield about(
                "RB06",
                turn.ring,
                "pass",
                where,
                f"The wrap of {short(turn.index.name)} and {turn.ring.storage} agree on {capacity} slots.",
                function=step.function,
            )
        if step.wrap in ("free-running", "modulo", "mask", "reset", "choice", "subtract") and turn.cause != "RB07":
            for access in checked(turn.ring):
                if turn.index.identity in access.cells and _differs(access, capacity):
                    if access.modulus not in shared.get(turn.index.identity, ()):
                        yield _wrong(program, turn, access.modulus or 0, access.where, access.function)


def _differs(access: CheckedAccess, capacity: int) -> bool:
    if access.modulus is None or access.scaled or access.modulus == capacity or access.reduction == "none":
        return False
    return access.reduction == "modulo" or mask_cause(access.modulus, capacity) == "RB06"


def _wrong(program: Program, turn: Turn, limit: int, where: Origin, function: str) -> Obligation:
    ring, capacity, step = turn.ring, turn.capacity, turn.step
    name = short(turn.index.name)
    spare = limit < capacity and step.limit == limit and is_spare(ring, limit)
    what = f"{name} is wrapped at {limit}, but {ring.storage} has {capacity} slots"
    if spare:
        what += f"; slot {limit} is never used" if limit == capacity - 1 else f"; slots {limit} on are never used"
    size = ring.element_size
    other = _owner(program, ring, limit)
    related = [declared(ring)]
    if size and size > 1 and limit == capacity * size and step.wrap in ("reset", "choice", "modulo"):
        what += f"; {limit} is its size in bytes"
    elif other is not None and not spare:
        what += f"; {limit} is the number of slots of {other.storage}"
        related.append(Related(other.where, f"{other.storage} has {limit} slots"))
    bad = next(
        (access for access in checked(ring) if turn.index.identity in access.cells and access.bad is not None), None
    )
    level: Level = "note" if spare else "error" if limit > capacity and bad is not None else "warning"
    if limit > capacity:
        why = "The index walks on past the end of the storage, into what lies behind it."
    else:
        why = f"The slots from {limit} on are never used, or the functions of the ring do not agree."
    pairs = [pair for pair in step.pairs if pair[0] == limit - 1] or list(step.pairs[-1:])
    witness = (
        story(bad)
        if bad is not None
        else tuple(
            WitnessStep(step.where, f"{name} goes from {before} to {after}", ((name, str(after)),))
            for before, after in pairs
        )
    )
    found: Obligation = about(
        "RB06",
        ring,
        "fail",
        where,
        what + ".",
        level,
        why=why,
        advice="Take the limit from the storage itself: sizeof a / sizeof a[0], or the constant of its declaration.",
        function=function,
        related=tuple(related),
        witness=witness,
    )
    return found


def _owner(program: Program, ring: Ring, limit: int) -> Ring | None:
    """Another ring of the same file that has the limit for its capacity."""
    found = [
        other
        for other in program.rings
        if other.capacity == limit and other.identity != ring.identity and other.where.file == ring.where.file
    ]
    return found[0] if found else None


RULE = Rule(
    "RB06",
    "WrapLimitDiffersFromStorage",
    "A wrap limit differs from the storage's number of slots.",
    "error",
    wrap_limit,
    (131, 787, 125),
)
