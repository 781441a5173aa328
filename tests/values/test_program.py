"""Inductive ranges of lasting cells in small programs: rings of every wrap idiom, helpers, interrupts, leaks."""

import re

import pytest
from tests.support import lower_text

from stepring.meaning.types import TypedUnit, VariablePlace
from stepring.values.program import ProgramValues, summarise
from stepring.values.types import Cell, FieldCell, Interval, VariableCell

INTS = """
typedef unsigned char uint8_t;
typedef unsigned short uint16_t;
typedef unsigned int uint32_t;
"""


def cells(program: ProgramValues, name: str) -> Interval | None:
    """The range of the cell that ends in a name: ``head``, ``shore.head`` (a member of a variable) or ``->head``."""
    if name.startswith("->"):
        found: list[Cell] = [
            cell
            for cell in program.summaries
            if isinstance(cell, FieldCell) and cell.path == tuple(name[2:].split("."))
        ]
    else:
        root, *path = name.split(".")
        found = [
            cell
            for cell in program.summaries
            if isinstance(cell, VariableCell)
            and re.search(rf"(^|:){root}(@|$)", cell.variable)
            and cell.path == tuple("." + step if step != "[]" else step for step in path)
        ]
    assert len(found) == 1, (name, list(program.summaries))
    return program.value(found[0])


def solved(text: str, **options: object) -> tuple[TypedUnit, ProgramValues]:
    unit = lower_text(INTS + text, "ILP32")
    assert not unit.notices
    program = summarise(
        unit.functions,
        unit.objects,
        lambda cell: True,
        structs=unit.types.structs,
        **options,  # type: ignore[arg-type]
    )
    return unit, program


WRAPS = {
    "reset after": ("head++; if (head >= 12) head = 0;", 11),
    "reset on equal": ("if (++head == 12) head = 0;", 11),
    "old value tested": ("if (head++ == 11) head = 0;", 11),
    "modulo": ("head = (head + 1) % 12;", 11),
    "mask": ("head = (head + 1) & 15;", 15),
    "choice": ("head = head == 11 ? 0 : head + 1;", 11),
    "subtract": ("head += 1; if (head >= 12) head -= 12;", 11),
    "down": ("if (head == 0) head = 12; head--;", 11),
    "copy": ("uint8_t next = head + 1; if (next == 12) next = 0; head = next;", 11),
    "free running": ("head++;", 255),
    "late reset": ("head++; if (head > 12) head = 0;", 12),
}


@pytest.mark.parametrize("wrap", WRAPS, ids=lambda name: name.replace(" ", "-"))
@pytest.mark.parametrize("form", ("static", "pointer", "element"))
def test_the_range_of_an_index_is_what_its_wrap_leaves(wrap: str, form: str) -> None:
    code, high = WRAPS[wrap]
    if form == "static":
        text = f"static uint8_t head; void put(void) {{ {code} }}"
        name = "head"
    elif form == "pointer":
        code = re.sub(r"\bhead\b", "q->head", code)
        text = f"struct q {{ uint8_t head; }}; static struct q shore; void put(struct q *q) {{ {code} }}"
        text += "void put_shore(void) { put(&shore); }"
        name = "->head"
    else:
        code = re.sub(r"\bhead\b", "lines[i].head", code)
        text = f"struct q {{ uint8_t head; }}; static struct q lines[3]; void put(int i) {{ {code} }}"
        name = "lines.[].head"
    _, program = solved(text)
    assert cells(program, name) == Interval(0, high, 1)


def test_a_subscript_is_bounded_inside_the_function_by_the_inductive_range() -> None:
    unit, program = solved(
        "static uint8_t head; static int log_[12]; void put(int v) { log_[head] = v; if (++head == 12) head = 0; }"
    )
    values = program.of(unit.functions[0])
    view = values.before(0, 0)
    assert view is not None
    assert view.cells() == {}
    head = next(variable for variable in unit.functions[0].variables if variable.name == "head")
    assert values.engine.places.summaries.get(VariableCell(head.identity)) == Interval(0, 11, 1)


