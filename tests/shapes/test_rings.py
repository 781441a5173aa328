"""Finding rings: what is one, what only looks like one, and what the inventory says of it."""

import pytest
from tests.shapes.ring_support import origin
from tests.support import lower_text

from stepring.shapes.ring_types import CheckedAccess
from stepring.shapes.rings import find_rings, ring_functions
from stepring.shapes.types import Ring

TYPES = "typedef unsigned char uint8_t; typedef unsigned short uint16_t; typedef short int16_t;\n"


def rings(text: str) -> list[Ring]:
    unit = lower_text(TYPES + text)
    assert not unit.notices
    kept = ring_functions(unit.functions)
    return list(find_rings(kept, unit.objects, unit.types.structs, unit.types.model, origin))


@pytest.mark.parametrize(
    ("wrap", "form"),
    [
        ("head++; if (head >= 6) head = 0;", "reset"),
        ("if (++head == 6) head = 0;", "reset"),
        ("uint8_t next = head + 1; if (next == 6) next = 0; head = next;", "reset"),
        ("if (head > 4) head = 0; else head++;", "reset"),
        ("head = (head + 1) % 6;", "modulo"),
        ("head++; head %= 6;", "modulo"),
        ("head = head + 1 < 6 ? head + 1 : 0;", "choice"),
        ("head += 1; if (head >= 6) head -= 6;", "subtract"),
        ("if (head == 0) head = 6; head--;", "decrement"),
        ("head = head ? head - 1 : 5;", "decrement"),
        ("head = (head + 5) % 6;", "modulo"),
        ("head = following(head);", "modulo"),
        ("advance(&head);", "reset"),
    ],
)
def test_every_way_to_wrap(wrap: str, form: str) -> None:
    found = rings(
        f"""
        static int16_t grams[6];
        static uint8_t head;
        static uint8_t following(uint8_t slot) {{ return (slot + 1) % 6; }}
        static void advance(uint8_t *slot) {{ if (++*slot >= 6) *slot = 0; }}
        void put(int16_t sample) {{ grams[head] = sample; {wrap} }}
        """
    )
    assert [(ring.storage, ring.capacity, ring.wrap, ring.scheme) for ring in found] == [
        ("grams", 6, form, "overwrite")
    ]
    index = found[0].indices[0]
    assert index.orbit == (0, 1, 2, 3, 4, 5)
    assert {access.exact for access in found[0].accesses} == {(0, 1, 2, 3, 4, 5)}
    (step,) = index.steps
    direction = {(after - before) % 6 for before, after in step.pairs}
    assert direction in ({1}, {5}) and len(step.pairs) == 6


@pytest.mark.parametrize(
    ("text", "scheme"),
    [
        (
            "static uint8_t q[8]; static uint8_t head, tail;"
            "int put(uint8_t c) { uint8_t next = (head + 1) % 8; if (next == tail) return 0;"
            " q[head] = c; head = next; return 1; }"
            "int get(uint8_t *c) { if (head == tail) return 0; *c = q[tail]; tail = (tail + 1) % 8; return 1; }",
            "one slot empty",
        ),
        (
            "static uint8_t q[8]; static uint8_t head, tail, count;"
            "int put(uint8_t c) { if (count == 8) return 0; q[head] = c; head = (head + 1) % 8; count++; return 1; }"
            "int get(uint8_t *c) { if (!count) return 0; *c = q[tail]; tail = (tail + 1) % 8; count--; return 1; }",
            "count",
        ),
        (
            "static uint8_t q[8]; static uint8_t head, count;"
            "int put(uint8_t c) { if (count == 8) return 0; q[(head + count) % 8] = c; count++; return 1; }"
            "int get(uint8_t *c) { if (!count) return 0; *c = q[head]; head = (head + 1) % 8; count--; return 1; }",
            "count",
        ),
        (
            "static uint8_t q[8]; static uint8_t in, out;"
            "int put(uint8_t c) { if ((uint8_t)(in - out) >= 8) return 0; q[in & 7] = c; in++; return 1; }"
            "int get(uint8_t *c) { if (in == out) return 0; *c = q[out & 7]; out++; return 1; }",
            "difference",
        ),
        (
            "static uint8_t q[8]; static uint8_t head, tail, full;"
            "int put(uint8_t c) { if (full) return 0; q[head] = c; head = (head + 1) % 8; if (head == tail) full = 1;"
            " return 1; }"
            "int get(uint8_t *c) { if (head == tail && !full) return 0; *c = q[tail]; tail = (tail + 1) % 8; full = 0;"
            " return 1; }",
            "flag",
        ),
        (
            "static uint8_t q[8]; static uint8_t head, tail;"
            "void put(uint8_t c) { q[head] = c; head = (head + 1) % 8; }"
            "uint8_t get(void) { uint8_t c = q[tail]; tail = (tail + 1) % 8; return c; }",
            "unchecked",
        ),
    ],
)
def test_how_full_and_empty_are_told_apart(text: str, scheme: str) -> None:
    (ring,) = rings(text)
    assert ring.scheme == scheme
    assert all(access.range is not None and (access.range.low, access.range.high) == (0, 7) for access in ring.accesses)


