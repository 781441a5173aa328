"""Words that the readable outputs share: verdicts, counts, the closing caution."""

from collections import Counter
from collections.abc import Iterable

from stepring.report.types import Outcome
from stepring.rule import LEVELS, Obligation

VERDICT_WORDS = {
    "fail": "shown to fail",
    "open": "left open",
    "review": "for a person to judge",
    "pass": "shown to hold",
}

CAUTION = (
    "Findings support a review and do not replace it. A verdict holds for the source, the data model and the "
    "assumptions stated. Functional-safety standards, local codes and licensed practice decide."
)


def verdict_words(one: Obligation) -> str:
    """The verdict in words, with its level where it has one."""
    return VERDICT_WORDS[one.kind] + (f" ({one.level})" if one.level else "")


def count(number: int, noun: str, plural: str = "") -> str:
    """A number with its noun: ``1 ring``, ``2 rings``."""
    return f"{number} {noun if number == 1 else plural or noun + 's'}"


def verdict_summary(obligations: Iterable[Obligation]) -> str:
    """How many verdicts of each kind there are, failures by level, in one phrase."""
    given = list(obligations)
    kinds: Counter[str] = Counter(one.kind for one in given)
    levels = Counter(one.level for one in given if one.level)
    parts = [f"{kinds[kind]} {words}" for kind, words in VERDICT_WORDS.items() if kinds[kind]]
    if levels and kinds["fail"]:
        parts[0] += f" ({', '.join(count(levels[level], level) for level in reversed(LEVELS) if levels[level])})"
    return ", ".join(parts) or "none"


def coverage_sentence(outcome: Outcome) -> str:
    """How much was read, and for which data models."""
    read = outcome.coverage
    models = f"; data model {', '.join(outcome.models)}" if outcome.models else ""
    return (
        f"{read.units_read} of {count(read.units_total, 'translation unit')}, "
        f"{read.functions_read} of {count(read.functions_total, 'function')}{models}."
    )