HALVES = """
static uint8_t head; static int log_[12];
static void advance(void) { head++; }
static void wrap(void) { if (head >= 12) head = 0; }
static int peek(void) { return log_[head]; }
void put(int v) { log_[head] = v; advance(); %s wrap(); }
"""


def test_helpers_that_do_half_of_an_advance_are_joined_in_their_caller() -> None:
    _, program = solved(HALVES % "")
    assert cells(program, "head") == Interval(0, 11, 1)


def test_a_helper_called_in_between_is_analysed_with_what_it_then_sees() -> None:
    unit, program = solved(HALVES % "peek();")
    assert cells(program, "head") == Interval(0, 11, 1)
    peek = next(function for function in unit.functions if function.name == "peek")
    values = program.of(peek)
    head = next(variable for variable in peek.variables if variable.name == "head")
    assert values.engine.places.summaries.get(VariableCell(head.identity)) == Interval(0, 12, 1)


def test_unknown_code_that_is_called_in_between_may_call_back() -> None:
    _, program = solved("void told(void);" + HALVES % "told();")
    assert cells(program, "head") == Interval(0, 255, 1)


def test_known_code_that_is_too_large_to_run_in_place_keeps_what_it_sees_to_itself() -> None:
    big = " ".join(f"if (head == {k}) total += {k};" for k in range(40))
    text = "static int total;" + HALVES % "told();"
    text = text.replace("static void wrap", f"static void told(void) {{ {big} log_[head] = 0; }} static void wrap")
    unit, program = solved(text)
    assert cells(program, "head") == Interval(0, 11, 1)
    told = next(function for function in unit.functions if function.name == "told")
    head = next(variable for variable in told.variables if variable.name == "head")
    assert program.of(told).engine.places.summaries.get(VariableCell(head.identity)) == Interval(0, 12, 1)


def test_an_interrupt_sees_every_store_and_others_do_not() -> None:
    text = "static uint8_t head, seen; void put(void) { head++; if (head >= 12) head = 0; } "
    text += "void isr(void) { seen = head; }"
    _, program = solved(text, shared=lambda cell: True, interrupts=lambda function: function.name == "isr")
    assert cells(program, "head") == Interval(0, 11, 1)
    assert cells(program, "seen") == Interval(0, 12, 1)


def test_what_an_interrupt_stores_changes_at_any_moment_elsewhere() -> None:
    text = "static uint8_t head; int put(void) { head = 3; return head; } void isr(void) { head = 7; }"
    unit, program = solved(text, interrupts=lambda function: function.name == "isr")
    assert program.of(unit.functions[0]).returned == Interval(0, 7, 1)


def test_a_volatile_index_needs_to_be_steady() -> None:
    text = "static volatile uint8_t head; void put(void) { head++; if (head >= 12) head = 0; }"
    _, program = solved(text)
    assert cells(program, "head") == Interval(0, 255, 1)
    _, program = solved(text, steady=lambda cell: True)
    assert cells(program, "head") == Interval(0, 11, 1)


def test_a_foreign_store_is_seen_between_two_statements() -> None:
    text = "static uint8_t head; int put(void) { head = 3; return head; } void isr(void) { head = 7; }"
    unit, program = solved(text, foreign=lambda cell: True)
    assert program.of(unit.functions[0]).returned == Interval(0, 7, 1)


def test_initial_values_count() -> None:
    text = "static uint8_t head = 40; static const uint8_t steps[3] = {2, 4, 8}; static uint8_t some[4] = {5}; "
    _, program = solved(text + "int f(int i) { return head + steps[i] + some[i]; }")
    assert cells(program, "head") == Interval(40, 40, 0)
    assert cells(program, "steps.[]") == Interval(2, 8, 2)
    assert cells(program, "some.[]") == Interval(0, 5, 5)


