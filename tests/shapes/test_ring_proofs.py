"""Rings of the usual forms are proved, and none with a slip in it."""

import pytest
from tests.support import lower_text

from stepring.places import Origin, Position
from stepring.shapes.ring_proofs import prove_rings
from stepring.shapes.ring_types import Proof
from stepring.shapes.rings import find_rings, ring_functions

TYPES = """
typedef unsigned char uint8_t; typedef unsigned short uint16_t; typedef unsigned int uint32_t;
typedef unsigned long size_t; void *memcpy(void *, const void *, size_t);
"""
LOG = """
static uint16_t weights[12]; static uint8_t at;
void weigh(uint16_t grams) { weights[at] = grams; at++; if (at >= 12) at = 0; }
"""
COUNTED = """
struct queue { uint16_t slots[8]; uint8_t head, tail, count; } commands;
int put(struct queue *q, uint16_t v) {
    if (q->count == 8) return 0;
    q->slots[q->head] = v; if (++q->head == 8) q->head = 0; q->count++; return 1; }
int get(struct queue *q, uint16_t *v) {
    if (!q->count) return 0;
    *v = q->slots[q->tail]; q->tail = (q->tail + 1) % 8; q->count--; return 1; }
"""
RUN_TIME = """
struct ring { uint8_t *bytes; uint16_t size, head, tail; };
static uint16_t after(const struct ring *r, uint16_t i) { return (i + 1) % r->size; }
void start(struct ring *r, uint8_t *bytes, uint16_t size) { r->bytes = bytes; r->size = size; r->head = r->tail = 0; }
int put(struct ring *r, uint8_t b) {
    uint16_t next = after(r, r->head); if (next == r->tail) return 0;
    r->bytes[r->head] = b; r->head = next; return 1; }
int get(struct ring *r, uint8_t *b) {
    if (r->head == r->tail) return 0; *b = r->bytes[r->tail]; r->tail = after(r, r->tail); return 1; }
int move(struct ring *to, struct ring *from) { uint8_t b; return get(from, &b) && put(to, b); }
"""
MASKED = """
struct ring { uint16_t *slots; uint32_t mask, head, tail; };
void start(struct ring *r, uint16_t *slots, uint32_t n) { r->slots = slots; r->mask = n - 1; r->head = r->tail = 0; }
int put(struct ring *r, uint16_t v) {
    if (((r->head + 1) & r->mask) == r->tail) return 0;
    r->slots[r->head] = v; r->head = (r->head + 1) & r->mask; return 1; }
int get(struct ring *r, uint16_t *v) {
    if (r->head == r->tail) return 0; *v = r->slots[r->tail]; r->tail = (r->tail + 1) & r->mask; return 1; }
"""
LOOPED = """
static uint8_t text[64]; static uint8_t in, out;
void say(const char *words) {
    while (*words) {
        uint8_t next = in + 1; if (next == 64) next = 0;
        if (next == out) break;
        text[in] = *words++; in = next;
    }
}
int heard(void) { if (in == out) return -1; uint8_t c = text[out]; out = (out + 1) & 63; return c; }
"""
BULK = """
struct ring { uint8_t *bytes; size_t size, head, tail; };
void start(struct ring *r, uint8_t *bytes, size_t size) { r->bytes = bytes; r->size = size; r->head = r->tail = 0; }
size_t room(const struct ring *r) {
    if (r->head >= r->tail) return r->size - (r->head - r->tail) - 1;
    return r->tail - r->head - 1; }
size_t put_all(struct ring *r, const uint8_t *from, size_t n) {
    size_t free = room(r); if (n > free) n = free;
    size_t first = r->size - r->head; if (first > n) first = n;
    memcpy(&r->bytes[r->head], from, first);
    r->head += first; n -= first;
    if (n > 0) { memcpy(r->bytes, from + first, n); r->head = n; }
    if (r->head >= r->size) r->head = 0;
    return first + n; }
int get(struct ring *r, uint8_t *b) {
    if (r->head == r->tail) return 0; *b = r->bytes[r->tail]; if (++r->tail == r->size) r->tail = 0; return 1; }
"""
CALLS_OUT = """
static uint16_t weights[12]; static uint8_t at; void tell(void);
void weigh(uint16_t grams) { weights[at] = grams; tell(); at++; if (at >= 12) at = 0; }
"""
CALLS_BACK = """
struct ring { uint8_t *bytes; size_t size, head, tail; void (*told)(struct ring *, int); };
void start(struct ring *r, uint8_t *bytes, size_t size) {
    if (!r || !bytes || size == 0) return;
    r->told = 0; r->size = size; r->bytes = bytes; r->head = r->tail = 0; }
void stop(struct ring *r) { r->bytes = (void *)0; }
static size_t held(const struct ring *r) {
    size_t head, tail;
    { size_t *in = &r->head; head = *in; } { size_t *out = &r->tail; tail = *out; }
    return head >= tail ? head - tail : r->size - (tail - head); }
int put(struct ring *r, uint8_t b) {
    size_t next = r->head + 1; if (next >= r->size) next = 0;
    if (next == r->tail) return 0;
    r->bytes[r->head] = b; r->head = next; if (r->told) r->told(r, 1); return 1; }
size_t skip(struct ring *r, size_t n) {
    size_t most = held(r); if (n > most) n = most;
    size_t at = r->tail + n; if (at >= r->size) at -= r->size;
    { size_t *out = &r->tail; *out = at; } if (r->told) r->told(r, 0); return n; }
uint8_t *oldest(struct ring *r) { return &r->bytes[r->tail]; }
"""
STOPS_SHORT = """
static uint8_t line[74]; static uint8_t in, out;
int put(uint8_t b) { uint8_t next = in + 1; if (next == 64) next = 0; if (next == out) return 0;
    line[in] = b; in = next; return 1; }
int get(void) { if (in == out) return -1; uint8_t c = line[out]; out++; if (out == 64) out = 0; return c; }
"""
FORMS = {
    "log": LOG, "counted": COUNTED, "run time": RUN_TIME, "masked": MASKED, "looped": LOOPED, "bulk": BULK,
    "calls out": CALLS_OUT, "calls back": CALLS_BACK, "stops short": STOPS_SHORT,
}  # fmt: skip


