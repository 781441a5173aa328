"""RB02: an index that goes below zero, or wraps round to a huge value.

Stepping back from slot 0 gives 255 in an unsigned octet, a negative remainder with ``%`` on a signed number (N1570
6.5.5p6), or a negative subscript. CWE-786, CWE-127, CWE-191.
"""

from collections.abc import Iterator

from stepring.places import Origin
from stepring.rule import Level, Obligation, Rule, WitnessStep
from stepring.shapes.types import Program
from stepring_rules.ring_access import Words, judged
from stepring_rules.ring_common import Turn, about, checked, declared, once, short, turns

_WORDS = Words(
    "RB02",
    True,
    "No subscript goes below 0:",
    "Below slot 0 lies memory that is not the ring's; an unsigned index lands far behind its end.",
    "Add the number of slots before stepping back, or go to the last slot when the index is 0.",
)


def below_zero(program: Program) -> Iterator[Obligation]:
    """One obligation for each access, and one for each signed counter that runs until it overflows."""
    said: set[Origin] = set()
    for item in judged(program, _WORDS):
        if item.kind == "fail":
            said.add(item.where)
        yield item
    yield from once(item for turn in turns(program) for item in _signed(turn, said))


def _signed(turn: Turn, said: set[Origin]) -> Iterator[Obligation]:
    """A signed counter too wide to be run to its end: its overflow is certain all the same."""
    step, index, ring = turn.step, turn.index, turn.ring
    if step.wrap != "free-running" or index.low >= 0 or not step.by or step.by < 0 or turn.cause is not None:
        return
    level: Level = "warning" if index.high < 1 << 16 else "note"
    for access in checked(ring):
        if index.identity not in access.cells or access.reduction != "modulo" or access.where in said:
            continue
        if access.bad is not None or access.settled:
            continue
        name = short(index.name)
        yield about(
            "RB02",
            ring,
            "fail",
            access.where,
            f"{name} is a signed {index.type_name} that only grows: after {index.high} it turns negative, and the "
            f"remainder of a negative number is negative, below slot 0 of {ring.storage}.",
            level,
            why="The overflow comes after long running, when nobody is looking.",
            advice=f"Make {name} unsigned, with a range that is a multiple of {turn.capacity}, or wrap it as it moves.",
            function=access.function,
            related=(declared(ring),),
            witness=(
                WitnessStep(step.where, f"{name} is {index.high} and is moved on", ((name, str(index.low)),)),
                WitnessStep(access.where, "the remainder is below 0", ((name, str(index.low + 1)),)),
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