@pytest.mark.parametrize(
    "text",
    [
        # a cyclic counter over channels: nothing is stored through it
        "extern void sample(int channel); static uint8_t channel;"
        "void tick(void) { sample(channel); channel = (channel + 1) % 4; }",
        # playback of a table
        "static const uint8_t wave[16] = {1, 2, 3}; static uint8_t at; extern uint8_t out;"
        "void tick(void) { out = wave[at]; at = (at + 1) % 16; }",
        # hash probing
        "static uint8_t table[16]; void insert(uint8_t key) { uint8_t at = key % 16;"
        " while (table[at]) at = (at + 1) % 16; table[at] = key; }",
        # a line buffer that starts again with every message
        "extern void line(uint8_t *text, uint8_t length); static uint8_t text[32]; static uint8_t length;"
        "void byte(uint8_t c) { if (c == 10) { line(text, length); length = 0; return; }"
        " text[length++] = c; if (length >= 32) length = 0; }",
        # a loop over a whole array with an index that happens to last
        "static uint8_t table[16]; static uint8_t i; void clear(void) { for (i = 0; i < 16; i++) table[i] = 0; }",
        # a stack
        "static uint8_t stack[16]; static uint8_t top; void push(uint8_t c) { if (top < 16) stack[top++] = c; }"
        "uint8_t pop(void) { return top > 0 ? stack[--top] : 0; }",
        # a clamp
        "static uint8_t log[16]; static uint8_t used; void note(uint8_t c) { log[used] = c; used++;"
        " if (used > 15) used = 15; }",
        # a block that is worked on when it is full
        "extern void work(uint8_t *block); static uint8_t block[64]; static uint8_t used;"
        "void feed(uint8_t c) { block[used++] = c; if (used == 64) { work(block); used = 0; } }",
        # scratch strings that are lent out in turn
        "extern void number(char *to, int value); static char texts[4][12]; static uint8_t next;"
        "char *shown(int value) { char *text = texts[next]; next = (next + 1) % 4; number(text, value); return text; }",
        # a pseudo-random generator that picks from a table it also fills
        "static uint16_t seed; static uint8_t salt[8]; void stir(uint8_t c) { seed = seed * 109 + 89;"
        " salt[seed & 7] ^= c; }",
    ],
)
def test_what_only_looks_like_a_ring(text: str) -> None:
    assert rings(text) == []


def test_rings_in_structures_are_one_whatever_object() -> None:
    (ring,) = rings(
        """
        struct hopper { int16_t line[5]; uint8_t newest; };
        static struct hopper hoppers[3];
        void note(struct hopper *h, int16_t sample) { h->line[h->newest] = sample; h->newest = (h->newest + 1) % 5; }
        void note_all(int16_t sample) { for (int i = 0; i < 3; i++) note(&hoppers[i], sample); }
        """
    )
    assert (ring.storage, ring.kind, ring.capacity) == ("struct hopper.line", "member", 5)
    assert ring.indices[0].name == "struct hopper.newest"


