"""RB01: an index that reaches past the end of its storage.

Decided by running the ring's functions from every index value that can be reached, so a finding comes with the steps
that lead to the access. CWE-787 (stores) and CWE-125 (loads).
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule
from stepring.shapes.types import Program
from stepring_rules import ring_code
from stepring_rules.ring_access import Words, judged
from stepring_rules.ring_runs import Words as Runs
from stepring_rules.ring_runs import unexplained, witnessed

_WORDS = Words(
    "RB01",
    False,
    "No subscript goes past the end:",
    "The access reads or overwrites whatever lies behind the array.",
    "Bring the index back to 0 when it equals the number of slots, before it is used again.",
)


_RUNS = Runs(
    "RB01",
    ("past end", "out of range"),
    "What lies behind the storage is read or overwritten, now or at the next access.",
    "Bring the index back to 0 when it equals the number of slots, before it is stored or used again.",
)


def from_code(program: Program) -> Iterator[Obligation]:
    """One obligation for each access to the storage of a ring."""
    return judged(program, _WORDS)


def past_the_end(program: Program) -> Iterator[Obligation]:
    """One obligation for each access to the storage of a ring, and what runs of its operations show besides."""
    yield from witnessed(program, from_code(program))
    yield from unexplained(program, ring_code.explained(program), _RUNS)


RULE = Rule(
    "RB01",
    "IndexPastTheEnd",
    "An index reaches past the end of the ring's storage.",
    "error",
    past_the_end,
    (787, 125, 193),
)