def proofs(text: str) -> list[Proof]:
    """The proofs about all rings of a text."""
    unit = lower_text(TYPES + text)
    assert not unit.notices

    def origin(position: Position) -> Origin:
        return Origin(position.file, position.line, max(1, position.column), max(1, position.column) + 1)

    kept = ring_functions(unit.functions)
    called = [function for function in unit.functions if function not in kept]
    model, structs = unit.types.model, unit.types.structs
    rings = find_rings(kept, unit.objects, structs, model, origin)
    names = frozenset(function.name for function in unit.functions)
    found = prove_rings(rings, kept, unit.objects, structs, model, origin, called=called, defined=names)
    return [proof for ring in found for proof in ring.proofs]


@pytest.mark.parametrize("form", FORMS)
def test_usual_forms_are_proved(form: str) -> None:
    found = [proof for proof in proofs(FORMS[form]) if proof.about in ("access", "range")]
    assert len(found) >= 2
    assert all(proof.holds for proof in found), [proof for proof in found if not proof.holds]
    assert all(proof.reason is None for proof in found)


def test_what_a_caller_must_see_to_is_said() -> None:
    found = [proof for proof in proofs(RUN_TIME) if proof.about == "access"]
    for proof in found:
        assert "start is given a capacity such that size > 0" in proof.assumed
        assert "struct ring.bytes has size elements" in proof.assumed
        assert "every struct ring is given to start before it is used" in proof.assumed
    assert not any(proof.assumed for proof in proofs(LOG))


def test_what_is_called_back_must_use_the_ring_by_its_functions() -> None:
    said = "what put, skip call changes struct ring through its own functions only"
    found = [proof for proof in proofs(CALLS_BACK) if proof.about == "access"]
    assert len(found) == 2
    assert all(proof.holds and said in proof.assumed for proof in found)
    # The same where its address is given as one of anything.
    plain = CALLS_BACK.replace("(struct ring *, int)", "(void *, int)").replace(
        "r->told(r, 1)", "{ void *a = r; r->told(a, 1); }"
    )
    assert any(said in proof.assumed for proof in proofs(plain))
    assert not any("own functions only" in clause for proof in proofs(CALLS_OUT) for clause in proof.assumed)


def test_each_advance_goes_one_slot() -> None:
    found = [proof for form in (LOG, COUNTED, RUN_TIME, LOOPED) for proof in proofs(form) if proof.about == "advance"]
    assert len(found) >= 6
    assert all(proof.holds for proof in found)


SLIPS = [
    (LOG, "at >= 12", "at > 12", "access"),
    (LOG, "at >= 12", "at == 13", "access"),
    (LOG, "at = 0; }", "at = 1; }", "advance"),
    (COUNTED, "++q->head == 8", "q->head++ == 8", "access"),
    (COUNTED, "% 8", "% 9", "access"),
    (COUNTED, "q->count == 8", "q->count == 9", "range"),
    (COUNTED, "(q->tail + 1)", "(q->tail + 2)", "advance"),
    (RUN_TIME, "% r->size", "% (r->size + 1)", "access"),
    (RUN_TIME, "r->head = r->tail = 0", "r->tail = 0", "access"),
    (RUN_TIME, "r->head = r->tail = 0", "r->head = r->tail = size", "access"),
    (MASKED, "(r->tail + 1) & r->mask", "(r->tail + 1) & (r->mask + 1)", "access"),
    (MASKED, "r->mask = n - 1", "r->mask = n", "access"),
    (LOOPED, "next == 64", "next > 64", "access"),
    (LOOPED, "& 63", "& 64", "advance"),
    (BULK, "if (n > free) n = free;", "", "access"),
    (BULK, "if (first > n) first = n;", "", "access"),
    (BULK, "r->head = 0;\n    return", ";\n    return", "access"),
    (CALLS_OUT, "tell(); at++;", "at++; tell();", "access"),
    (CALLS_BACK, "r->head = next;", "if (r->told) r->told(r, 2); r->head = next;", "access"),
    (CALLS_BACK, "if (at >= r->size)", "r->tail = at; if (r->told) r->told(r, 2); if (at >= r->size)", "access"),
    (CALLS_BACK, "if (n > most) n = most;", "", "access"),
    (CALLS_BACK, "*out = at; }", "*out = at + 1; }", "access"),
    (STOPS_SHORT, "if (out == 64)", "if (out == 75)", "access"),
]


@pytest.mark.parametrize("number", range(len(SLIPS)))
def test_a_slip_is_not_proved(number: int) -> None:
    form, right, wrong, about = SLIPS[number]
    assert right in form
    found = proofs(form.replace(right, wrong))
    open_ = [proof for proof in found if proof.about == about and not proof.holds]
    # What is no ring any more is not proved either.
    assert open_ or not found
    assert all(proof.reason is not None for proof in open_)
