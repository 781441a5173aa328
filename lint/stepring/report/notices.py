"""Notices on standard error: one sentence each, and not a flood of them."""

from collections import Counter
from collections.abc import Iterable
from pathlib import Path

from stepring.places import Notice
from stepring.report.text import one_sentence, printable, shown_path

_GRAVE_FIRST = ("error", "warning", "note")

MOST_OF_A_KIND = 20
"""How many notices of one kind are said in full; of the rest only the number is."""


def notice_sentences(notices: Iterable[Notice], base: Path | None = None) -> list[str]:
    """The sentences, each once, grave ones first; of a kind that comes very often only the first are given."""
    ordered = sorted(dict.fromkeys(notices), key=lambda one: _GRAVE_FIRST.index(one.level))
    seen: Counter[tuple[str, str]] = Counter()
    sentences: list[str] = []
    for one in ordered:
        seen[one.level, one.kind] += 1
        if seen[one.level, one.kind] <= MOST_OF_A_KIND:
            sentences.append(_sentence(one, base))
    for (level, kind), number in seen.items():
        if number > MOST_OF_A_KIND:
            sentences.append(f"{level}: {number - MOST_OF_A_KIND} more of the kind {kind}; the SARIF log holds all.")
    return sentences


def _sentence(one: Notice, base: Path | None) -> str:
    """The sentence with its place, which is said once: many notices name their file themselves."""
    if not one.file:
        return f"{one.level}: {printable(one_sentence(one.text))}"
    shown = shown_path(one.file, base)
    line = f", line {one.line}" if one.line else ""
    text = one.text.removeprefix(f"{one.file}{line}: ").replace(one.file, shown)
    place = "" if text.startswith(shown) else f"{shown}{line}: "
    return f"{one.level}: {place}{printable(one_sentence(text))}"
