"""Machines that are data: the graph is the table's, a hole is no step, and a translation is no machine."""

from pathlib import Path

import pytest
from tests.marks import machine_in, machines_in, steps

HEAD = """
    enum gate { SHUT, OPENING, OPEN, STUCK, GATES };
    enum event { EV_ASK, EV_END, EV_JAM, EVENTS };
    static enum gate gate = SHUT;
    void motor_on(void); void motor_off(void); void horn(void); int calm(void); int allowed(void);
"""
STEPS = {("SHUT", "OPENING"), ("OPENING", "OPEN"), ("OPENING", "STUCK"), ("OPEN", "SHUT")}
EVENTS = {
    ("SHUT", "event == EV_ASK"),
    ("OPENING", "event == EV_END"),
    ("OPENING", "event == EV_JAM"),
    ("OPEN", "event == EV_ASK"),
}
CELL = "struct cell { void (*action)(void); enum gate next; };"
CELLS = """
    static const struct cell table[GATES][EVENTS] = {
        [SHUT] = { [EV_ASK] = { motor_on, OPENING } },
        [OPENING] = { [EV_END] = { motor_off, OPEN }, [EV_JAM] = { horn, STUCK } },
        [OPEN] = { [EV_ASK] = { 0, SHUT } },
    };
"""
ROW = "struct row { enum gate from; enum event event; int (*guard)(void); void (*action)(void); enum gate to; };"
ROWS = """
    static const struct row rows[] = {
        { SHUT, EV_ASK, calm, motor_on, OPENING },
        { OPENING, EV_END, 0, motor_off, OPEN },
        { .from = OPENING, .event = EV_JAM, .to = STUCK, .action = horn },
        { OPEN, EV_ASK, allowed, 0, SHUT },
    };
"""

# name: the code after HEAD
FORMS = {
    "cells": CELL
    + CELLS
    + """
        void handle(enum event event) {
            if (table[gate][event].action) table[gate][event].action();
            gate = table[gate][event].next;
        }
    """,
    "a pointer to the cell": CELL
    + CELLS
    + """
        void handle(enum event event) {
            const struct cell *cell = &table[gate][event];
            if (cell->action == 0 && gate != OPEN) return;
            if (cell->action) cell->action();
            gate = cell->next;
        }
    """,
    "a pointer to the line": CELL
    + CELLS
    + """
        void handle(enum event event) {
            const struct cell *line = table[gate];
            line[event].action();
            gate = line[event].next;
        }
    """,
    "event first": CELL
    + """
        static const struct cell table[EVENTS][GATES] = {
            { { motor_on, OPENING }, [OPEN] = { 0, SHUT } },
            { [OPENING] = { motor_off, OPEN } },
            { [OPENING] = { horn, STUCK } },
        };
        void handle(enum event event) { table[event][gate].action(); gate = table[event][gate].next; }
    """,
    "numbers with a mark for no step": """
        #define STAY 255
        static const unsigned char next_gate[GATES][EVENTS] = {
            { OPENING, STAY, STAY }, { STAY, OPEN, STUCK }, { SHUT, STAY, STAY }, { STAY, STAY, STAY },
        };
        void handle(enum event event) {
            unsigned char next = next_gate[gate][event];
            if (next != STAY) gate = next;
        }
    """,
    "rows in a loop": ROW
    + ROWS
    + """
        void handle(enum event event) {
            for (unsigned i = 0; i < sizeof rows / sizeof rows[0]; i++) {
                if (rows[i].from == gate && rows[i].event == event) {
                    if (rows[i].guard && !rows[i].guard()) continue;
                    if (rows[i].action) rows[i].action();
                    gate = rows[i].to;
                    return;
                }
            }
        }
    """,
    "rows by a pointer": ROW
    + ROWS
    + """
        void handle(enum event event) {
            for (const struct row *row = rows; row < rows + 4; row++) {
                if (row->from != gate || row->event != event) continue;
                if (row->guard != 0 && row->guard() == 0) continue;
                row->action();
                gate = row->to;
                break;
            }
        }
    """,
    "rows that a function finds": ROW
    + ROWS
    + """
        static const struct row *find(enum gate now, enum event what) {
            for (int i = 0; i < 4; i++) { if (rows[i].from == now && rows[i].event == what) return &rows[i]; }
            return 0;
        }
        void handle(enum event event) {
            const struct row *row = find(gate, event);
            if (row && (!row->guard || row->guard())) { row->action(); gate = row->to; }
        }
    """,
    "rows with an end mark": ROW.replace("enum gate from", "int from")
    + ROWS.replace("SHUT },\n    };", "SHUT },\n { -1 } };")
    + """
        void handle(enum event event) {
            for (const struct row *row = rows; row->from != -1; row++) {
                if (row->from == gate && row->event == event) { gate = row->to; break; }
            }
        }
    """,
}


