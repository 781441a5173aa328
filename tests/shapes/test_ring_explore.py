"""Rings of a feed barge: the right ones are silent, one fault in each is shown by running its operations."""

from pathlib import Path

import pytest
from tests.shapes.ring_support import origin, read_files

from stepring.meaning.types import TypedUnit, TypeTable
from stepring.paths.replay import replay
from stepring.shapes.ring_explore import Exploration, explore
from stepring.shapes.ring_types import Disagreement
from stepring.shapes.ring_world import Group, group_of

HEADER = "#include <stdint.h>\n#include <stdbool.h>\n#include <stddef.h>\n#include <string.h>\n"

QUEUE = """
struct feed_queue { uint8_t *slots; unsigned size; unsigned head; unsigned tail; unsigned held; };

void feed_setup(struct feed_queue *q, uint8_t *slots, unsigned size)
{ q->slots = slots; q->size = size; q->head = q->tail = q->held = 0; }

bool feed_push(struct feed_queue *q, uint8_t dose)
{
    if (q->held >= q->size) return false;
    q->slots[q->head] = dose;
    q->head = q->head + 1; if (q->head >= q->size) q->head = 0;
    q->held++;
    return true;
}

int feed_pop(struct feed_queue *q)
{
    int dose;
    if (q->held == 0) return -1;
    dose = q->slots[q->tail];
    q->tail = q->tail + 1; if (q->tail >= q->size) q->tail = 0;
    q->held--;
    return dose;
}

unsigned feed_held(const struct feed_queue *q) { return q->held; }
bool feed_empty(const struct feed_queue *q) { return q->held == 0; }

unsigned feed_skip(struct feed_queue *q, unsigned n)
{
    if (n > q->held) n = q->held;
    q->tail += n; if (q->tail >= q->size) q->tail -= q->size;
    q->held -= n;
    return n;
}

void feed_push_many(struct feed_queue *q, const uint8_t *from, unsigned n)
{
    unsigned first;
    if (n > q->size - q->held) n = q->size - q->held;
    first = q->size - q->head; if (first > n) first = n;
    memcpy(q->slots + q->head, from, first);
    memcpy(q->slots, from + first, n - first);
    q->head = (q->head + n) % q->size;
    q->held += n;
}
"""

STATIC = """
static uint16_t hopper_grams[6];
static uint8_t hopper_in, hopper_out;

bool hopper_put(uint16_t grams)
{
    uint8_t next = (uint8_t)(hopper_in + 1);
    if (next >= 6) next = 0;
    if (next == hopper_out) return false;
    hopper_grams[hopper_in] = grams;
    hopper_in = next;
    return true;
}

bool hopper_get(uint16_t *grams)
{
    if (hopper_in == hopper_out) return false;
    *grams = hopper_grams[hopper_out];
    hopper_out = (uint8_t)((hopper_out + 1) % 6);
    return true;
}

uint8_t hopper_count(void)
{ return hopper_in >= hopper_out ? hopper_in - hopper_out : 6 - (hopper_out - hopper_in); }

void hopper_clear(void) { hopper_in = 0; hopper_out = 0; }
"""

FREE = """
static uint8_t order_slots[8];
static uint8_t order_in, order_out;

bool order_put(uint8_t order)
{
    if ((uint8_t)(order_in - order_out) >= 8) return false;
    order_slots[order_in % 8] = order;
    order_in++;
    return true;
}

int order_get(void)
{
    int order;
    if (order_in == order_out) return -1;
    order = order_slots[order_out % 8];
    order_out++;
    return order;
}
"""