def test_parallel_arrays_are_rings_of_their_own() -> None:
    found = rings(
        """
        static int16_t grams[4]; static uint16_t times[4]; static uint8_t at;
        void note(int16_t g, uint16_t t) { grams[at] = g; times[at] = t; if (++at == 4) at = 0; }
        """
    )
    assert {ring.storage for ring in found} == {"grams", "times"}


def test_a_capacity_that_is_set_at_run_time_is_said() -> None:
    (ring,) = rings(
        """
        struct pipe { uint8_t *data; uint16_t size; uint16_t in; uint16_t out; };
        int put(struct pipe *p, uint8_t c) {
            uint16_t next = p->in + 1;
            if (next >= p->size) next = 0;
            if (next == p->out) return 0;
            p->data[p->in] = c; p->in = next; return 1; }
        int get(struct pipe *p, uint8_t *c) {
            if (p->in == p->out) return 0;
            *c = p->data[p->out];
            if (++p->out >= p->size) p->out = 0;
            return 1; }
        """
    )
    assert ring.capacity is None and ring.notes
    assert {index.role for index in ring.indices} == {"write", "read"}
    assert ring.scheme == "one slot empty"


def test_the_unit_stage_keeps_a_small_part() -> None:
    unit = lower_text(
        TYPES
        + """
        static uint8_t q[8]; static uint8_t head;
        static int16_t offset; static uint16_t ticks;
        void put(uint8_t c) { q[head] = c; head = (head + 1) % 8; }
        void flush(void) { head = 0; }
        void tick(void) { ticks++; }
        void set_offset(int16_t value) { offset = value; }
        int16_t scaled(int16_t value) { return (int16_t)((value - offset) * 3 / 2); }
        """
    )
    assert [function.name for function in ring_functions(unit.functions)] == ["put", "flush"]


def test_a_guard_on_other_state_is_followed() -> None:
    """The comparison is one late, but the guard never lets the index get that far."""
    (ring,) = rings(
        """
        static uint8_t q[8]; static uint8_t head, used;
        void put(uint8_t c) { if (used < 8) { q[head] = c; used++; if (++head > 8) head = 0; } }
        """
    )
    (access,) = ring.accesses
    assert access.exact == (0, 1, 2, 3, 4, 5, 6, 7)
    index = next(index for index in ring.indices if index.name == "head")
    assert index.orbit is not None and max(index.orbit) >= 8


def test_what_a_caller_checks_counts_for_its_static_helper() -> None:
    (ring,) = rings(
        """
        static int16_t line[6]; static uint8_t at;
        static int16_t back(uint8_t steps) { return line[at - steps]; }
        void put(int16_t sample) { line[at] = sample; if (++at == 6) at = 0; }
        int16_t newest(void) { return at > 0 ? back(1) : line[5]; }
        """
    )
    assert {access.function: access.exact for access in ring.accesses}["back"] == (0, 1, 2, 3, 4)


def test_values_of_another_object_of_the_type_are_not_lost() -> None:
    (ring,) = rings(
        """
        struct pipe { uint8_t data[8]; uint8_t in; };
        static struct pipe up, down;
        void put(struct pipe *p, uint8_t c) { p->data[p->in] = c; p->in = (p->in + 1) % 8; }
        void start(void) { up.in = 9; down.in = 0; }
        """
    )
    assert ring.indices[0].orbit is not None and 9 in ring.indices[0].orbit


def test_two_programs_in_one_folder_are_told_apart() -> None:
    one = lower_text(
        TYPES + "uint8_t q[4]; uint8_t at; void put(uint8_t c) { q[at] = c; at = (at + 1) % 4; }", name="one.c"
    )
    other = lower_text(
        TYPES + "uint8_t q[9]; uint8_t at; void put(uint8_t c) { q[at] = c; at = (at + 1) % 9; }", name="other.c"
    )
    found = find_rings(
        one.functions + other.functions,
        one.objects + other.objects,
        {**one.types.structs, **other.types.structs},
        one.types.model,
        origin,
    )
    assert [(ring.capacity, ring.indices[0].orbit) for ring in found] == [(4, tuple(range(4))), (9, tuple(range(9)))]


