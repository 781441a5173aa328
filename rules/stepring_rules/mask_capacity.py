"""RB05: a mask used with a capacity that is no power of two.

``i & (N - 1)`` is ``i % N`` only if N is a power of two; else the mask has holes and slots are never visited. No CWE
entry names this mistake.
"""

from collections.abc import Iterator

from stepring.places import Origin
from stepring.rule import Obligation, Rule, WitnessStep
from stepring.shapes.types import Program
from stepring_rules.ring_common import Turn, about, checked, declared, mask_cause, once, power_of_two, short, turns
from stepring_rules.ring_runs import witnessed


def mask_capacity(program: Program) -> Iterator[Obligation]:
    """One obligation for each mask that wraps an index, at its update or on an access."""
    return witnessed(program, from_code(program))


def from_code(program: Program) -> Iterator[Obligation]:
    """The same, decided from the code alone."""
    return once(item for turn in turns(program) for item in _check(turn))


def _check(turn: Turn) -> Iterator[Obligation]:
    step, index, ring, capacity = turn.step, turn.index, turn.ring, turn.capacity
    if step.wrap == "mask" and step.limit is not None:
        if turn.cause == "RB05":
            slots = sorted({after for _, after in step.pairs})
            yield _wrong(turn, step.wrap_where or step.where, step.function, slots)
        elif step.limit == capacity and power_of_two(capacity):
            yield about(
                "RB05",
                ring,
                "pass",
                step.wrap_where or step.where,
                f"The capacity {capacity} of {ring.storage} is a power of two, so the mask is its remainder.",
                function=step.function,
            )
    for access in checked(ring):
        if index.identity not in access.cells or access.reduction != "mask" or access.modulus is None:
            continue
        if mask_cause(access.modulus, capacity) == "RB05":
            yield _wrong(turn, access.where, access.function, [])


def _wrong(turn: Turn, where: Origin, function: str, slots: list[int]) -> Obligation:
    ring, capacity = turn.ring, turn.capacity
    name = short(turn.index.name)
    what = f"{name} is wrapped with the mask {capacity - 1}, but {ring.storage} has {capacity} slots, no power of two"
    if 0 < len(slots) <= 8:
        names = ", ".join(str(slot) for slot in slots)
        what += f": only slots {names} are visited" if len(slots) > 1 else f": only slot {names} is visited"
    steps = tuple(
        WitnessStep(turn.step.where, f"{name} goes from {before} to {after}", ((name, str(after)),))
        for before, after in turn.step.pairs[:8]
    )
    found: Obligation = about(
        "RB05",
        ring,
        "fail",
        where,
        what + ".",
        "warning",
        why="The mask has holes: slots are passed over, and the ring holds fewer elements than its storage.",
        advice=f"Make the capacity a power of two and have the compiler check it, or use % {capacity}.",
        function=function,
        related=(declared(ring),),
        witness=steps,
    )
    return found


RULE = Rule(
    "RB05",
    "MaskWithoutPowerOfTwo",
    "A mask wraps an index although the capacity is no power of two.",
    "warning",
    mask_capacity,
)