WRONG = [
    ("out of range", QUEUE, "if (q->head >= q->size) q->head = 0;", "if (q->head > q->size) q->head = 0;", "feed_push"),
    (
        "out of range",
        QUEUE,
        "if (q->tail >= q->size) q->tail -= q->size;",
        "if (q->tail > q->size) q->tail -= q->size;",
        "feed_skip",
    ),
    ("room", QUEUE, "if (q->held >= q->size) return false;", "if (q->held > q->size) return false;", "feed_push"),
    ("occupancy", QUEUE, "{ return q->held == 0; }", "{ return q->head == q->tail; }", "feed_empty"),
    (
        "order",
        QUEUE,
        "q->tail += n; if (q->tail >= q->size) q->tail -= q->size;",
        "q->tail -= n; if (q->tail >= q->size) q->tail += q->size;",
        "feed_skip",
    ),
    ("occupancy", QUEUE, "    return n;\n", "    return asked;\n", "feed_skip"),
    ("past end", QUEUE, "if (first > n) first = n;", "first = n;", "feed_push_many"),
    (
        "room",
        STATIC,
        "if (next == hopper_out) return false;\n    hopper_grams[hopper_in] = grams;\n    hopper_in = next;",
        "hopper_grams[hopper_in] = grams;\n    hopper_in = next;\n    if (next == hopper_out) return false;",
        "hopper_put",
    ),
    (
        "data",
        STATIC,
        "if (hopper_in == hopper_out) return false;",
        "if (hopper_in != hopper_out) return false;",
        "hopper_get",
    ),
    ("occupancy", STATIC, "6 - (hopper_out - hopper_in)", "5 - (hopper_out - hopper_in)", "hopper_count"),
    (
        "slots",
        STATIC,
        "*grams = hopper_grams[hopper_out];\n    hopper_out = (uint8_t)((hopper_out + 1) % 6);",
        "*grams = hopper_grams[hopper_out];\n    hopper_out = (uint8_t)((hopper_out + 1) % 5);",
        "hopper_get",
    ),
    ("overflow", FREE.replace("8]", "6]").replace("% 8", "% 6").replace(">= 8", ">= 6"), "", "", "order_put"),
]


def _explored(tmp_path: Path, text: str) -> tuple[Exploration, Group]:
    path = tmp_path / "barge.c"
    path.write_text(HEADER + text, "utf-8")
    sources = read_files([path])
    group = group_of([TypedUnit(sources.functions, sources.objects, TypeTable(sources.model, sources.structs), ())])
    rings = sources.rings()
    assert len(rings) == 1
    return explore(rings[0], group, origin), group


def _one(found: Exploration, doubt: str, function: str) -> Disagreement:
    fitting = [item for item in found.disagreements if item.doubt == doubt and item.function == function]
    assert fitting, [(item.doubt, item.function, item.what) for item in found.disagreements]
    return fitting[0]


@pytest.mark.parametrize("text", [QUEUE, STATIC, FREE], ids=["queue", "static", "free-running"])
def test_a_right_ring_is_compared_and_silent(tmp_path: Path, text: str) -> None:
    found, _ = _explored(tmp_path, text)
    assert found.compared
    assert found.disagreements == ()


@pytest.mark.parametrize(("doubt", "text", "right", "wrong", "function"), WRONG)
def test_a_wrong_ring_is_found_and_its_witness_holds(
    tmp_path: Path, doubt: str, text: str, right: str, wrong: str, function: str
) -> None:
    if right:
        assert text.count(right) >= 1
        text = text.replace(right, wrong, 1)
    if "asked" in wrong:
        text = text.replace(
            "    if (n > q->held) n = q->held;", "    unsigned asked = n; if (n > q->held) n = q->held;"
        )
    found, group = _explored(tmp_path, text)
    item = _one(found, doubt, function)
    assert replay(group.program, item.witness, origin=origin).held
    assert len(item.steps) >= 1
    assert item.where.file.endswith("barge.c")


def test_the_same_run_twice_gives_the_same(tmp_path: Path) -> None:
    text = STATIC.replace("6 - (hopper_out - hopper_in)", "5 - (hopper_out - hopper_in)")
    assert _explored(tmp_path, text)[0] == _explored(tmp_path, text)[0]


def test_a_put_that_drops_the_oldest_by_design_is_silent(tmp_path: Path) -> None:
    text = STATIC.replace(
        "if (next == hopper_out) return false;",
        "if (next == hopper_out) hopper_out = (uint8_t)((hopper_out + 1) % 6);",
    )
    found, _ = _explored(tmp_path, text)
    assert found.compared and found.disagreements == ()


