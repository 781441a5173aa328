"""RB07: an index type too narrow for the capacity.

An unsigned octet returns to 0 after 255 (N1570 6.3.1.3p2), whatever the wrap says; slots above are never used. The
same holds for a count that must be able to hold the capacity itself. CWE-197, CWE-128.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule, WitnessStep
from stepring.shapes.ring_types import CheckedStep
from stepring.shapes.types import Index, Program, Ring
from stepring_rules.ring_common import about, declared, is_scaled, once, short
from stepring_rules.ring_runs import witnessed


def narrow_index(program: Program) -> Iterator[Obligation]:
    """One obligation for each step of each index and count."""
    return witnessed(program, from_code(program))


def from_code(program: Program) -> Iterator[Obligation]:
    """The same, decided from the code alone."""
    return once(
        item
        for ring in program.rings
        if ring.capacity is not None
        for index in ring.indices
        if not is_scaled(ring, index)
        for step in index.steps
        if isinstance(step, CheckedStep)
        for item in _check(ring, ring.capacity, index, step)
    )


def _check(ring: Ring, capacity: int, index: Index, step: CheckedStep) -> Iterator[Obligation]:
    name = short(index.name)
    needed = capacity if index.role == "count" else capacity - 1
    if index.high >= needed:
        yield about(
            "RB07",
            ring,
            "pass",
            step.where,
            f"{name} can hold every value up to {needed}, as {ring.storage} needs.",
            function=step.function,
        )
        return
    if index.role == "count" and (step.by is None or step.by < 0):
        return
    after = index.low
    if index.role == "count":
        what = f"{name} counts to {index.high} at most, but {ring.storage} has {capacity} slots"
    else:
        what = f"{name} ({index.type_name}) ends at {index.high}, but {ring.storage} has {capacity} slots"
    yield about(
        "RB07",
        ring,
        "fail",
        step.where,
        f"{what}: after {index.high} it goes to {after}.",
        "warning",
        why=f"The slots from {index.high + 1} on are never used, and the wrap that the code states never happens."
        if index.role != "count"
        else "A full ring then looks like an empty one.",
        advice=f"Give {name} a type that can hold {needed}.",
        function=step.function,
        related=(declared(ring),),
        witness=(
            WitnessStep(step.where, f"{name} is {index.high} and is moved on", ((name, str(index.high)),)),
            WitnessStep(step.where, f"{name} is {after}", ((name, str(after)),)),
        ),
    )


RULE = Rule(
    "RB07",
    "IndexTypeTooNarrow",
    "An index's type is too narrow for the capacity.",
    "warning",
    narrow_index,
    (197, 128),
)
