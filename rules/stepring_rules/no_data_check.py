"""RB09: loading with no data check.

Found by running the operations of a queue: something is delivered although nothing is stored, and the reader passes
the writer. CWE-754.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule
from stepring.shapes.types import Program
from stepring_rules import ring_code
from stepring_rules.ring_runs import Words, unexplained

_WORDS = Words(
    "RB09",
    ("data",),
    "An old element comes out a second time; the reader passes the writer, and the queue then looks nearly full.",
    "Return without an element while both indices are equal or the count is 0.",
)


def no_data_check(program: Program) -> Iterator[Obligation]:
    """One failure for each function of each ring in which a run shows it."""
    return unexplained(program, ring_code.explained(program), _WORDS)


RULE = Rule(
    "RB09",
    "LoadWithoutDataCheck",
    "An element is taken from a queue that holds none.",
    "error",
    no_data_check,
    (754,),
)
