"""What every verdict on a ring takes for granted, in sentences that a report, a log and a rule's page share.

A proof is worth what it rests on. These are the things that no inspection of the code itself can settle; a verdict that
needs more says so itself (``Obligation.assumed``).
"""

from collections.abc import Iterable

from stepring.rule import Rule

_SHARED = (
    "No pointer writes outside the object that it was made to point into.",
    "Functions of the C library do what ISO C says of them.",
    "Nothing but the code that was read changes a variable: no other context does, unless an interrupt handler was "
    "found that does.",
)
_AS_READ = "What runs is what was read: the same sources, macros and options."
_ANY_MODEL = "Types have the sizes of the data model that the code was read with."


def assumptions(models: Iterable[str] = ()) -> tuple[str, ...]:
    """The assumptions of a run, one sentence each; ``models`` are the data models the units were read with."""
    named = ", ".join(models)
    sizes = f"Types have the sizes of the data model ({named})." if named else _ANY_MODEL
    return (*_SHARED, sizes, _AS_READ)


def rests_on_assumptions(rule: Rule) -> bool:
    """Whether a rule's verdicts rest on these: those on rings do."""
    return rule.package == "stepring_rules" and rule.id.startswith("RB")


def assumptions_section() -> str:
    """The assumptions as a section of a rule's page, in Markdown."""
    lines = "\n".join(f"- {sentence}" for sentence in assumptions())
    return f"## Assumptions\n\nA verdict of this rule holds under these:\n\n{lines}"
