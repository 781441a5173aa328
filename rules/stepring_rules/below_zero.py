"""RB02: an index that goes below zero, or wraps round to a huge value.

Stepping back from slot 0 gives 255 in an unsigned octet, a negative remainder with ``%`` on a signed number (N1570
6.5.5p6), or a negative subscript. CWE-786, CWE-127, CWE-191.
"""

from collections.abc import Iterator

from stepring.places import Origin
from stepring.rule import Level, Obligation, Related, Rule, WitnessStep
from stepring.shapes.types import Program
from stepring_rules import ring_code
from stepring_rules.ring_access import Words, judged
from stepring_rules.ring_common import Turn, about, checked, declared, short, turns
from stepring_rules.ring_runs import Words as Runs
from stepring_rules.ring_runs import unexplained, witnessed

_WORDS = Words(
    "RB02",
    True,
    "No subscript goes below 0:",
    "Below slot 0 lies memory that is not the ring's; an unsigned index lands far behind its end.",
    "Add the number of slots before stepping back, or go to the last slot when the index is 0.",
)


_RUNS = Runs(
    "RB02",
    ("below zero",),
    _WORDS.why,
    _WORDS.advice,
)


def below_zero(program: Program) -> Iterator[Obligation]:
    """One obligation for each access, one for each signed counter, and what runs of the operations show besides."""
    yield from witnessed(program, from_code(program))
    yield from unexplained(program, ring_code.explained(program), _RUNS)


def from_code(program: Program) -> Iterator[Obligation]:
    """One obligation for each access, and one for each signed counter that runs until it overflows."""
    said: set[Origin] = set()
    for item in judged(program, _WORDS):
        if item.kind == "fail":
            said.add(item.where)
        yield item
    counted: set[tuple[str, str]] = set()
    for turn in turns(program):
        mark = (turn.ring.identity, turn.index.identity)
        if mark not in counted:
            for item in _signed(turn, said):
                counted.add(mark)
                yield item


def _signed(turn: Turn, said: set[Origin]) -> Iterator[Obligation]:
    """A signed counter too wide to be run to its end: its overflow is certain all the same."""
    step, index, ring = turn.step, turn.index, turn.ring
    if step.wrap != "free-running" or index.low >= 0 or not step.by or step.by < 0 or turn.cause is not None:
        return
    level: Level = "warning" if index.high < 1 << 16 else "note"
    unsettled = [
        access
        for access in checked(ring)
        if index.identity in access.cells
        and access.reduction == "modulo"
        and access.where not in said
        and access.bad is None
        and not access.settled
    ]
    if not unsettled:
        return
    first, *others = sorted(unsettled, key=lambda access: (access.kind != "store", access.where))
    name = short(index.name)
    yield about(
        "RB02",
        ring,
        "fail",
        first.where,
        f"{name} is a signed {index.type_name} that only grows: after {index.high} it turns negative, and the "
        f"remainder of a negative number is negative, below slot 0 of {ring.storage}.",
        level,
        why="The overflow comes after long running, when nobody is looking.",
        advice=f"Make {name} unsigned, with a range that is a multiple of {turn.capacity}, or wrap it as it moves.",
        function=first.function,
        related=(declared(ring), *(Related(other.where, "the same remainder is taken here") for other in others)),
        witness=(
            WitnessStep(step.where, f"{name} is {index.high} and is moved on", ((name, str(index.low)),)),
            WitnessStep(first.where, "the remainder is below 0", ((name, str(index.low + 1)),)),
        ),
    )


RULE = Rule(
    "RB02",
    "IndexBelowZero",
    "An index goes below zero or wraps round to a huge value.",
    "error",
    below_zero,
    (786, 127, 191),
)