@pytest.mark.parametrize("form", FORMS)
def test_the_graph_is_the_tables(form: str, tmp_path: Path) -> None:
    machine = machine_in(tmp_path, HEAD + FORMS[form])
    assert steps(machine) == STEPS
    assert {(step.source, step.event) for step in machine.transitions} == EVENTS
    plain = "row list" if "rows" in form else "table"
    assert machine.form == ("if-chain and table" if form == "a pointer to the cell" else plain)
    assert machine.initial == ("SHUT",)
    assert machine.complete


@pytest.mark.parametrize("form", ["cells", "a pointer to the cell", "rows in a loop", "rows by a pointer"])
def test_a_cells_action_is_the_steps(form: str, tmp_path: Path) -> None:
    machine = machine_in(tmp_path, HEAD + FORMS[form])
    assert {(step.target, step.actions) for step in machine.transitions} == {
        ("OPENING", ("motor_on",)),
        ("OPEN", ("motor_off",)),
        ("STUCK", ("horn",)),
        ("SHUT", ()),
    }


@pytest.mark.parametrize("form", ["rows in a loop", "rows by a pointer", "rows that a function finds"])
def test_a_rows_guard_is_the_steps(form: str, tmp_path: Path) -> None:
    machine = machine_in(tmp_path, HEAD + FORMS[form])
    assert {(step.target, step.condition) for step in machine.transitions} == {
        ("OPENING", "calm()"),
        ("OPEN", ""),
        ("STUCK", ""),
        ("SHUT", "allowed()"),
    }


def test_a_step_stands_where_its_cell_does(tmp_path: Path) -> None:
    machine = machine_in(tmp_path, HEAD + FORMS["rows in a loop"])
    assert [step.where.spelling for step in machine.transitions] == ["OPENING", "OPEN", "STUCK", "SHUT"]


LOOK_ALIKES = {
    "a translation": "static const unsigned char swap[4] = { 3, 2, 1, 0 }; static unsigned char code;"
    "void turn(void) { code = swap[code]; }",
    "a table of settings": "static const unsigned char speed[4] = { 3, 20, 100, 200 }; static unsigned char"
    " now; int pot(void);"
    "void set(void) { now = speed[pot()]; }",
    "a check sum": "static const unsigned char t[4] = { 7, 9, 1, 3 }; static unsigned char crc;"
    "void add(unsigned char b) { crc = t[(crc ^ b) & 3]; }",
    "a list of limits": "struct lim { int id; int max; }; static const struct lim lims[] = { { 1, 5 }, { 2, 9 } };"
    "static int limit; void pick(int id) { for (int i = 0; i < 2; i++) if (lims[i].id == id) limit = lims[i].max; }",
}


@pytest.mark.parametrize("what", LOOK_ALIKES)
def test_what_looks_like_a_table_and_is_none(what: str, tmp_path: Path) -> None:
    assert [machine.variable for machine in machines_in(tmp_path, LOOK_ALIKES[what])] == []
