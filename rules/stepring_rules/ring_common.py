"""What the rules on rings share: which rule speaks of an index, and obligations with a ring's particulars filled in.

One defect, one finding. A wrong wrap shows in many ways (slots skipped, subscripts past the end), so ``cause`` names
the one rule that explains an index's step best; the others are silent about it.
"""

from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from stepring.places import Origin
from stepring.rule import Kind, Level, Obligation, Related, WitnessStep
from stepring.shapes.ring_types import CheckedAccess, CheckedStep, OpenReason
from stepring.shapes.types import Index, Program, Ring

Shared = Mapping[str, frozenset[int]]
"""The capacities of all rings that an index walks, by the index's identity."""


@dataclass(frozen=True, slots=True)
class Turn:
    """One step of one index of a ring of constant capacity, with the rule that explains what is wrong with it."""

    ring: Ring
    capacity: int
    index: Index
    step: CheckedStep
    cause: str | None


def short(name: str) -> str:
    """A member's own name."""
    return name.rsplit(".", 1)[-1]


def shared_capacities(program: Program) -> Shared:
    """Which capacities each index serves."""
    found: dict[str, set[int]] = defaultdict(set)
    for ring in program.rings:
        for index in ring.indices:
            if ring.capacity is not None:
                found[index.identity].add(ring.capacity)
    return {identity: frozenset(sizes) for identity, sizes in found.items()}


def turns(program: Program) -> Iterator[Turn]:
    """Every step of every index of the rings with a constant capacity; indices of parallel arrays once for each."""
    shared = shared_capacities(program)
    for ring in program.rings:
        if ring.capacity is None:
            continue
        for index in ring.indices:
            if index.role == "count" or is_scaled(ring, index):
                continue
            for step in index.steps:
                if isinstance(step, CheckedStep):
                    yield Turn(ring, ring.capacity, index, step, cause(ring, index, step, shared))


def is_scaled(ring: Ring, index: Index) -> bool:
    """Whether subscripts are multiples of the index, so that slots are not elements."""
    return any(access.scaled for access in checked(ring) if index.identity in access.cells)


def checked(ring: Ring) -> Iterator[CheckedAccess]:
    """The accesses of a ring that carry evidence."""
    return (access for access in ring.accesses if isinstance(access, CheckedAccess))


def power_of_two(number: int) -> bool:
    """Whether a number is a power of two."""
    return number > 0 and number & (number - 1) == 0


def cause(ring: Ring, index: Index, step: CheckedStep, shared: Shared) -> str | None:
    """The rule that explains what is wrong with a step, None if nothing is, or if only accesses can tell."""
    capacity = ring.capacity or 0
    if index.high < capacity - 1:
        return "RB07"
    limit = step.limit
    if limit is not None and limit != capacity and limit in shared.get(index.identity, ()):
        return None  # it fits another array that the same index walks
    if limit is not None and limit > capacity and not step.odd and fits(ring, index):
        return None  # the subscripts are made from it in another way
    if step.wrap == "mask" and limit is not None:
        return mask_cause(limit, capacity)
    if step.wrap == "modulo" and limit is not None and limit != capacity:
        return "RB06"
    if step.wrap in ("reset", "choice", "subtract", "decrement") and limit is not None:
        if step.settled and step.pairs and not step.odd and not leaves(index, capacity) and abs(step.by or 0) == 1:
            return None  # however it is written, it does what the capacity asks for
        if limit not in (capacity, capacity - 1):
            return "RB06"
        if limit == capacity - 1 and step.odd and is_spare(ring, limit):
            return "RB06"
    if step.odd and not leaves(index, capacity):
        return "RB03"
    if strides(ring, index, step):
        return "RB03"
    return None


def fits(ring: Ring, index: Index) -> bool:
    """Whether all accesses with the index are known to stay inside."""
    mine = [access for access in checked(ring) if index.identity in access.cells]
    return bool(mine) and all(access.settled for access in mine)


def mask_cause(limit: int, capacity: int) -> str | None:
    """The rule that explains a mask of ``limit - 1``."""
    if limit == capacity:
        return None if power_of_two(capacity) else "RB05"
    if not power_of_two(limit):
        return "RB03"
    return "RB06"


def is_spare(ring: Ring, limit: int) -> bool:
    """Whether the slots from ``limit`` on are left out by everybody: an array with more slots than the ring uses."""
    touched = any(access.exact is not None and max(access.exact, default=0) >= limit for access in checked(ring))
    agree = all(
        step.limit == limit for other in ring.indices if other.role != "count" for step in other.steps if step.limit
    )
    return agree and not touched


def leaves(index: Index, capacity: int) -> bool:
    """Whether the index itself certainly takes a value outside the array."""
    return any(not 0 <= after < capacity for step in index.steps for _, after in step.pairs)


def strides(ring: Ring, index: Index, step: CheckedStep) -> bool:
    """Whether one advance leaves slots out: more than one at a time, with fewer accesses than that."""
    if step.by is None or abs(step.by) < 2 or step.wrap in ("none", "subtract"):
        return False
    mine = [access for access in checked(ring) if index.identity in access.cells and access.function == step.function]
    return 0 < len(mine) < abs(step.by) and not any(access.kind == "address" for access in mine)


def about(
    rule: str, ring: Ring, kind: Kind, where: Origin, what: str, level: Level | None = None, **rest: Any
) -> Obligation:
    """An obligation on a ring."""
    return Obligation(
        rule,
        kind,
        where,
        what,
        level if kind == "fail" else None,
        subject=ring.storage,
        subject_kind=ring.kind,
        shape=ring.identity,
        **rest,
    )


def story(access: CheckedAccess) -> tuple[WitnessStep, ...]:
    """The steps to a bad access."""
    return tuple(WitnessStep(step.where, step.text, step.values) for step in access.steps)


def declared(ring: Ring) -> Related:
    """Where the storage is declared."""
    return Related(ring.where, f"{ring.storage} has {ring.capacity} slots")


def unseen_as(ring: Ring) -> OpenReason:
    """The ledger's words for what may have been missed of a ring's code."""
    return "code not read" if any("was not read" in clause for clause in ring.unseen) else "stored into elsewhere"


def once(obligations: Iterable[Obligation]) -> Iterator[Obligation]:
    """Findings of parallel arrays on one index, which have the same cause, said once."""
    said: set[tuple[str, Origin]] = set()
    for item in obligations:
        mark = (item.rule, item.where)
        if item.kind == "fail" and mark in said:
            continue
        if item.kind == "fail":
            said.add(mark)
        yield item