def test_what_is_handed_to_unknown_code_can_hold_anything() -> None:
    text = "struct q { uint8_t head; }; static struct q shore; void setup(struct q *q); "
    text += "void start(void) { setup(&shore); } void put(void) { shore.head = (shore.head + 1) % 12; }"
    unit, program = solved(text)
    shore = unit.objects[0].variable.identity
    assert program.value(VariableCell(shore, (".head",))) is None
    text = text.replace("void setup(struct q *q);", "void setup(struct q *q) { q->head = 2; }")
    unit, program = solved(text)
    assert program.value(VariableCell(shore, (".head",))) == Interval(0, 11, 1)


def test_a_store_through_a_pointer_to_an_integer_counts_for_what_it_may_reach() -> None:
    text = "static uint16_t level; static uint16_t other; void set(uint16_t *p) { *p = 500; } "
    _, program = solved(text + "void f(void) { set(&level); other = 3; }")
    assert cells(program, "level") == Interval(0, 500, 500)
    assert cells(program, "other") == Interval(0, 3, 3)


def test_a_buffer_of_bytes_does_not_touch_the_indices_beside_it() -> None:
    text = "struct q { uint8_t *slots; uint8_t head; }; static uint8_t room[12]; static struct q shore; "
    text += "void put(struct q *q, uint8_t v) { q->slots[q->head] = v; q->head++; if (q->head == 12) q->head = 0; } "
    text += "void f(uint8_t v) { shore.slots = room; put(&shore, v); }"
    _, program = solved(text)
    assert cells(program, "->head") == Interval(0, 11, 1)
    exposed = text + "void clear(void) { uint8_t *raw = (uint8_t *)&shore; raw[0] = 77; }"
    _, program = solved(exposed)
    assert cells(program, "->head") != Interval(0, 11, 1)


def test_a_union_member_is_not_followed() -> None:
    text = "union u { uint8_t head; uint32_t raw; }; static union u shore; "
    unit, program = solved(text + "int f(void) { shore.head = 3; shore.raw = 0x1234; return shore.head; }")
    assert program.of(unit.functions[0]).returned == Interval(0, 255, 1)


def test_structure_copies_carry_their_members() -> None:
    text = "struct q { uint8_t head; uint8_t tail; }; static struct q shore, spare; "
    text += "void f(void) { shore.head = 5; spare = shore; } void g(void) { struct q fresh = {9, 3}; shore = fresh; }"
    _, program = solved(text)
    assert cells(program, "spare.head") == Interval(0, 5, 5)
    assert cells(program, "shore.head") == Interval(0, 9, 1)
    assert cells(program, "shore.tail") == Interval(0, 3, 3)


def test_library_calls_write_where_their_contract_says() -> None:
    text = "void *memset(void *, int, unsigned); struct q { uint8_t head; uint8_t tail; }; static struct q shore; "
    text += "void reset(struct q *q) { memset(q, 0, sizeof *q); } void f(void) { reset(&shore); shore.head = 5; } "
    _, program = solved(text)
    assert cells(program, "shore.head") == Interval(0, 5, 5)
    _, program = solved(text.replace("memset(q, 0,", "memset(q, 1,"))
    assert cells(program, "shore.head") == Interval(0, 255, 1)


def test_parameters_of_hidden_functions_have_their_callers_values() -> None:
    big = " ".join(f"if (n == {k}) last += {k};" for k in range(40))
    text = f"static int last; static void keep(uint8_t n) {{ {big} last = n; }} "
    unit, program = solved(text + "void f(void) { keep(3); } void g(void) { keep(7); }")
    keep = next(function for function in unit.functions if function.name == "keep")
    start = program.of(keep).before(0, 0)
    assert start is not None
    assert start.read(VariablePlace(keep.parameters[0])) == Interval(3, 7, 4)


def test_a_function_that_nobody_seen_calls_counts_for_nothing_if_it_is_static() -> None:
    text = "static uint8_t head; static void lost(void) { head = 200; } void put(void) { head = (head + 1) % 12; }"
    _, program = solved(text)
    assert cells(program, "head") == Interval(0, 11, 1)
    text += " void (*hook)(void) = lost;"
    _, program = solved(text)
    assert cells(program, "head") == Interval(0, 200, 1)


