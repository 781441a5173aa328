"""Machines whose states are functions: tables of handlers, handlers that return the next state, variables"
" that hold one."""

from pathlib import Path

import pytest
from tests.marks import machine_in, machines_in, steps

HEAD = """
    enum gate { SHUT, OPENING, OPEN, STUCK, GATES };
    int asked(void); int at_end(void); int jammed(void); void motor(int); void horn(void);
"""
STEPS = {("SHUT", "OPENING"), ("OPENING", "OPEN"), ("OPENING", "STUCK"), ("OPEN", "SHUT")}
RETURNING = """
    static enum gate in_shut(void) { if (asked()) { motor(1); return OPENING; } return SHUT; }
    static enum gate in_opening(void) { if (jammed()) return STUCK; return at_end() ? OPEN : OPENING; }
    static enum gate in_open(void) { enum gate next = OPEN; if (asked()) next = SHUT; return next; }
    static enum gate in_stuck(void) { horn(); return STUCK; }
"""
STORING = """
    static enum gate gate = SHUT;
    static void go(enum gate next) { gate = next; }
    static void in_shut(void) { if (asked()) { motor(1); gate = OPENING; } }
    static void in_opening(void) { if (jammed()) go(STUCK); else if (at_end()) go(OPEN); }
    static void in_open(void) { if (asked()) gate = SHUT; }
    static void in_stuck(void) { horn(); }
"""
TABLE = "static enum gate (*const handlers[GATES])(void) = { in_shut, in_opening, in_open, in_stuck };"
VOID_TABLE = """
    static void (*const handlers[GATES])(void) = { [SHUT] = in_shut, in_opening, in_open, [STUCK] = in_stuck };
"""

# name: (the code after HEAD, the form)
TABLES = {
    "the next state is returned": (
        RETURNING + TABLE + "static enum gate gate; void step(void) { gate = handlers[gate](); }",
        "next state returned",
    ),
    "through a local": (
        RETURNING + TABLE + "static enum gate gate; void step(void) { enum gate next = (*handlers[gate])();"
        " gate = next; }",
        "next state returned",
    ),
    "handlers that store": (STORING + VOID_TABLE + "void step(void) { handlers[gate](); }", "table"),
    "a table of structures": (
        STORING
        + "struct entry { const char *name; void (*run)(void); };"
        + 'static const struct entry entries[] = { { "shut", in_shut }, { "opening", in_opening }, {'
        ' "open", in_open },' + ' { "stuck", in_stuck } }; void step(void) { if (gate < GATES) entries[gate].run(); }',
        "table",
    ),
}


@pytest.mark.parametrize("form", TABLES)
def test_the_graph_is_that_of_the_handlers(form: str, tmp_path: Path) -> None:
    text, kind = TABLES[form]
    machine = machine_in(tmp_path, HEAD + text)
    assert {(one, other) for one, other in steps(machine) if one != other} == STEPS
    assert machine.form == kind
    assert machine.initial == ("SHUT",)
    assert machine.complete
    guards = {
        (step.source, step.target): (step.guard, step.function.rsplit(":", 1)[-1]) for step in machine.transitions
    }
    assert guards["SHUT", "OPENING"] == ("asked()", "in_shut")
    assert guards["OPENING", "STUCK"] == ("jammed()", "in_opening")
    assert guards["OPENING", "OPEN"] == ("!jammed() && at_end()", "in_opening")