def test_the_start_value_is_that_of_the_initialiser() -> None:
    (ring,) = rings(
        "static uint8_t q[8]; static uint8_t at = 5; void put(uint8_t c) { q[at] = c; at = (at + 1) % 8; }"
    )
    assert ring.indices[0].initial == 5


def test_an_index_behind_atomic_functions() -> None:
    (ring,) = rings(
        """
        uint8_t __atomic_load_n(uint8_t *, int); void __atomic_store_n(uint8_t *, uint8_t, int);
        static uint8_t q[8]; static uint8_t at;
        void put(uint8_t c) {
            uint8_t here = __atomic_load_n(&at, 5);
            q[here] = c;
            __atomic_store_n(&at, (here + 1) % 8, 5); }
        """
    )
    assert ring.indices[0].orbit == tuple(range(8))


def test_an_index_behind_addresses_that_atomic_functions_get() -> None:
    (ring,) = rings(
        """
        static uint8_t q[8]; static uint8_t at;
        void put(uint8_t c) {
            uint8_t *where = &at; uint8_t here; __atomic_load(where, &here, 2);
            q[here] = c;
            uint8_t *there = &at; uint8_t next = (here + 1) % 8; __atomic_store(there, &next, 3); }
        """
    )
    assert ring.indices[0].orbit == tuple(range(8))


RUN_TIME = """
struct feed_log { uint8_t *slots; unsigned size, in, out; };
void open_log(struct feed_log *log, uint8_t *slots, unsigned size)
{ log->slots = slots; log->size = size; log->in = log->out = 0; }
int put(struct feed_log *log, uint8_t c) {
    unsigned next = log->in + 1; if (next >= log->size) next = 0; if (next == log->out) return 0;
    log->slots[log->in] = c; log->in = next; return 1; }
int get(struct feed_log *log) {
    if (log->in == log->out) return -1;
    int c = log->slots[log->out]; if (++log->out >= log->size) log->out = 0; return c; }
unsigned used(const struct feed_log *log)
{ return log->in >= log->out ? log->in - log->out : log->size - log->out + log->in; }
"""


def test_a_capacity_set_at_run_time_says_where_it_stands_and_which_functions_work_on_the_ring() -> None:
    (ring,) = rings(RUN_TIME)
    assert ring.capacity is None and ring.bound is not None
    assert (ring.bound.form, ring.bound.text, ring.bound.plus) == ("member", "struct feed_log.size", 0)
    assert ring.bound.key[0] == "member" and ring.bound.key[2] == "size" and ring.bound.key[1] == ring.struct
    assert (ring.storage_key, ring.storage_form) == (("member", ring.struct, "slots", "*"), "pointer")
    assert [index.key for index in ring.indices] == [("member", ring.struct, "out"), ("member", ring.struct, "in")] or [
        index.key for index in ring.indices
    ] == [("member", ring.struct, "in"), ("member", ring.struct, "out")]
    assert ring.functions == ("open_log", "put", "get", "used") and ring.helpers == ()


@pytest.mark.parametrize(
    ("put", "text", "plus"),
    [
        ("log->slots[log->in & log->mask] = c; log->in++;", "struct feed_log.mask + 1", 1),
        ("log->slots[log->in] = c; log->in = (log->in + 1) & log->mask;", "struct feed_log.mask + 1", 1),
        ("log->slots[log->in & (log->size - 1)] = c; log->in++;", "struct feed_log.size", 0),
        ("log->slots[log->in] = c; log->in = (log->in + 1) % log->size;", "struct feed_log.size", 0),
        ("log->slots[log->in++] = c; if (log->in > log->size - 1) log->in = 0;", "struct feed_log.size", 0),
        ("log->slots[log->in] = c; log->in = log->in == log->size - 1 ? 0 : log->in + 1;", "struct feed_log.size", 0),
        ("log->slots[log->in] = c; log->in = (log->in + 1) % depth;", "depth", 0),
    ],
)
def test_what_the_capacity_is_compared_with(put: str, text: str, plus: int) -> None:
    (ring,) = rings(
        f"static unsigned depth = 8; struct feed_log {{ uint8_t *slots; unsigned size, mask, in; }};"
        f"void put(struct feed_log *log, uint8_t c) {{ {put} }}"
    )
    assert ring.capacity is None and ring.bound is not None
    assert (ring.bound.text, ring.bound.plus) == (text, plus)


