"""RB08: storing with no room check, or full that looks like empty.

Found by running the operations of a queue: an element is stored although the ring holds as many as it can, so that
elements that nobody has read are overwritten, or the full ring looks like an empty one. CWE-120, CWE-787 do not fit:
nothing is overrun; CWE-754 (a condition that is not checked) does.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule
from stepring.shapes.types import Program
from stepring_rules import ring_code
from stepring_rules.ring_runs import Words, unexplained

_WORDS = Words(
    "RB08",
    ("room",),
    "Elements that were stored and not yet read are lost, or all of them at once when full looks like empty.",
    "Refuse the element, or drop one on purpose, while the index that comes next is the reader's.",
)


def no_room_check(program: Program) -> Iterator[Obligation]:
    """One failure for each function of each ring in which a run shows it."""
    return unexplained(program, ring_code.explained(program), _WORDS)


RULE = Rule(
    "RB08",
    "StoreWithoutRoomCheck",
    "An element is stored into a queue that has no room for it.",
    "error",
    no_room_check,
    (754,),
)
