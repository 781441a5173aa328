"""How a state can be stored: one machine stored by every idiom that firmware uses has the same graph."""

import re
from pathlib import Path

import pytest
from tests.marks import machine_in, steps

HEAD = (
    "enum gate { SHUT, OPENING, OPEN };\nint asked(void); int at_end(void); int left_alone(void); void move(int way);\n"
)
STEPS = {("SHUT", "OPENING"), ("OPENING", "OPEN"), ("OPENING", "SHUT"), ("OPEN", "SHUT")}

FORMS = {
    "directly": """
        static enum gate gate;
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) gate = OPENING; break;
            case OPENING: if (at_end()) gate = OPEN; else if (left_alone()) gate = SHUT; break;
            case OPEN: if (left_alone()) gate = SHUT; break;
            }
        }
    """,
    "through a macro": """
        static enum gate gate;
        #define GO(to) do { move(to); gate = (to); } while (0)
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) GO(OPENING); break;
            case OPENING: if (at_end()) GO(OPEN); else if (left_alone()) GO(SHUT); break;
            case OPEN: if (left_alone()) GO(SHUT); break;
            }
        }
    """,
    "through a static setter": """
        static enum gate gate;
        static void set_gate(enum gate to) { move(to); gate = to; }
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) set_gate(OPENING); break;
            case OPENING: if (at_end()) set_gate(OPEN); else if (left_alone()) set_gate(SHUT); break;
            case OPEN: if (left_alone()) set_gate(SHUT); break;
            }
        }
    """,
    "through a setter defined later": """
        static enum gate gate;
        static void set_gate(enum gate to);
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) set_gate(OPENING); break;
            case OPENING: if (at_end()) set_gate(OPEN); else if (left_alone()) set_gate(SHUT); break;
            case OPEN: if (left_alone()) set_gate(SHUT); break;
            }
        }
        static void set_gate(enum gate to) { move(to); gate = to; }
    """,
    "through a setter of an object": """
        struct feeder { enum gate gate; int moves; };
        static void set_gate(struct feeder *which, enum gate to) { which->gate = to; which->moves++; }
        void step(struct feeder *f)
        {
            switch (f->gate) {
            case SHUT: if (asked()) set_gate(f, OPENING); break;
            case OPENING: if (at_end()) set_gate(f, OPEN); else if (left_alone()) set_gate(f, SHUT); break;
            case OPEN: if (left_alone()) set_gate(f, SHUT); break;
            }
        }
    """,
    "through a setter that stores only what is new": """
        static enum gate gate;
        static void set_gate(enum gate to) { if (gate != to) { move(to); gate = to; } }
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) set_gate(OPENING); break;
            case OPENING: if (at_end()) set_gate(OPEN); else if (left_alone()) set_gate(SHUT); break;
            case OPEN: if (left_alone()) set_gate(SHUT); break;
            }
        }
    """,
    "through a setter of a setter": """
        static enum gate gate;
        static void put(enum gate to) { gate = to; }
        static void set_gate(enum gate to) { move(to); put(to); }
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) set_gate(OPENING); break;
            case OPENING: if (at_end()) set_gate(OPEN); else if (left_alone()) set_gate(SHUT); break;
            case OPEN: if (left_alone()) set_gate(SHUT); break;
            }
        }
    """,
    "by functions for the cases": """
        static enum gate gate;
        static void shut(void) { if (asked()) gate = OPENING; }
        static void opening(void) { if (at_end()) gate = OPEN; else if (left_alone()) gate = SHUT; }
        static void open(void) { if (left_alone()) gate = SHUT; }
        void step(void)
        {
            switch (gate) {
            case SHUT: shut(); break;
            case OPENING: opening(); break;
            case OPEN: open(); break;
            }
        }
    """,
    "as a function's result": """
        static enum gate gate;
        static enum gate after(enum gate now)
        {
            switch (now) {
            case SHUT: if (asked()) return OPENING; break;
            case OPENING: if (at_end()) return OPEN; if (left_alone()) return SHUT; break;
            case OPEN: if (left_alone()) return SHUT; break;
            }
            return now;
        }
        void step(void) { gate = after(gate); }
    """,
    "as a function's result, in an object": """
        struct feeder { enum gate gate; };
        static enum gate after(enum gate now, int event)
        {
            switch (now) {
            case SHUT: return event == 1 ? OPENING : SHUT;
            case OPENING: return event == 2 ? OPEN : event == 3 ? SHUT : OPENING;
            case OPEN: return event == 3 ? SHUT : OPEN;
            }
            return now;
        }
        void step(struct feeder *f, int event) { f->gate = after(f->gate, event); }
    """,
    "after the switch": """
        static enum gate gate;
        void step(void)
        {
            enum gate next = gate;
            switch (gate) {
            case SHUT: if (asked()) next = OPENING; break;
            case OPENING: if (at_end()) next = OPEN; else if (left_alone()) next = SHUT; break;
            case OPEN: if (left_alone()) next = SHUT; break;
            }
            if (next != gate) { move(next); gate = next; }
        }
    """,
    "after the switch, if there is a next state": """
        static enum gate gate;
        void step(void)
        {
            int next = -1;
            switch (gate) {
            case SHUT: if (asked()) next = OPENING; break;
            case OPENING: if (at_end()) next = OPEN; else if (left_alone()) next = SHUT; break;
            case OPEN: if (left_alone()) next = SHUT; break;
            }
            if (next >= 0) gate = (enum gate)next;
        }
    """,
    "at the next call": """
        static enum gate gate, next;
        void step(void)
        {
            gate = next;
            switch (gate) {
            case SHUT: if (asked()) next = OPENING; break;
            case OPENING: if (at_end()) next = OPEN; else if (left_alone()) next = SHUT; break;
            case OPEN: if (left_alone()) next = SHUT; break;
            }
        }
    """,
    "from a copy": """
        struct feeder { enum gate gate; };
        void step(struct feeder *f)
        {
            enum gate now = f->gate;
            switch (now) {
            case SHUT: if (asked()) f->gate = OPENING; break;
            case OPENING: if (at_end()) f->gate = OPEN; else if (left_alone()) f->gate = SHUT; break;
            case OPEN: if (left_alone()) f->gate = SHUT; break;
            }
        }
    """,
    "from a copy that is written back": """
        struct feeder { enum gate gate; };
        void step(struct feeder *f)
        {
            enum gate now = f->gate;
            switch (now) {
            case SHUT: if (asked()) now = OPENING; break;
            case OPENING: if (at_end()) now = OPEN; else if (left_alone()) now = SHUT; break;
            case OPEN: if (left_alone()) now = SHUT; break;
            }
            f->gate = now;
        }
    """,
    "by steps": """
        static enum gate gate;
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) gate++; break;
            case OPENING: if (at_end()) ++gate; else if (left_alone()) gate--; break;
            case OPEN: if (left_alone()) gate -= 2; break;
            }
        }
    """,
    "by choices": """
        static enum gate gate;
        void step(int full, int leave)
        {
            switch (gate) {
            case SHUT: gate = full ? OPENING : gate; break;
            case OPENING: gate = full ? OPEN : leave ? SHUT : gate; break;
            case OPEN: gate = leave ? SHUT : gate; break;
            }
        }
    """,
    "by tests in place of cases where one case is no machine alone": """
        static enum gate gate;
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) gate = OPENING; break;
            default: break;
            }
            if (gate == OPEN) {
                if (left_alone()) gate = SHUT;
            } else if (gate == OPENING) {
                if (at_end()) gate = OPEN; else if (left_alone()) gate = SHUT;
            }
        }
    """,
    "with the event outside": """
        static enum gate gate;
        enum event { ASKED, END, LEFT };
        void step(enum event event)
        {
            switch (event) {
            case ASKED:
                switch (gate) { case SHUT: gate = OPENING; break; default: break; }
                break;
            case END:
                switch (gate) { case OPENING: gate = OPEN; break; default: break; }
                break;
            case LEFT:
                switch (gate) { case OPENING: case OPEN: gate = SHUT; break; default: break; }
                break;
            }
        }
    """,
    "by others through a getter and a setter": """
        static enum gate gate;
        enum gate gate_now(void) { return gate; }
        void set_gate(enum gate to) { gate = to; }
        void step(void)
        {
            switch (gate_now()) {
            case SHUT: if (asked()) set_gate(OPENING); break;
            case OPENING: if (at_end()) set_gate(OPEN); else if (left_alone()) set_gate(SHUT); break;
            case OPEN: if (left_alone()) set_gate(SHUT); break;
            }
        }
    """,
    "in an object whose address is handed over": """
        struct feeder { enum gate gate; };
        static struct feeder hopper;
        static void enter(struct feeder *which, enum gate to) { which->gate = to; }
        void step(void)
        {
            switch (hopper.gate) {
            case SHUT: if (asked()) enter(&hopper, OPENING); break;
            case OPENING: if (at_end()) enter(&hopper, OPEN); else if (left_alone()) enter(&hopper, SHUT); break;
            case OPEN: if (left_alone()) enter(&hopper, SHUT); break;
            }
        }
    """,
    "in an object behind a pointer to anything": """
        struct feeder { enum gate gate; };
        static void opened(struct feeder *f) { f->gate = OPEN; }
        static void closed(struct feeder *f) { f->gate = SHUT; }
        void step(void *argument)
        {
            struct feeder *f = (struct feeder *)argument;
            switch (f->gate) {
            case SHUT: if (asked()) f->gate = OPENING; break;
            case OPENING: if (at_end()) opened(f); else if (left_alone()) closed(f); break;
            case OPEN: if (left_alone()) closed(f); break;
            }
        }
    """,
    "after returns": """
        static enum gate gate;
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) gate = OPENING; return;
            case OPENING: break;
            default: break;
            }
            if (gate != OPENING) {
                if (gate == OPEN && left_alone()) gate = SHUT;
                return;
            }
            if (at_end()) gate = OPEN; else if (left_alone()) gate = SHUT;
        }
    """,
    "again and again in one call": """
        static enum gate gate;
        void step(void)
        {
            int again;
            do {
                again = 0;
                switch (gate) {
                case SHUT: if (asked()) { gate = OPENING; again = 1; } break;
                case OPENING: if (at_end()) { gate = OPEN; again = 1; } else if (left_alone()) gate = SHUT; break;
                case OPEN: if (left_alone()) gate = SHUT; break;
                }
            } while (again);
        }
    """,
    "with gotos": """
        static enum gate gate;
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) { gate = OPENING; goto out; } break;
            case OPENING: if (at_end()) { gate = OPEN; goto out; } if (left_alone()) goto shut; break;
            case OPEN: if (left_alone()) goto shut; break;
            }
            return;
        shut:
            gate = SHUT;
        out:
            move(1);
        }
    """,
}