def test_a_constant_capacity_is_its_own_bound() -> None:
    (ring,) = rings("static uint8_t q[8]; static uint8_t at; void put(uint8_t c) { q[at] = c; at = (at + 1) % 8; }")
    assert ring.bound is not None and (ring.bound.form, ring.bound.text, ring.bound.plus) == ("constant", "8", 8)
    assert ring.struct == "" and ring.functions == ("put",)


def test_the_place_of_the_next_element_is_start_plus_count_with_bulk_removal() -> None:
    (ring,) = rings(
        """
        struct feed_log { char *slots; unsigned size, start, held; };
        static int is_full(const struct feed_log *log) { return log->held == log->size; }
        static void add(struct feed_log *log, char c) {
            unsigned at = log->start + log->held++; if (at >= log->size) at -= log->size; log->slots[at] = c; }
        static char take(struct feed_log *log) {
            char c = log->slots[log->start]; if (--log->held == 0 || ++log->start == log->size) log->start = 0;
            return c; }
        int put(struct feed_log *log, char c)
        { int lost = -1; if (is_full(log)) lost = take(log); add(log, c); return lost; }
        int get(struct feed_log *log) { return log->held ? take(log) : -1; }
        unsigned drop(struct feed_log *log, unsigned n) {
            if (n > log->held) { n = log->held; log->start = log->held = 0; }
            else { log->start -= n; log->held -= n; if (log->start > log->size) log->start += log->size; }
            return n; }
        """
    )
    assert (ring.scheme, {index.name: index.role for index in ring.indices}) == (
        "count",
        {"struct feed_log.start": "both", "struct feed_log.held": "count"},
    )
    assert ring.bound is not None and ring.bound.text == "struct feed_log.size"


def test_a_copy_in_two_parts_stores_with_the_write_index_and_loads_with_the_read_index() -> None:
    (ring,) = rings(
        """
        void *memcpy(void *to, const void *from, unsigned long n);
        struct feed_log { uint8_t *slots; unsigned size, in, out; };
        static unsigned used(const struct feed_log *log)
        { return log->in >= log->out ? log->in - log->out : log->size - (log->out - log->in); }
        unsigned put(struct feed_log *log, const uint8_t *data, unsigned n) {
            unsigned room = log->size - 1 - used(log), in = log->in, part;
            if (n > room) n = room;
            part = log->size - in < n ? log->size - in : n;
            memcpy(&log->slots[in], data, part); in += part; n -= part;
            if (n > 0) { memcpy(log->slots, data + part, n); in = n; }
            if (in >= log->size) in = 0;
            log->in = in; return part + n; }
        unsigned get(struct feed_log *log, uint8_t *data, unsigned n) {
            unsigned held = used(log), out = log->out, part;
            if (n > held) n = held;
            part = log->size - out < n ? log->size - out : n;
            memcpy(data, &log->slots[out], part); out += part; n -= part;
            if (n > 0) { memcpy(data + part, log->slots, n); out = n; }
            if (out >= log->size) out = 0;
            log->out = out; return part + n; }
        """
    )
    assert {index.name: index.role for index in ring.indices} == {
        "struct feed_log.in": "write",
        "struct feed_log.out": "read",
    }
    assert ring.bound is not None and ring.bound.text == "struct feed_log.size"
    assert ring.functions == ("put", "get") and [name.rsplit(":", 1)[-1] for name in ring.helpers] == ["used"]


