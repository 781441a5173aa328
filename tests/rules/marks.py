"""Marks in C files: ``/* finding: RB01 */`` stands on the line that a finding should name."""

import re
from collections.abc import Iterable
from pathlib import Path

from stepring.rule import Obligation, Rule
from stepring_rules import (
    below_zero,
    counter_overflow,
    mask_capacity,
    narrow_index,
    past_the_end,
    skips_slots,
    wrap_limit,
)

RING_RULES: tuple[Rule, ...] = (
    past_the_end.RULE,
    below_zero.RULE,
    skips_slots.RULE,
    counter_overflow.RULE,
    mask_capacity.RULE,
    wrap_limit.RULE,
    narrow_index.RULE,
)
_MARK = re.compile(r"/\* finding: ([A-Z0-9 ]+) \*/")


def marks(paths: Iterable[Path]) -> set[tuple[str, str, int]]:
    """(rule, file name, line) of every mark for a ring rule."""
    return {
        (rule, path.name, number)
        for path in paths
        for number, line in enumerate(path.read_text().splitlines(), 1)
        for found in _MARK.finditer(line)
        for rule in found[1].split()
        if rule.startswith("RB")
    }


def found(obligations: Iterable[Obligation]) -> list[tuple[str, str, int]]:
    """(rule, file name, line) of every failed obligation of level error or warning, in order."""
    return sorted(
        (item.rule, Path(item.where.file).name, item.where.line)
        for item in obligations
        if item.kind == "fail" and item.level in ("error", "warning")
    )
