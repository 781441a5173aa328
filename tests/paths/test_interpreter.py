"""How runs end, what they leave in memory, and what can be seen and changed from outside."""

from collections.abc import Sequence
from typing import Any

import pytest
from tests.support import lower_text

from stepring.meaning.models import integer
from stepring.paths.interpreter import Program, fresh, program, run
from stepring.paths.memory import Memory, write_value
from stepring.paths.types import Event

BARGE = """
typedef unsigned char uint8_t; typedef unsigned short uint16_t;
struct command { uint8_t kind; uint16_t mass; };
struct queue { struct command slots[4]; uint8_t head, tail; } commands;
static int dropped; int weight(void); void log_(int, int); extern int late;
int put(uint8_t kind, uint16_t mass) {
    uint8_t next = (commands.head + 1) % 4;
    if (next == commands.tail) { dropped++; return 0; }
    commands.slots[commands.head].kind = kind;
    commands.slots[commands.head].mass = mass;
    commands.head = next;
    return 1;
}
int get(struct command *out) {
    if (commands.head == commands.tail) return 0;
    *out = commands.slots[commands.tail];
    commands.tail = (commands.tail + 1) % 4;
    return 1;
}
int take(void) { struct command c; return get(&c) ? c.mass : -1; }
int scaled(int factor) { return weight() * factor; }
int put_into(struct queue *q, uint8_t kind) { q->slots[q->head++].kind = kind; return q->head; }
int waits(void) { for (;;) { } }
int deep(int n) { return n == 0 ? 0 : 1 + deep(n - 1); }
int uses_late(void) { return late; }
int report(int n) { log_(n, n * 2); return n; }
"""


def barge(text: str = BARGE, model: str = "LP64") -> Program:
    """A program of one unit."""
    unit = lower_text(text, model)
    assert not unit.notices
    return program([unit])


def test_calls_on_one_memory_see_what_earlier_ones_left() -> None:
    made = barge()
    memory = fresh(made)
    assert [run(made, "put", (1, mass), memory=memory).value for mass in (10, 20, 30, 40)] == [1, 1, 1, 0]
    assert memory.read("dropped") == 1
    assert memory.read("commands.slots[2].mass") == 30
    assert [run(made, "take", memory=memory).value for _ in range(4)] == [10, 20, 30, -1]
    assert run(made, "take").value == -1  # a memory of its own


def test_places_are_written_from_outside() -> None:
    made = barge()
    memory = fresh(made)
    memory.write("commands.head", 257)
    memory.write("commands.slots[0].mass", 99)
    assert memory.read("commands.head") == 1
    assert run(made, "take", memory=memory).value == 99
    wrong = ("commands.slots[4].kind", "commands.nothing", "nowhere", "commands..head", "dropped[0]", "commands.head.x")
    for path in wrong:
        with pytest.raises(KeyError):
            memory.read(path)


def test_an_object_of_a_given_type_can_be_an_argument() -> None:
    made = barge()
    memory = fresh(made)
    type_ = made.statics[made.static_named("commands") or 0].variable.type
    queue = memory.declare("given", type_, zero=True)
    assert run(made, "put_into", (queue, 7), memory=memory).value == 1
    assert memory.read("given.slots[0].kind") == 7
    assert memory.read("commands.slots[0].kind") == 0
    memory.write("given.head", 4)
    outcome = run(made, "put_into", (queue, 7), memory=memory)
    assert (outcome.kind, outcome.fault) == ("undefined", "bounds")
    assert outcome.reason == "the subscript in q->slots[%1] is 4; the array has 4 elements"


def test_functions_without_body_are_asked_for_or_end_the_run() -> None:
    made = barge()
    assert run(made, "scaled", (3,), {"weight": lambda arguments: 14}).value == 42
    assert run(made, "scaled", (3,), lambda name, arguments: {"weight": -2}[name]).value == -6
    assert run(made, "scaled", (1,), {"weight": lambda arguments: 1 << 32 | 5}).value == 5
    outcome = run(made, "scaled", (3,))
    assert outcome.kind == "stopped"
    assert "weight" in outcome.reason
    assert outcome.position is not None and outcome.position.line == 21
    seen: list[Sequence[Any]] = []
    assert run(made, "report", (4,), {"log_": seen.append}).value == 4
    assert seen == [[4, 8]]


def test_an_object_defined_elsewhere_has_no_value_until_it_is_given_one() -> None:
    made = barge()
    outcome = run(made, "uses_late")
    assert outcome.kind == "stopped"
    assert "late" in outcome.reason
    memory = fresh(made)
    memory.write("late", 6)
    assert run(made, "uses_late", memory=memory).value == 6