def test_rows_that_are_copied_into_and_out_of_are_a_ring() -> None:
    (ring,) = rings(
        """
        char *strncpy(char *to, const char *from, unsigned long n);
        static char orders[5][16]; static signed char last;
        void note(const char *order) { strncpy(orders[last], order, 16); ++last; if (last >= 5) last = 0; }
        void back(char *order) { --last; if (last > 5) last = 4; strncpy(order, orders[last], 16); }
        """
    )
    assert (ring.storage, ring.capacity, ring.indices[0].role) == ("orders", 5, "both")


def test_a_full_test_in_a_helper_counts_as_the_callers() -> None:
    (ring,) = rings(
        """
        struct feed_log { uint8_t *slots; unsigned size, writes, reads; };
        static int is_full(const struct feed_log *log) { return log->writes - log->reads == log->size; }
        static int is_empty(const struct feed_log *log) { return log->reads == log->writes; }
        int put(struct feed_log *log, uint8_t c) {
            if (!is_full(log)) { log->slots[log->writes++ & (log->size - 1)] = c; return 0; } return -1; }
        int get(struct feed_log *log) {
            if (!is_empty(log)) return log->slots[log->reads++ & (log->size - 1)]; return -1; }
        """
    )
    assert (ring.scheme, ring.wrap) == ("difference", "free-running")


def test_a_hardware_counter_that_counts_slots_down_from_the_end() -> None:
    (ring,) = rings(
        """
        extern volatile uint8_t arrived; void feed(uint8_t c);
        static uint8_t from_shore[16]; static uint8_t left = 16;
        void poll(void) { for (; left != arrived; left--) { if (left == 0) left = 16; feed(from_shore[16 - left]); } }
        """
    )
    assert (ring.storage, ring.capacity, ring.wrap) == ("from_shore", 16, "decrement")


INDICES_ONLY = """
struct order_slots { unsigned puts, gets, mask; };
static unsigned held(const struct order_slots *slots) { return slots->puts - slots->gets; }
int put(struct order_slots *slots) { if (held(slots) > slots->mask) return -1; return slots->puts++ & slots->mask; }
int get(struct order_slots *slots) { if (held(slots)) return slots->gets++ & slots->mask; return -1; }
"""


def test_indices_whose_storage_is_the_callers() -> None:
    (ring,) = rings(INDICES_ONLY)
    assert (ring.storage, ring.capacity, ring.storage_form, ring.storage_key) == (
        "struct order_slots",
        None,
        "elsewhere",
        (),
    )
    assert {index.name.split(".")[1]: index.role for index in ring.indices} == {"puts": "write", "gets": "read"}
    assert ring.bound is not None and ring.bound.text == "struct order_slots.mask + 1"
    assert (ring.wrap, ring.scheme, ring.accesses) == ("free-running", "difference", ())
    assert ring.functions == ("put", "get")


def test_storage_that_is_reached_with_the_slot_that_a_helper_gives_is_the_rings() -> None:
    (ring,) = rings(
        INDICES_ONLY
        + """
        struct shore_link { uint8_t *orders; struct order_slots slots; };
        int send(struct shore_link *link, uint8_t order)
        { int at = put(&link->slots); if (at < 0) return 0; link->orders[at] = order; return 1; }
        int receive(struct shore_link *link)
        { int at = get(&link->slots); return at < 0 ? -1 : link->orders[at]; }
        """
    )
    assert (ring.storage, ring.storage_form) == ("struct shore_link.orders", "pointer")
    assert {index.name.split(".")[1]: index.role for index in ring.indices} == {"puts": "write", "gets": "read"}


