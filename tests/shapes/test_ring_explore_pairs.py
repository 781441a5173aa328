"""Rings explored two at a time, and rings whose functions mask interrupts and assert what they ask of their callers."""

from pathlib import Path

import pytest
from tests.shapes.ring_support import origin
from tests.shapes.test_ring_explore import _explored, _one

from stepring.paths.replay import replay

CHUTE = """
struct chute { STORAGE; uint8_t size; uint8_t in; uint8_t out; uint8_t open; };
SETUP
bool chute_put(struct chute *c, uint8_t dose)
{
    uint8_t next = (uint8_t)((c->in + 1) % c->size);
    if (next == c->out || c->open != 1) return false;
    c->slots[c->in] = dose;
    c->in = next;
    return true;
}
bool chute_take(struct chute *c, uint8_t *dose)
{
    if (c->in == c->out || c->open != 1) return false;
    *dose = c->slots[c->out];
    c->out = (uint8_t)((c->out + 1) % c->size);
    return true;
}
"""
POINTED = CHUTE.replace("STORAGE", "uint8_t *slots").replace(
    "SETUP",
    """void chute_setup(struct chute *c, uint8_t *slots, uint8_t size)
{ c->slots = slots; c->size = size; c->in = c->out = 0; c->open = 1; }""",
)
EMBEDDED = (
    CHUTE.replace("STORAGE", "uint8_t slots[5]")
    .replace("SETUP", "")
    .replace(" uint8_t size;", "")
    .replace("c->size", "5")
    .replace(" uint8_t open;", "")
    .replace(" || c->open != 1", "")
)
POUR = """
unsigned chute_pour(struct chute *to, struct chute *from)
{
    unsigned n = 0;
    uint8_t dose;
    while ((to->in + 1) % SIZE != to->out && chute_take(from, &dose)) { chute_put(to, dose); n++; }
    return n;
}
"""
MIRROR = """
unsigned chute_mirror(const struct chute *from, struct chute *to)
{
    unsigned n = 0;
    uint8_t at = from->out;
    while (at != from->in && chute_put(to, from->slots[at])) { at = (uint8_t)((at + 1) % SIZE); n++; }
    return n;
}
"""
BY_HAND = """
unsigned chute_shift(struct chute *to, struct chute *from)
{
    uint8_t in = to->in, out = from->out, n = 0;
    while ((in + 1) % SIZE != to->out && out != from->in) {
        to->slots[in] = from->slots[out];
        in = (uint8_t)((in + 1) % SIZE);
        out = (uint8_t)((out + 1) % SIZE);
        n++;
    }
    to->in = in;
    from->out = out;
    return n;
}
"""


def _sized(ring: str, more: str, size: str) -> str:
    return ring + more.replace("SIZE", size)


@pytest.mark.parametrize("more", [POUR, MIRROR, BY_HAND], ids=["pour", "mirror", "shift"])
@pytest.mark.parametrize(("ring", "size"), [(POINTED, "to->size"), (EMBEDDED, "5")], ids=["pointed", "embedded"])
def test_what_moves_or_copies_rightly_is_silent(tmp_path: Path, ring: str, size: str, more: str) -> None:
    size = size.replace("to", "from") if "mirror" in more and size != "5" else size
    found, _ = _explored(tmp_path, _sized(ring, more, size))
    assert found.compared
    assert found.disagreements == ()


SIDES = pytest.mark.parametrize(("ring", "size"), [(POINTED, "to->size"), (EMBEDDED, "5")], ids=["pointed", "embedded"])


@SIDES
def test_a_source_that_keeps_what_was_moved_is_found(tmp_path: Path, ring: str, size: str) -> None:
    right = "from->out = out;"
    assert BY_HAND.count(right) == 1
    wrong = BY_HAND.replace(right, "from->out = n > 1 ? (uint8_t)((out + SIZE - 1) % SIZE) : out;")
    found, group = _explored(tmp_path, _sized(ring, wrong, size))
    item = _one(found, "order", "chute_shift")
    assert replay(group.program, item.witness, origin=origin).held


@SIDES
def test_what_never_does_what_a_move_does_is_not_judged(tmp_path: Path, ring: str, size: str) -> None:
    odd = BY_HAND.replace("from->slots[out]", "(uint8_t)(from->slots[out] ^ 0x5a)")
    found, _ = _explored(tmp_path, _sized(ring, odd, size))
    assert found.compared
    assert found.disagreements == ()


def test_an_index_that_a_copy_leaves_at_the_size_is_found(tmp_path: Path) -> None:
    copy = """
unsigned chute_copy(struct chute *to, struct chute *from)
{
    unsigned have = (from->in + from->size - from->out) % from->size;
    unsigned room = (to->out + to->size - to->in - 1) % to->size;
    unsigned n = have < room ? have : room, k;
    uint8_t in = to->in, out = from->out;
    for (k = 0; k < n; k++) {
        if (in >= to->size) in = 0;
        if (out >= from->size) out = 0;
        to->slots[in++] = from->slots[out++];
    }
    LAST
    to->in = in;
    from->out = out;
    return n;
}
"""
    right = "if (in >= to->size) in = 0; if (out >= from->size) out = 0;"
    found, _ = _explored(tmp_path, POINTED + copy.replace("LAST", right))
    assert found.disagreements == ()
    found, group = _explored(tmp_path, POINTED + copy.replace("LAST", ""))
    item = _one(found, "out of range", "chute_copy")
    assert replay(group.program, item.witness, origin=origin).held


MASKED = """
static uint32_t masked(void) { uint32_t mask; __stepring_asm(mask); return mask; }
static void unmask(uint32_t mask) { __stepring_asm(); (void)mask; }
void pan_assert(int ok, unsigned line);
struct pan { uint8_t *slots; uint32_t size, head, tail; };
void pan_setup(struct pan *p, uint8_t *slots, uint32_t size)
{ uint32_t was = masked(); p->slots = slots; p->size = size; p->head = p->tail = 0; unmask(was); }
void pan_put(struct pan *p, uint8_t grams)
{
    uint32_t was = masked();
    p->slots[p->tail] = grams;
    p->tail = (p->tail + 1) % p->size;
    pan_assert(p->head != p->tail, 10);
    unmask(was);
}
uint8_t pan_take(struct pan *p)
{
    uint32_t was = masked();
    uint8_t grams;
    pan_assert(p->head != p->tail, 20);
    grams = p->slots[p->head];
    p->head = (p->head + 1) % p->size;
    unmask(was);
    return grams;
}
void pan_drop(struct pan *p, uint32_t n)
{
    uint32_t was = masked();
    ASSERT
    p->head = (p->head + n) % p->size;
    unmask(was);
}
"""


@pytest.mark.parametrize(
    "check",
    [
        "pan_assert(HELD >= n, 30);",
        "if (HELD < n) pan_assert_fails(30);",
    ],
    ids=["condition", "branch"],
)
def test_what_a_drop_asserts_is_its_callers_contract(tmp_path: Path, check: str) -> None:
    text = "void pan_assert_fails(unsigned line);" + MASKED
    check = check.replace("HELD", "(p->tail + p->size - p->head) % p->size")
    found, _ = _explored(tmp_path, text.replace("ASSERT", check))
    assert found.compared
    assert found.disagreements == ()
    wrong = check.replace(">= n", "<= n").replace("< n", "> n") if "if" in check else check.replace(">= n", "<= n")
    found, group = _explored(tmp_path, text.replace("ASSERT", wrong))
    item = _one(found, "data", "pan_drop")
    assert replay(group.program, item.witness, origin=origin).held
