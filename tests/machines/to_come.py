"""What is not found yet: forms, places and slips, each with the reason; their tests are expected to fail until then."""

from collections.abc import Iterable, Mapping
from typing import Any

import pytest

FORMS_TO_COME: dict[str, str] = {
    "goto": "labels are no states yet",
}

STORAGES_TO_COME: dict[str, str] = {}

PAIRS_TO_COME = {
    ("event functions", "pointer"): "nothing in the unit passes an address, so that no two functions have one state",
}
"""Forms in places."""

GRAPHS_TO_COME: dict[str, str] = {}
"""Slips that spoil the graph."""

SLIPS_TO_COME = {
    "trap": "a row of a table of plain numbers that always stays is not taken for a state",
    **dict.fromkeys(
        [
            "transition overwritten",
            "guard never holds",
            "silent default",
            "not committed",
            "hole in a table",
            "handler missing",
            "= for ==",
            "other enumeration",
            "event dropped",
            "zero is no state",
            "no time limit",
            "entered again",
            "busy flag left set",
            "dispatches differ",
        ],
        "the rule is not there yet",
    ),
}
"""Slips that are not found yet in the forms and places that are."""


def params(names: Iterable[str], to_come: Mapping[str, str]) -> list[Any]:
    """Parameters for tests, those to come marked as failing with the reason."""
    marks = {name: pytest.mark.xfail(reason=why, strict=True) for name, why in to_come.items()}
    return [pytest.param(name, marks=marks.get(name, ())) for name in names]