@pytest.mark.parametrize(
    "text",
    [
        # two augers in turn, and the hoppers in turn: nothing compares the two
        "struct rota { unsigned auger, hopper, augers; };"
        "unsigned next_auger(struct rota *r) { r->auger++; return r->auger % r->augers; }"
        "unsigned next_hopper(struct rota *r) { r->hopper++; return r->hopper % r->augers; }",
        # one only
        "struct rota { unsigned auger, augers; };"
        "unsigned next_auger(struct rota *r) { r->auger++; return r->auger % r->augers; }",
        # compared, but no slot is given
        "struct race { unsigned a, b, laps; };"
        "int step(struct race *r) { r->a = (r->a + 1) % r->laps; r->b = (r->b + 2) % r->laps; return r->a == r->b; }",
    ],
)
def test_members_that_go_round_without_being_a_ring(text: str) -> None:
    assert rings(text) == []


@pytest.mark.parametrize(
    "text",
    [
        # a block that is worked on whenever it is full, filled in parts
        "void *memcpy(void *to, const void *from, unsigned long n); void mix(const uint8_t *block);"
        "struct digest { uint8_t block[64]; unsigned held; };"
        "void add(struct digest *d, const uint8_t *data, unsigned n) {"
        " if (n < 64 - d->held) { memcpy(&d->block[d->held], data, n); d->held += n; return; }"
        " memcpy(&d->block[d->held], data, 64 - d->held); mix(d->block); data += 64 - d->held; n -= 64 - d->held;"
        " d->held = 0; while (n >= 64) { mix(data); data += 64; n -= 64; }"
        " memcpy(d->block, data, n); d->held = n; }",
        # the same, the place taken from the number of all bytes
        "void *memcpy(void *to, const void *from, unsigned long n); void mix(const uint8_t *block);"
        "struct digest { uint8_t block[64]; unsigned total; };"
        "void add(struct digest *d, const uint8_t *data, unsigned n) {"
        " unsigned left = d->total & 63, fill = 64 - left; d->total += n;"
        " if (left && n >= fill)"
        " { memcpy(d->block + left, data, fill); mix(d->block); data += fill; n -= fill; left = 0; }"
        " while (n >= 64) { mix(data); data += 64; n -= 64; }"
        " if (n > 0) memcpy(d->block + left, data, n); }",
        # what is left of a message, counted from where its reader stands
        "void *memcpy(void *to, const void *from, unsigned long n);"
        "struct message { uint8_t *at; unsigned left, asked; };"
        "int fill(struct message *m, const uint8_t *data, unsigned n) {"
        " if (m->left < m->asked) { memcpy(m->at, data, n); m->at += n; m->left -= n; return 1; }"
        " if (m->left == m->asked) { memcpy(m->at, data, m->left); m->at += m->left; m->left = 0; return 2; }"
        " memcpy(m->at + m->left, data, n); m->at += m->left; m->left = m->left - 1; return 3; }",
    ],
)
def test_blocks_and_cursors_are_no_rings(text: str) -> None:
    assert rings(text) == []


ASKED = "static uint8_t q[8]; static uint8_t at; void put(uint8_t c) { q[at] = c; at = (at + 1) % 8; }"


@pytest.mark.parametrize(
    ("look", "certain"),
    [
        # nobody shows that a caller passes the last slot
        ("uint8_t look(uint8_t slot) { return q[slot + at - at + 1]; }", False),
        # the function's own check lets the last slot through
        ("uint8_t look(uint8_t slot) { if (slot >= 8) return 0; return q[slot + at - at + 1]; }", True),
        # a caller passes it
        ("uint8_t look(uint8_t slot) { return q[slot + at - at + 1]; } uint8_t last(void) { return look(7); }", True),
        # the callers pass others
        ("uint8_t look(uint8_t slot) { return q[slot + at - at + 1]; } uint8_t last(void) { return look(6); }", False),
    ],
)
def test_an_argument_is_trusted_as_far_as_the_code_shows_it(look: str, certain: bool) -> None:
    (ring,) = rings(ASKED + look)
    bad = {access.function for access in ring.accesses if isinstance(access, CheckedAccess) and access.bad is not None}
    assert bad == ({"look"} if certain else set())
    (access,) = [item for item in ring.accesses if item.function == "look"]
    assert isinstance(access, CheckedAccess) and not access.settled