def test_the_steps_given_bound_a_run() -> None:
    outcome = run(barge(), "waits", steps=1000)
    assert (outcome.kind, outcome.steps) == ("limit", 1000)
    assert outcome.position is not None and outcome.position.line == 23
    assert run(barge(), "deep", (1500,)).value == 1500
    assert run(barge(), "deep", (10**6,), steps=10**8).kind == "limit"


def test_a_wrong_call_is_refused() -> None:
    with pytest.raises(KeyError, match="no unit has a function 'get_all'"):
        run(barge(), "get_all")
    with pytest.raises(ValueError, match="put takes 2 arguments and was given 1"):
        run(barge(), "put", (1,))
    with pytest.raises(ValueError, match="one data model"):
        program([lower_text("int a;"), lower_text("int b;", "ILP32")])
    with pytest.raises(ValueError, match="at least one unit"):
        program([])


@pytest.mark.parametrize(
    ("fault", "body"),
    [
        ("overflow", "return n + 2147483647;"),
        ("overflow", "return -(n - 2147483647 - 2);"),
        ("overflow", "int v = -2147483647 - n; return v / -n;"),
        ("overflow", "int v = -2147483647 - n; return v % -n;"),
        ("overflow", "int v = 2147483647; v++; return v;"),
        ("overflow", "return abs(-2147483647 - n);"),
        ("shift", "return n << 32;"),
        ("shift", "return n >> -n;"),
        ("shift", "return -n << 1;"),
        ("shift", "return n << 31;"),
        ("division", "return 4 / (n - 1);"),
        ("division", "return 4u % (n - 1);"),
        ("bounds", "int t[3] = {0}; return t[n + 2];"),
        ("bounds", "int t[3] = {0}; return t[n - 2];"),
        ("bounds", "int t[3] = {0}, *p = t; return p[n + 2];"),
        ("pointer", "int t[3] = {0}, *p = t + 3; p += n; return 0;"),
        ("pointer", "int t[3] = {0}, *p = t; p -= n; return 0;"),
        ("bounds", "int t[2][3] = {{0}}; return t[0][n + 2];"),
        ("bounds", "struct { int a[2], b; } s = {{0}}; int *p = s.a; return p[n + 1];"),
        ("bounds", "int v = n, *p = &v; return p[1];"),
        ("bounds", "char t[3]; memset(t, 0, n + 3); return 0;"),
        ("bounds", "char t[3] = {1, 2, 3}; return strlen(t);"),
        ("null", "int *p = 0; return *p;"),
        ("null", "struct box { int a, b; } *p = 0; return p->b;"),
        ("null", "int (*f)(void) = 0; return f();"),
        ("null", "memset(0, 1, n); return 0;"),
        ("uninitialised", "int v; return v;"),
        ("uninitialised", "int v; if (n > 1) v = 2; return v + 1;"),
        ("uninitialised", "int t[3]; t[1] = 2; return t[n + 1];"),
        ("uninitialised", "int *p; return *p;"),
        ("uninitialised", "for (int i = 0; i < 2; i++) { int v; if (i == 0) v = 5; n += v; } return n;"),
        ("uninitialised", "return no_value(n);"),
        ("lifetime", "return *gone();"),
        ("lifetime", "int *p = malloc(8); free(p); return *p;"),
        ("lifetime", "int *p = malloc(8); free(p); free(p); return 0;"),
        ("pointer", "int a, b; return &a < &b;"),
        ("pointer", "int a, b; return &a - &b;"),
        ("pointer", "int v; free(&v); return 0;"),
        ("conversion", "float f = 3e9f; return (int)f;"),
        ("conversion", "_Bool b; *(char *)&b = 3; return b;"),
        ("read-only", "char *p = (char *)\"bin\"; *p = 'd'; return 0;"),
        ("read-only", "*(int *)&fixed = 3; return 0;"),
        ("overlap", "char t[4] = {0}; memcpy(t, t + 1, 2); return 0;"),
        ("arguments", "int (*f)() = two; return f(1);"),
    ],
)
def test_what_is_undefined_ends_a_run(fault: str, body: str) -> None:
    text = f"""
    void *memset(void *, int, unsigned long); void *memcpy(void *, const void *, unsigned long);
    void *malloc(unsigned long); void free(void *); unsigned long strlen(const char *); int abs(int);
    const int fixed = 2;
    static int two(int a, int b) {{ return a + b; }} static int *gone(void) {{ int v = 1; int *p = &v; return p; }}
    static int no_value(int n) {{ if (n > 1) return 3; }}
    int step(int n) {{
        {body} }}"""
    outcome = run(barge(text), "step", (1,))
    assert (outcome.kind, outcome.fault) == ("undefined", fault), outcome
    assert outcome.position is not None and outcome.position.line >= 5
    assert outcome.reason


