"""What makes a finding the same finding in a later version of the code.

A fingerprint (SARIF 2.1.0 section 3.27.17) is made of what the person wrote where the finding stands: the rule, the
function, the variable or storage, the text of the line without its spacing, and a counter where all of these are the
same. No line number, no file name and no verdict goes in: code that moves keeps its findings.
"""

import hashlib
from collections import defaultdict
from collections.abc import Iterable

from stepring.places import Origin
from stepring.report.sources import Sources
from stepring.report.text import function_name
from stepring.rule import Obligation

KEY = "stepring/v1"


def in_order(obligations: Iterable[Obligation], sources: Sources) -> list[Obligation]:
    """The obligations, each once, by URI, line, column, rule and then by all that tells them apart."""

    def key(one: Obligation) -> tuple[object, ...]:
        place = sources.of(one.where.file)
        where = (place.base != "SRCROOT", place.uri, one.where.line, one.where.column, one.rule, one.where.end_column)
        return (*where, one.function or "", one.subject or "", one.kind, one.what, repr(one))

    return sorted(dict.fromkeys(obligations), key=key)


def fingerprints(ordered: Iterable[Obligation], sources: Sources) -> dict[Obligation, str]:
    """A fingerprint for each obligation, unique among them; ``ordered`` decides the counters."""
    seen: dict[tuple[str, str, str, str], int] = defaultdict(int)
    made: dict[Obligation, str] = {}
    for one in ordered:
        parts = (one.rule, function_name(one.function or ""), one.subject or "", _line_text(one.where, sources))
        seen[parts] += 1
        text = "\0".join((*parts, str(seen[parts])))
        made[one] = hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()[:32]
    return made


def _line_text(where: Origin, sources: Sources) -> str:
    """The line's characters without any spacing; the spelling where the line cannot be read."""
    line = sources.of(where.file).line(where.line)
    return "".join((where.spelling if line is None else line).split())