@pytest.mark.parametrize("form", FORMS)
def test_the_graph_is_the_same_however_the_state_is_stored(form: str, tmp_path: Path) -> None:
    machine = machine_in(tmp_path, HEAD + FORMS[form])
    pairs = {pair for pair in steps(machine) if pair[0] != pair[1]}
    if form == "by tests in place of cases where one case is no machine alone":
        pairs -= {("SHUT", "OPEN")}  # both tests may follow the case in one call
    assert pairs == STEPS
    assert {state.name: state.value for state in machine.states} == {"SHUT": 0, "OPENING": 1, "OPEN": 2}
    assert machine.initial == ("SHUT",)


def test_a_setter_in_another_file_stores_for_its_callers(tmp_path: Path) -> None:
    machine = machine_in(
        tmp_path,
        HEAD
        + """
        enum gate gate;
        void set_gate(enum gate to);
        void step(void)
        {
            switch (gate) {
            case SHUT: if (asked()) set_gate(OPENING); break;
            case OPENING: if (at_end()) set_gate(OPEN); else if (left_alone()) set_gate(SHUT); break;
            case OPEN: if (left_alone()) set_gate(SHUT); break;
            }
        }
        """,
        gate=HEAD + "extern enum gate gate; void set_gate(enum gate to) { move(to); gate = to; }",
    )
    assert steps(machine) >= STEPS
    assert {store.through for store in machine.stores} == {"set_gate"}
    assert sorted({name for store in machine.stores for name, _ in store.values or ()}) == ["OPEN", "OPENING", "SHUT"]