@pytest.mark.parametrize(
    ("body", "value"),
    [
        ("int t[3] = {0}, *p = t + 3; return p - t;", 3),
        ("int t[3] = {0}; return &t[3] == t + 3;", 1),
        ("int a = 1, b = 1; return &a == &b;", 0),
        ("int *p = 0; return &*p == 0;", 1),
        ("int v; v = 3; return v;", 3),
        ("int v; (void)v; return 4;", 4),
        ("struct { int a, b; } s, t; s.a = 1; t = s; return t.a;", 1),
        ("int v; memset(&v, 1, sizeof v); return v == 0x01010101;", 1),
        ("int t[4] = {1, 2, 3, 4}; memmove(t + 1, t, 12); return t[3];", 3),
        ("unsigned u = 0; return u - 1 == 0xffffffff;", 1),
        ("return (signed char)200;", -56),
        ("return no_value(1) , 5;", 5),
        ("int g[2][3] = {{0}}; int *p = g[0]; p[4] = 7; return g[1][1];", 7),
        ('return strcmp("bin", "bit") < 0 && memcmp("ab", "ab", 2) == 0;', 1),
    ],
)
def test_what_is_defined_goes_on(body: str, value: int) -> None:
    text = f"""
    void *memset(void *, int, unsigned long); void *memmove(void *, const void *, unsigned long);
    int strcmp(const char *, const char *); int memcmp(const void *, const void *, unsigned long);
    static int no_value(int n) {{ if (n > 1) return 3; }}
    int step(void) {{ {body} }}"""
    outcome = run(barge(text), "step")
    assert (outcome.kind, outcome.value) == ("returned", value), outcome


def test_the_data_model_decides() -> None:
    text = """typedef unsigned int word; int add(int a) { return a + 1; } word wrap(word a) { return a + 1; }
    long mass(int kilo) { return kilo * 1000L; } int mass_short(int kilo) { return kilo * 1000; }
    int count(unsigned char head, unsigned char tail) { return head - tail; }"""
    small, large = barge(text, "IP16"), barge(text, "LP64")
    assert run(small, "add", (32767,)).fault == "overflow"
    assert run(large, "add", (32767,)).value == 32768
    assert (run(small, "wrap", (65535,)).value, run(large, "wrap", (65535,)).value) == (0, 65536)
    assert (run(small, "mass", (40,)).value, run(small, "mass_short", (40,)).fault) == (40000, "overflow")
    assert run(small, "count", (2, 254)).value == -252


def test_a_watched_run_tells_what_it_does() -> None:
    events: list[Event] = []
    made = barge()
    outcome = run(made, "put", (1, 50), observe=events.append)
    assert outcome.value == 1
    told = [(event.kind, event.text, event.value, event.position.line) for event in events]
    assert told == [
        ("store", "next", 1, 7),
        ("branch", "next == commands.tail", False, 8),
        ("store", "commands.slots[commands.head].kind", 1, 9),
        ("store", "commands.slots[commands.head].mass", 50, 10),
        ("store", "commands.head", 1, 11),
        ("return", "1", 1, 12),
    ]
    events.clear()
    run(made, "take", observe=events.append)
    assert ("call", "get") in [(event.kind, event.text) for event in events]


def test_an_interrupt_can_run_between_two_accesses() -> None:
    text = """volatile int count; int main_(void) { int before = count; count = before + 1; return count; }
    void interrupt(void) { count += 10; }"""
    made = barge(text)
    memory = fresh(made)
    fired: list[str] = []

    def volatile(now: Memory, place: str, kind: str) -> None:
        if kind == "store" and not fired:
            fired.append(place)
            assert run(made, "interrupt", memory=now).kind == "returned"

    assert run(made, "main_", memory=memory, volatile=volatile).value == 1  # the interrupt's ten are lost
    assert fired == ["count"]


def test_a_snapshot_brings_a_memory_back() -> None:
    made = barge()
    memory = fresh(made)
    start, key = memory.snapshot(), memory.key()
    for mass in range(6):
        run(made, "put", (1, mass), memory=memory)
    assert memory.key() != key
    memory.restore(start)
    assert memory.key() == key
    assert memory.read("dropped") == 0
    assert run(made, "take", memory=memory).value == -1


def test_registers_at_fixed_addresses_are_objects_that_are_given() -> None:
    text = "int poll(void) { return *(volatile unsigned char *)0x25 & 4; }"
    made = barge(text, "IP16")
    outcome = run(made, "poll")
    assert outcome.kind == "stopped"
    assert "0x25" in outcome.reason
    memory = fresh(made)
    cells, *_ = memory.place_at(0x20, 16, "port registers")
    cells.data[5] = 0xFF
    assert run(made, "poll", memory=memory).value == 4


def test_assembly_leaves_what_it_sets_unknown() -> None:
    made = barge("""int guarded(int v) { int flags; __stepring_asm(flags); __stepring_asm(); v++; return v; }
    int uses(void) { int flags; __stepring_asm(flags); return flags; }""")
    assert run(made, "guarded", (1,)).value == 2
    outcome = run(made, "uses")
    assert outcome.kind == "stopped"
    assert "assembly" in outcome.reason