POINTER_STEPS = {
    ("in_shut", "in_opening"),
    ("in_opening", "in_open"),
    ("in_opening", "in_stuck"),
    ("in_open", "in_shut"),
}
DECLARED = """
    static void in_shut(void); static void in_opening(void); static void in_open(void); static void in_stuck(void);
"""
BODIES = """
    static void in_shut(void) { if (asked()) { motor(1); HERE = in_opening; } }
    static void in_opening(void) { if (jammed()) HERE = in_stuck; else if (at_end()) HERE = in_open; }
    static void in_open(void) { if (asked()) HERE = in_shut; }
    static void in_stuck(void) { horn(); }
"""
POINTERS = {
    "a static variable": (
        DECLARED + "static void (*now)(void) = in_shut;" + BODIES.replace("HERE", "now") + "void step(void) { now(); }",
        "now",
    ),
    "called through the pointer": (
        DECLARED + "static void (*now)(void) = &in_shut;" + BODIES.replace("HERE", "now") + "void step(void)"
        " { (*now)(); }",
        "now",
    ),
    "a member": (
        DECLARED
        + "struct gate_box { int load; void (*now)(void); }; static struct gate_box box = { 0, in_shut };"
        + BODIES.replace("HERE", "box.now")
        + "void step(void) { box.now(); }",
        "struct gate_box.now",
    ),
    "stored by a helper and a setter": (
        DECLARED
        + "static void (*now)(void) = in_shut; static void go(void (*next)(void)) { now = next; }"
        + "static void stuck(void) { horn(); go(in_stuck); }"
        + BODIES.replace("HERE = in_stuck", "stuck()").replace("HERE = in_open;", "go(in_open);").replace("HERE", "now")
        + "void step(void) { now(); }",
        "now",
    ),
}


@pytest.mark.parametrize("form", POINTERS)
def test_a_variable_that_holds_the_handler_is_a_machine(form: str, tmp_path: Path) -> None:
    text, shown = POINTERS[form]
    machine = machine_in(tmp_path, HEAD + text)
    assert steps(machine) == POINTER_STEPS
    assert machine.variable == shown
    assert machine.form == "function pointer"
    assert machine.initial == ("in_shut",)
    guards = {(step.source, step.target): step.guard for step in machine.transitions}
    assert guards["in_shut", "in_opening"] == "asked()"


def test_handlers_that_return_the_next_handler(tmp_path: Path) -> None:
    text = """
        typedef void (*any_fn)(void); typedef any_fn (*state_fn)(void);
        static any_fn in_shut(void); static any_fn in_opening(void); static any_fn in_open(void);
        static any_fn in_shut(void) { return asked() ? (any_fn)in_opening : (any_fn)in_shut; }
        static any_fn in_opening(void) { if (at_end()) return (any_fn)in_open; return (any_fn)in_opening; }
        static any_fn in_open(void) { return (any_fn)in_shut; }
        static state_fn now = in_shut;
        void step(void) { now = (state_fn)now(); }
    """
    machine = machine_in(tmp_path, HEAD + text)
    assert {(one, other) for one, other in steps(machine) if one != other} == {
        ("in_shut", "in_opening"),
        ("in_opening", "in_open"),
        ("in_open", "in_shut"),
    }
    assert machine.form == "next state returned"


LOOK_ALIKES = {
    "a registered callback": "static void (*on_full)(int); void work(int); void other(int);"
    "void listen(void (*f)(int)) { on_full = f; } void a(void) { listen(work); } void b(void) { on_full = other; }"
    "void tick(void) { if (on_full) on_full(1); }",
    "a table of drivers": "void p(void); void q(void); static void (*const write_out[])(void) = { p, q };"
    " static int port;"
    "void pick(int n) { port = n ? 1 : 0; } void out(void) { write_out[port](); }",
    "a loop through functions": "int p(int); int q(int); static int (*const finds[])(int) = { p, q };"
    "int find(int c) { int which; for (which = 0; which < 2; which++) { if (finds[which](c)) break; }"
    " return which; }",
    "commands": "int p(int); int q(int); static int (*const commands[])(int) = { p, q }; static int last;"
    "int run(int c) { last = commands[c & 1](c); return last; }",
}


@pytest.mark.parametrize("what", LOOK_ALIKES)
def test_what_looks_like_handlers_and_is_none(what: str, tmp_path: Path) -> None:
    assert [machine.variable for machine in machines_in(tmp_path, LOOK_ALIKES[what])] == []