def test_a_put_that_never_looks_for_room_is_its_callers_business(tmp_path: Path) -> None:
    text = STATIC.replace("    if (next == hopper_out) return false;\n", "")
    found, _ = _explored(tmp_path, text)
    assert found.compared and found.disagreements == ()


def test_a_length_up_to_the_storages_end_is_no_wrong_count(tmp_path: Path) -> None:
    text = STATIC + (
        "\nuint8_t hopper_straight(void)\n"
        "{ return hopper_in >= hopper_out ? hopper_in - hopper_out : 6 - hopper_out; }\n"
    )
    found, _ = _explored(tmp_path, text)
    assert found.compared and found.disagreements == ()


def test_a_receiver_is_fed_from_its_register(tmp_path: Path) -> None:
    text = """
    static uint8_t shore_bytes[8];
    static volatile uint8_t shore_in, shore_out;
    void shore_received(void)
    {
        uint8_t byte = *(volatile uint8_t *)0xC6, next = (uint8_t)((shore_in + 1) & 7);
        shore_bytes[shore_in] = byte;
        shore_in = next;
        if (next == shore_out) return;
    }
    int shore_read(void)
    {
        uint8_t byte;
        if (shore_in == shore_out) return -1;
        byte = shore_bytes[shore_out];
        shore_out = (uint8_t)((shore_out + 1) & 7);
        return byte;
    }
    """
    found, group = _explored(tmp_path, text)
    item = _one(found, "room", "shore_received")
    assert [value.name for value in item.witness.calls[0].outside] == ["0xc6"]
    assert replay(group.program, item.witness, origin=origin).held


def test_a_helper_is_only_run_where_its_callers_would(tmp_path: Path) -> None:
    taken = "    *grams = hopper_grams[hopper_out];\n    hopper_out = (uint8_t)((hopper_out + 1) % 6);\n"
    helper = (
        "static uint16_t hopper_next(void)\n{\n    uint16_t grams = hopper_grams[hopper_out];\n"
        "    hopper_out = (uint8_t)((hopper_out + 1) % 6);\n    return grams;\n}\n"
    )
    assert taken in STATIC
    text = STATIC.replace(taken, "    *grams = hopper_next();\n")
    found, _ = _explored(tmp_path, text.replace("bool hopper_get", helper + "bool hopper_get"))
    assert found.compared and found.disagreements == ()


HISTORY = """
static int16_t weight_grams[10];
static uint8_t weight_at;
void weight_note(int16_t grams)
{
    weight_grams[weight_at] = grams;
    weight_at++;
    if (weight_at >= 10) weight_at = 0;
}
int weight_sum(void)
{ int sum = 0; for (unsigned i = 0; i < 10; i++) sum += weight_grams[i]; return sum; }
"""


@pytest.mark.parametrize(
    ("doubt", "right", "wrong"),
    [
        ("past end", "if (weight_at >= 10) weight_at = 0;", "if (weight_at > 10) weight_at = 0;"),
        ("slots", "if (weight_at >= 10) weight_at = 0;", "if (weight_at >= 10) weight_at = 1;"),
        ("slots", "if (weight_at >= 10) weight_at = 0;", "weight_at &= 9;"),
        (
            "overflow",
            "weight_grams[weight_at] = grams;\n    weight_at++;\n    if (weight_at >= 10) weight_at = 0;",
            "weight_grams[weight_at % 10] = grams;\n    weight_at++;",
        ),
    ],
)
def test_a_history_has_no_reader_to_compare_with(tmp_path: Path, doubt: str, right: str, wrong: str) -> None:
    assert _explored(tmp_path, HISTORY)[0].disagreements == ()
    found, group = _explored(tmp_path, HISTORY.replace(right, wrong))
    item = _one(found, doubt, "weight_note")
    assert not found.compared
    assert replay(group.program, item.witness, origin=origin).held
