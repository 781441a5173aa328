"""Exploring rings, further: numbers' roles, clears and looks that go astray, slot numbers, runs for what code says."""

from pathlib import Path

import pytest
from tests.shapes.ring_support import origin
from tests.shapes.test_ring_explore import FREE, HEADER, STATIC, _explored, _one

from stepring.paths.replay import replay
from stepring.pipeline import Options, inspect

LANES = """
struct lane { uint16_t grams[4]; uint8_t in, out; };
static struct lane lanes[2];
bool lane_put(uint8_t lane, uint16_t grams)
{
    if (lane >= 2) return false;
    if ((uint8_t)(lanes[lane].in - lanes[lane].out) >= 4) return false;
    lanes[lane].grams[lanes[lane].in & 3] = grams;
    lanes[lane].in++;
    return true;
}
bool lane_take(uint8_t lane, uint16_t *grams)
{
    if (lane >= 2 || lanes[lane].in == lanes[lane].out) return false;
    *grams = lanes[lane].grams[lanes[lane].out & 3];
    lanes[lane].out++;
    return true;
}
"""

TOLD = """
bool hopper_put_many(const uint16_t *from, uint8_t n, uint8_t *done)
{
    uint8_t k;
    for (k = 0; k < n && hopper_put(from[k]); k++) { }
    *done = k;
    return k > 0;
}
"""

PEEK = """
bool hopper_peek(uint16_t *grams)
{
    if (hopper_in == hopper_out) return false;
    *grams = hopper_grams[hopper_out];
    return true;
}
"""

BYTES = """
static char shore_bytes[8];
static uint8_t shore_in, shore_out;
bool shore_put(char byte)
{
    uint8_t next = (uint8_t)((shore_in + 1) & 7);
    if (next == shore_out) return false;
    shore_bytes[shore_in] = byte;
    shore_in = next;
    return true;
}
int shore_get(void)
{
    int byte;
    if (shore_in == shore_out) return -1;
    byte = (unsigned char)shore_bytes[shore_out];
    shore_out = (uint8_t)((shore_out + 1) & 7);
    return byte;
}
"""

SLOTS = """
struct slots { uint8_t mask, in, out; };
void slots_init(struct slots *s, uint8_t size) { s->mask = size - 1; s->in = 0; s->out = 0; }
int slots_put(struct slots *s)
{
    if (((s->in - s->out) & s->mask) == s->mask) return 0;
    s->in = (s->in + 1) & s->mask;
    return 1;
}
int slots_get(struct slots *s)
{
    int slot = s->out;
    if (((s->in - s->out) & s->mask) == 0) return -1;
    s->out = (s->out + 1) & s->mask;
    return slot;
}
int slots_held(const struct slots *s) { return (s->in - s->out) & s->mask; }
bool slots_full(const struct slots *s) { return ((s->in - s->out) & s->mask) == s->mask; }
int slots_next(const struct slots *s) { return (s->in + 1) & s->mask; }
int slots_peek_get(const struct slots *s)
{
    if (s->in == s->out) return -1;
    return s->out;
}
"""

LOG = """
static int16_t log_grams[4];
static uint8_t log_at;
void log_note(int16_t grams)
{
    log_grams[log_at] = grams;
    log_at = (uint8_t)((log_at + 1) % 4);
}
int16_t log_back(uint8_t back)
{
    if (back >= 4) return 0;
    return log_grams[(log_at + 3 - back) % 4];
}
"""

FED = """
static uint16_t raw[4];
static volatile uint8_t raw_in, raw_out;
static uint16_t window[6];
static uint8_t window_at;
void adc_ready(void)
{
    uint8_t next = (uint8_t)((raw_in + 1) % 4);
    if (next == raw_out) return;
    raw[raw_in] = *(volatile uint16_t *)0x78;
    raw_in = next;
}
static bool raw_take(uint16_t *value)
{
    if (raw_in == raw_out) return false;
    *value = raw[raw_out];
    raw_out = (uint8_t)((raw_out + 1) % 4);
    return true;
}
void weigh(void)
{
    uint16_t value;
    if (!raw_take(&value)) return;
    window[window_at] = value;
    if (++window_at >= 6) window_at = 0;
}
"""


@pytest.mark.parametrize("text", [LANES, STATIC + TOLD, STATIC + PEEK, BYTES, SLOTS, LOG])
def test_what_is_right_is_silent(tmp_path: Path, text: str) -> None:
    assert _explored(tmp_path, text)[0].disagreements == ()


@pytest.mark.parametrize(
    ("text", "right", "wrong", "doubt", "function"),
    [
        (LANES, "grams[lanes[lane].in & 3]", "grams[lanes[lane].in & 7]", "out of range", "lane_put"),
        (STATIC, "{ hopper_in = 0; hopper_out = 0; }", "{ hopper_out = 0; }", "order", "hopper_clear"),
        (STATIC, "{ hopper_in = 0; hopper_out = 0; }", "{ hopper_in = 0; }", "order", "hopper_clear"),
        (STATIC, "if (next == hopper_out) return", "if (next != hopper_out) return", "room", "hopper_put"),
        (
            STATIC + PEEK,
            "*grams = hopper_grams[hopper_out];\n    return",
            "*grams = hopper_grams[(hopper_out + 1) % 6];\n    return",
            "order",
            "hopper_peek",
        ),
        (BYTES, "(unsigned char)shore_bytes", "shore_bytes", "order", "shore_get"),
        (SLOTS, "return s->out;\n", "return (s->out + 1) & s->mask;\n", "order", "slots_peek_get"),
        (LOG, "(log_at + 3 - back) % 4", "(log_at - 1 - back) % 4", "below zero", "log_back"),
        (FREE, "if (order_in == order_out)", "if (order_in <= order_out)", "overflow", "order_get"),
    ],
)  # fmt: skip
def test_what_is_wrong_is_found_and_replays(
    tmp_path: Path, text: str, right: str, wrong: str, doubt: str, function: str
) -> None:
    assert right in text
    found, group = _explored(tmp_path, text.replace(right, wrong))
    item = _one(found, doubt, function)
    assert replay(group.program, item.witness, origin=origin).held


def test_what_another_rings_function_feeds_is_run_with_it(tmp_path: Path) -> None:
    path = tmp_path / "barge.c"
    path.write_text(HEADER + FED.replace("if (++window_at >= 6)", "if (++window_at >= sizeof window)"), "utf-8")
    failed = [item for item in inspect([tmp_path], Options(use_compiler=False)).obligations if item.kind == "fail"]
    assert [(item.rule, item.level, item.function) for item in failed] == [("RB06", "error", "weigh")]
    assert failed[0].evidence is not None
    called = {call.function.rpartition(":")[2] for call in failed[0].evidence.calls}
    assert called == {"adc_ready", "weigh"}


LARGE = """
static uint8_t bytes[2000];
static uint16_t at;
void note(uint8_t byte)
{
    bytes[at] = byte;
    at++;
    if (at > 2000) at = 0;
}
"""


def test_an_error_that_no_run_shows_is_open(tmp_path: Path) -> None:
    (tmp_path / "barge.c").write_text(HEADER + LARGE, "utf-8")
    found = [item for item in inspect([tmp_path], Options(use_compiler=False)).obligations if item.rule == "RB01"]
    assert [(item.kind, item.open_as) for item in found] == [("open", "no witness replayed")]
    assert "2000 slots" in found[0].reason
