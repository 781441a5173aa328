"""RB04: a free-running counter whose overflow breaks the slot sequence.

An unsigned counter of w bits goes from 2^w - 1 to 0 (N1570 6.2.5p9). Reduced modulo the capacity, the slots follow on
only if the capacity divides 2^w. CWE-128, CWE-190.
"""

from collections.abc import Iterator
from dataclasses import replace

from stepring.rule import Level, Obligation, Rule, WitnessStep
from stepring.shapes.types import Program
from stepring_rules import ring_code
from stepring_rules.ring_common import Turn, about, checked, declared, once, short, turns
from stepring_rules.ring_runs import Words as Runs
from stepring_rules.ring_runs import unexplained, witnessed

_RUNS = Runs(
    "RB04",
    ("overflow",),
    "After so many elements the ring no longer does what it did: its counters' comparisons come out otherwise.",
    "Take the difference of the counters in their own unsigned type, and compare only that.",
    "warning",
)


def counter_overflow(program: Program) -> Iterator[Obligation]:
    """One obligation for each counter that runs freely, and what runs across its overflow show besides."""
    yield from witnessed(program, from_code(program))
    # A note is said already: the overflow comes after very long running.
    known = (replace(item, level="warning") if item.kind == "fail" else item for item in ring_code.explained(program))
    yield from unexplained(program, known, _RUNS)


def from_code(program: Program) -> Iterator[Obligation]:
    """The same, decided from the code alone."""
    return once(item for turn in turns(program) for item in _check(turn))


def _check(turn: Turn) -> Iterator[Obligation]:
    step, index, ring, capacity = turn.step, turn.index, turn.ring, turn.capacity
    if step.wrap != "free-running" or index.low < 0 or not step.by or turn.cause is not None:
        return
    reduced = [
        access for access in checked(ring) if index.identity in access.cells and access.reduction in ("modulo", "mask")
    ]
    if not reduced or any(access.modulus != capacity for access in reduced):
        return
    name = short(index.name)
    size = index.high + 1
    if size % capacity == 0:
        yield about(
            "RB04",
            ring,
            "pass",
            step.where,
            f"{name} has {size} values, a multiple of the {capacity} slots of {ring.storage}: no slot is passed over.",
            function=step.function,
        )
        return
    if index.high >= 1 << 32:
        return  # no device runs long enough
    last, following = index.high % capacity, (index.high + 1) % capacity
    level: Level = "warning" if index.high < 1 << 16 else "note"
    yield about(
        "RB04",
        ring,
        "fail",
        step.where,
        f"{name} overflows from {index.high} to 0, and the slot of {ring.storage} from {last} to 0 where {following} "
        f"comes next: {size} is no multiple of the {capacity} slots.",
        level,
        why="Once in every round of the counter slots are passed over, and what is read back is out of order.",
        advice=f"Wrap {name} at {capacity} as it moves, or choose a number of slots that divides {size}.",
        function=step.function,
        related=(declared(ring),),
        witness=(
            WitnessStep(reduced[0].where, f"slot {last} is used", ((name, str(index.high)), ("slot", str(last)))),
            WitnessStep(step.where, f"{name} overflows", ((name, "0"),)),
            WitnessStep(reduced[0].where, f"slot 0 is used, not slot {following}", ((name, "0"), ("slot", "0"))),
        ),
    )


RULE = Rule(
    "RB04",
    "CounterOverflowBreaksSequence",
    "A free-running counter's overflow breaks the sequence of slots.",
    "warning",
    counter_overflow,
    (128, 190),
)