def test_assembly_may_give_a_value_from_outside_where_nothing_goes_in() -> None:
    made = barge("""int mask(void) { int flags; __stepring_asm(flags); return flags; }
    int twice(int v) { int flags; __stepring_asm(flags); return flags + v; }
    int count(void) { int flags; __stepring_asm(flags); return flags + dropped; }""")
    given = {"inline assembly": lambda _: 5}
    assert run(made, "mask", externals=given).value == 5
    assert run(made, "mask", externals=lambda name, _: None).kind == "stopped"
    assert run(made, "mask", externals={}).kind == "stopped"
    assert run(made, "twice", (1,), externals=given).kind == "stopped"
    assert run(made, "count", externals=given).kind == "stopped"


def test_equal_runs_give_equal_outcomes() -> None:
    made = barge()
    assert run(made, "put", (1, 2)) == run(made, "put", (1, 2))
    assert run(made, "put", (1, 2)) == run(made.units, "put", (1, 2))


def test_a_static_function_is_found_by_its_name_or_identity() -> None:
    first = lower_text("static int own(void) { return 1; } int a(void) { return own(); }", name="a.c")
    second = lower_text("static int own(void) { return 2; } int b(void) { return own(); }", name="b.c")
    made = program([first, second])
    assert run(made, "a.c:own").value == 1
    assert (run(made, "a").value, run(made, "b").value) == (1, 2)
    with pytest.raises(KeyError, match=r"a\.c:own, b\.c:own"):
        run(made, "own")


def test_a_constant_with_the_sign_bit_is_what_compilers_make_of_it() -> None:
    made = barge("""int mask = 1 << 31; const unsigned bits = 1u << 31 | 1 << 31; int step(int e) { switch (e) {
    case 1 << 31: return 1; default: return mask & (1 << 31) ? 2 : 3; } }""")
    assert fresh(made).read("mask") == -(1 << 31)
    assert (run(made, "step", (-(1 << 31),)).value, run(made, "step", (0,)).value) == (1, 2)


def test_an_initialiser_that_is_not_understood_leaves_only_its_part_unknown() -> None:
    made = barge(
        "int zero; struct { int a, b; } s = {1, 1 / 0}; int a(void) { return s.a; } int b(void) { return s.b; }"
    )
    assert run(made, "a").value == 1
    assert run(made, "b").kind == "stopped"


def test_an_object_that_is_too_large_is_not_kept() -> None:
    made = barge(
        "char flash[0x40000000]; int small = 3; int own(void) { return small; } int far(int i) { return flash[i]; }"
    )
    for _ in range(2):
        assert run(made, "own").value == 3
        outcome = run(made, "far", (5,))
        assert (outcome.kind, "too large" in outcome.reason) == ("stopped", True)
    assert run(barge("int deep(void) { char t[0x40000000]; t[0] = 1; return t[0]; }"), "deep").kind == "stopped"


def test_a_parameter_without_a_name_takes_an_argument() -> None:
    made = barge("int second(int, int b) { return b; } int step(void) { return second(4, 5); }")
    assert run(made, "step").value == 5


@pytest.mark.parametrize(
    "body",
    [
        "int t[n]; t[0] = 1; return t[0];",
        "int t[n], *p = t; p++; return 0;",
        "int t[n]; memset(t, 0, 4); return 0;",
        "for (int i = 0; i < n; i++) { int t[n]; t[i] = i; } return 0;",
        "return elsewhere[n];",
        "unsigned char *p = elsewhere; return *++p;",
        "struct hidden *h = given; return h->n;",
        "struct hidden *h = given; h++; return 0;",
    ],
)
def test_what_has_no_known_size_is_not_called_undefined(body: str) -> None:
    text = "extern unsigned char elsewhere[]; struct hidden; extern struct hidden *given;"
    text += "void *memset(void *, int, int);"
    outcome = run(barge(f"{text} int step(int n) {{ {body} }}"), "step", (3,))
    assert outcome.kind == "stopped", outcome


def test_what_a_function_without_body_may_have_set_is_not_called_indeterminate() -> None:
    made = barge("void measure(int *); int step(void) { int v; measure(&v); return v; }")
    outcome = run(made, "step", externals={"measure": lambda arguments: 0})
    assert (outcome.kind, "measure may have set it" in outcome.reason) == ("stopped", True)
    memory = fresh(made)

    def measure(arguments: Sequence[Any]) -> int:
        cells, offset, *_ = arguments[0]
        write_value(cells, offset, integer(made.model, "int"), 77)
        return 0

    assert run(made, "step", externals={"measure": measure}, memory=memory).value == 77
