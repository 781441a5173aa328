"""RB10: an occupancy computed wrongly (promotion, sign, missing wrap).

Found by running the operations of a ring and asking it after each call how much it holds. Usual causes: a difference
of narrow unsigned numbers that is promoted to ``int`` (N1570 6.3.1.1p2), one that is never negative because it is
unsigned, a wrap that is not added. CWE-682, CWE-191.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule
from stepring.shapes.types import Program
from stepring_rules import ring_code
from stepring_rules.ring_runs import Words, unexplained

_WORDS = Words(
    "RB10",
    ("occupancy",),
    "Callers act on the number: they read elements that are not there, or refuse to store although there is room.",
    "Add the capacity where the difference of the indices is negative, in a type that can hold it.",
)


def wrong_occupancy(program: Program) -> Iterator[Obligation]:
    """One failure for each function of each ring in which a run shows it."""
    return unexplained(program, ring_code.explained(program), _WORDS)


RULE = Rule(
    "RB10",
    "OccupancyWrong",
    "The number of stored or free elements is computed wrongly.",
    "error",
    wrong_occupancy,
    (682, 191),
)