def test_guards_are_the_conditions_as_written(tmp_path: Path) -> None:
    machine = machine_in(tmp_path, HEAD + FORMS["directly"])
    assert {(step.source, step.target, step.guard) for step in machine.transitions} == {
        ("SHUT", "OPENING", "asked()"),
        ("OPENING", "OPEN", "at_end()"),
        ("OPENING", "SHUT", "!at_end() && left_alone()"),
        ("OPEN", "SHUT", "left_alone()"),
    }


def test_a_store_of_an_unknown_value_leaves_the_machine_incomplete(tmp_path: Path) -> None:
    text = HEAD + FORMS["directly"] + "\n        int saved(void); void wake(void) { gate = (enum gate)saved(); }"
    machine = machine_in(tmp_path, text)
    assert steps(machine) == STEPS
    assert not machine.complete
    assert "saved" in machine.why_incomplete[0]


def test_a_setter_that_is_handed_an_unknown_value_leaves_the_machine_incomplete(tmp_path: Path) -> None:
    text = FORMS["through a static setter"] + "\n        int saved(void); void wake(void) { set_gate(saved()); }"
    machine = machine_in(tmp_path, HEAD + text)
    assert steps(machine) == STEPS
    assert [re.sub(r"\d+", "N", why) for why in machine.why_incomplete] == ["wake hands saved() to set_gate (line N)"]


def test_a_setter_that_is_handed_a_choice_of_constants_stores_just_these(tmp_path: Path) -> None:
    machine = machine_in(
        tmp_path,
        HEAD
        + """
        static enum gate gate;
        static void set_gate(enum gate to) { gate = to; }
        void step(int ev)
        {
            switch (gate) {
            case SHUT: set_gate(ev ? OPENING : SHUT); break;
            case OPENING: set_gate(at_end() ? OPEN : left_alone() ? SHUT : OPENING); break;
            case OPEN: set_gate(left_alone() ? SHUT : OPEN); break;
            }
        }
        """,
    )
    assert {pair for pair in steps(machine) if pair[0] != pair[1]} == STEPS
    assert machine.complete
    assert {store.through for store in machine.stores} == {"set_gate"}


def test_a_setter_of_another_file_may_be_handed_plain_numbers(tmp_path: Path) -> None:
    machine = machine_in(
        tmp_path,
        "int gate; int asked(void); void set_gate(int to);"
        "void step(void) { switch (gate) { case 0: if (asked()) set_gate(4); break; case 4: set_gate(0); break; } }",
        gate="extern int gate; void set_gate(int to) { gate = to; }",
    )
    assert steps(machine) == {("0", "4"), ("4", "0")}
    assert machine.complete