def test_the_state_of_a_machine_has_the_hull_of_its_states() -> None:
    text = "enum s { IDLE, PRIME = 4, FEED = 8 }; static enum s state; "
    text += "void step(int go) { switch (state) { case IDLE: if (go) state = PRIME; break; "
    _, program = solved(text + "case PRIME: state = FEED; break; default: state = IDLE; } }")
    assert cells(program, "state") == Interval(0, 8, 4)


def test_a_member_whose_address_is_taken_in_one_object_can_be_stored_into_through_that_pointer_in_all() -> None:
    unit, program = solved(
        "struct bin { unsigned *link; unsigned mass; }; struct bin hopper = {&hopper.mass, 8};"
        "struct bin *const at = &hopper; void fill(unsigned more) { hopper.link[0] = more; }"
    )
    struct = next(name for name, layout in unit.types.structs.items() if layout.field("mass"))
    anything = Interval(0, 0xFFFFFFFF, 1)
    assert program.value(FieldCell(struct, ("mass",))) == anything
    assert program.value(VariableCell("hopper", (".mass",))) == anything


def test_a_member_of_a_nested_structure_has_one_range_under_all_its_names() -> None:
    unit, program = solved(
        "struct bin { struct { unsigned row[4]; } in; }; struct bin hopper; struct bin *const at = &hopper;"
        "void fill(unsigned slot) { hopper.in.row[slot & 3] = 9; }"
    )
    for name, layout in unit.types.structs.items():
        path = ("in", "row", "[]") if layout.field("in") else ("row", "[]")
        assert program.value(FieldCell(name, path)) == Interval(0, 9, 9)


HELPER = """
struct bin { unsigned mass; unsigned row[4]; };
static struct bin hopper, spare;
static unsigned level;
static unsigned even(struct bin *b, unsigned n) {
    %s
    return n ? even(b, n - 1) : level;
}
void fill(void) { %s = 9; level = even(&spare, 4); }
"""


@pytest.mark.parametrize(
    "body, place",
    (
        ("switch (3) { case 5: hopper.row[3] = 1; }", "hopper.row[3]"),
        ("switch (3) { case 5: level = 1; }", "level"),
        ("b->mass = 5;", "hopper.mass"),
        ("if (n == 2) b->mass = 5;", "hopper.mass"),
        ("if (!n) return 1; level = 3;", "level"),
        ("if (level < 2) return 1; switch (3) { case 5: level = 1; }", "level"),
    ),
)
def test_what_a_callee_only_seems_to_store_into_keeps_what_its_caller_left_there(body: str, place: str) -> None:
    unit, program = solved(HELPER % (body, place))
    cell = VariableCell(
        next(item.variable.identity for item in unit.objects if item.variable.name == place.split(".")[0]),
        ((".mass",) if "mass" in place else (".row", "[]") if "row" in place else ()),
    )
    found = program.value(cell)
    assert found is not None and found.high >= 9


def test_bytes_of_different_types_behind_pointers_are_told_apart() -> None:
    _, program = solved(
        'static const char *const text = "\\x81"; _Bool on; _Bool *const link = &on; int seen;'
        "void look(int i) { if (*link) seen = text[i & 1]; }"
    )
    assert program.value(VariableCell("seen")) == Interval(-128, 127, 1)


@pytest.mark.parametrize("where", ("lasting", "here"))
def test_an_object_seen_as_the_other_sign_is_converted(where: str) -> None:
    _, program = solved(
        f"int lasting; unsigned seen; void look(void) {{ int here; {where} = -1; seen = *(unsigned *)&{where}; }}"
    )
    assert program.value(VariableCell("seen")) == Interval(0, 0xFFFFFFFF, 0xFFFFFFFF)


def test_a_store_as_the_other_sign_is_converted() -> None:
    _, program = solved("int level; void put(void) { *(unsigned *)&level = 0xFFFFFFFEu; }")
    assert program.value(VariableCell("level")) == Interval(-2, 0, 2)
