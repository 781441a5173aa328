"""Words that the readable outputs share: verdicts, counts, the closing caution."""

from collections import Counter
from collections.abc import Iterable

from stepring.report.types import Outcome
from stepring.rule import LEVELS, Level, Obligation

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


def level_of(one: Obligation) -> Level | None:
    """The level of a failure, ``warning`` where its rule gave none; None for every other verdict."""
    return (one.level or "warning") if one.kind == "fail" else None


def verdict_words(one: Obligation) -> str:
    """The verdict in words, with its level where it has one."""
    level = level_of(one)
    return VERDICT_WORDS[one.kind] + (f" ({level})" if level else "")


def count(number: int, noun: str, plural: str = "") -> str:
    """A number with its noun: ``1 ring``, ``2 rings``."""
    return f"{number} {noun if number == 1 else plural or noun + 's'}"


def verdict_summary(obligations: Iterable[Obligation]) -> str:
    """How many verdicts of each kind there are, failures by level, in one phrase."""
    given = list(obligations)
    kinds: Counter[str] = Counter(one.kind for one in given)
    levels = Counter(level_of(one) for one in given)
    parts = [f"{kinds[kind]} {words}" for kind, words in VERDICT_WORDS.items() if kinds[kind]]
    if kinds["fail"]:
        parts[0] += f" ({', '.join(count(levels[level], level) for level in reversed(LEVELS) if levels[level])})"
    return ", ".join(parts) or "none"


OTHER = "other"


def open_reasons(obligations: Iterable[Obligation]) -> tuple[tuple[str, int], ...]:
    """How many obligations are open for each reason, the most frequent first and those without a word for it last."""
    reasons: Counter[str] = Counter(one.open_as or OTHER for one in obligations if one.kind == "open")
    return tuple(sorted(reasons.items(), key=lambda item: (item[0] == OTHER, -item[1], item[0])))


def ledger(obligations: Iterable[Obligation]) -> tuple[tuple[str, int, str], ...]:
    """The account of a run's obligations as (what, number, remark): all, then each verdict, the open ones by reason.

    The reasons begin with two blanks and follow the number of those left open; their numbers add up to it, as the
    verdicts' do to that of all.
    """
    given = list(obligations)
    kinds: Counter[str] = Counter(one.kind for one in given)
    levels = Counter(level_of(one) for one in given)
    failed = ", ".join(count(levels[level], level) for level in reversed(LEVELS) if levels[level])
    lines = [("obligations", len(given), "")]
    for kind in ("pass", "fail", "open", "review"):
        lines.append((VERDICT_WORDS[kind], kinds[kind], failed if kind == "fail" else ""))
        if kind == "open":
            lines.extend((f"  {reason}", number, "") for reason, number in open_reasons(given))
    return tuple(lines)


def assumed_by(one: Obligation) -> tuple[str, ...]:
    """What a verdict rests on beyond what all share: its own clauses and its witness's."""
    return tuple(dict.fromkeys((*one.assumed, *(() if one.evidence is None else one.evidence.assumed))))


def coverage_sentence(outcome: Outcome) -> str:
    """How much was read, and for which data models."""
    read = outcome.coverage
    models = f"; data model {', '.join(outcome.models)}" if outcome.models else ""
    return (
        f"{read.units_read} of {count(read.units_total, 'translation unit')}, "
        f"{read.functions_read} of {count(read.functions_total, 'function')}{models}."
    )
