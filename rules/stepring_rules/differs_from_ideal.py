"""RB11: a queue that differs from the ideal one.

The ideal is a first-in-first-out queue of fixed capacity. The shortest sequence of calls after which the ring and the
ideal disagree is the finding. CWE-682.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule
from stepring.shapes.types import Program
from stepring_rules import ring_code
from stepring_rules.ring_runs import Words, unexplained

_WORDS = Words(
    "RB11",
    ("order",),
    "What comes out is not what went in: commands are lost, repeated or obeyed in another order.",
    "Compare this function with the others of the ring: which index it moves, by how much, and when.",
)


def differs_from_ideal(program: Program) -> Iterator[Obligation]:
    """One failure for each function of each ring in which a run shows it."""
    return unexplained(program, ring_code.explained(program), _WORDS)


RULE = Rule(
    "RB11",
    "QueueDiffersFromIdeal",
    "A queue loses, repeats or reorders elements.",
    "error",
    differs_from_ideal,
    (682,),
)
