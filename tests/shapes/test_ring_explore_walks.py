"""Walks through the stored elements that change nothing: they go through all of them in every state."""

from pathlib import Path

import pytest
from tests.shapes.ring_support import origin
from tests.shapes.test_ring_explore import _explored, _one

from stepring.paths.replay import replay

TRACE = """
void trace_dose(unsigned slot, uint8_t grams);
static uint8_t trace_grams[4];
static unsigned trace_in, trace_out;
bool trace_put(uint8_t grams)
{
    if (trace_in - trace_out >= 4) return false;
    trace_grams[trace_in & 3] = grams;
    trace_in++;
    return true;
}
bool trace_take(uint8_t *grams)
{
    if (trace_in == trace_out) return false;
    *grams = trace_grams[trace_out & 3];
    trace_out++;
    return true;
}
void trace_show(void)
{
    unsigned at;
    for (at = FROM; at != TO; at = NEXT) trace_dose(at, trace_grams[at & 3]);
}
"""


def _text(start: str, end: str, step: str) -> str:
    return TRACE.replace("FROM", start).replace("TO", end).replace("NEXT", step)


RIGHT = [
    ("trace_out", "trace_in", "at + 1"),
    ("0", "4", "at + 1"),  # all slots, whatever is stored: nothing says that it is a walk through the queue
    ("0", "(trace_in & 3)", "at + 1"),
]


@pytest.mark.parametrize("parts", RIGHT, ids=["stored", "all", "from zero"])
def test_what_goes_through_the_stored_ones_or_is_no_such_walk_is_silent(
    tmp_path: Path, parts: tuple[str, str, str]
) -> None:
    found, _ = _explored(tmp_path, _text(*parts))
    assert found.compared
    assert found.disagreements == ()


@pytest.mark.parametrize("first", ["", "if (trace_in == trace_out) return; "], ids=["plain", "looked"])
def test_a_full_ring_that_a_walk_takes_for_empty_is_found(tmp_path: Path, first: str) -> None:
    text = _text("(trace_out & 3)", "(trace_in & 3)", "((at + 1) & 3)").replace("    for (at", f"    {first}for (at")
    found, group = _explored(tmp_path, text)
    item = _one(found, "order", "trace_show")
    assert "nothing" in item.what
    assert replay(group.program, item.witness, origin=origin).held


COUNTED = TRACE.replace(
    "for (at = FROM; at != TO; at = NEXT) trace_dose(at, trace_grams[at & 3]);",
    """for (at = 0; at < trace_in - trace_out; at++) {
        unsigned slot = (trace_out & 3) + at;
        if (slot >= 4) slot -= 4;
        trace_dose(at, trace_grams[slot]);
    }""",
)


def test_a_walk_that_wraps_wrongly_is_found(tmp_path: Path) -> None:
    found, _ = _explored(tmp_path, COUNTED)
    assert found.compared
    assert found.disagreements == ()
    found, group = _explored(tmp_path, COUNTED.replace("slot -= 4", "slot -= 3"))
    item = _one(found, "order", "trace_show")
    assert "goes through" in item.what
    assert replay(group.program, item.witness, origin=origin).held
