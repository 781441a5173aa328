"""Machines that are dispatched on by comparisons: the graph is that of the code, and look-alikes are no machines."""

from pathlib import Path

import pytest
from tests.marks import machine_in, machines_in, steps

STATES = """
    enum auger_state { AUGER_IDLE, AUGER_SPIN_UP, AUGER_FEED, AUGER_JAM };
    int shore_asks(void); int at_speed(void); int weighed(void); int current(void); void drive(int); void alarm(void);
    static enum auger_state state;
"""
STEPS = {
    ("AUGER_IDLE", "AUGER_SPIN_UP"),
    ("AUGER_SPIN_UP", "AUGER_FEED"),
    ("AUGER_FEED", "AUGER_IDLE"),
    ("AUGER_FEED", "AUGER_JAM"),
}

# name: the code; all have the same graph
LAYOUTS = {
    "else if": """
        void step(void) {
            if (state == AUGER_IDLE) { if (shore_asks()) { drive(1); state = AUGER_SPIN_UP; } }
            else if (state == AUGER_SPIN_UP) { if (at_speed()) state = AUGER_FEED; }
            else if (state == AUGER_FEED) {
                if (current() > 40) state = AUGER_JAM;
                else if (weighed()) { drive(0); state = AUGER_IDLE; }
            }
            else { alarm(); }
        }
    """,
    "one function for each event": """
        void on_request(void) { if (state == AUGER_IDLE) { drive(1); state = AUGER_SPIN_UP; } }
        void on_speed(void) { if (state != AUGER_SPIN_UP) return; state = AUGER_FEED; }
        void on_current(void) { if (AUGER_FEED == state && current() > 40) { state = AUGER_JAM; alarm(); } }
        void on_weight(void) { if (state == AUGER_FEED) { drive(0); state = AUGER_IDLE; } }
    """,
    "a switch here and ifs there": """
        void step(void) {
            switch (state) {
            case AUGER_IDLE: if (shore_asks()) state = AUGER_SPIN_UP; break;
            case AUGER_FEED: if (current() > 40) state = AUGER_JAM; break;
            default: break;
            }
        }
        void on_speed(void) { if (state == AUGER_SPIN_UP) state = AUGER_FEED; }
        void on_weight(void) { if (state == AUGER_FEED) state = AUGER_IDLE; }
    """,
    "event first, then state": """
        enum command { COME, READY, FULL, STUCK };
        void on_event(enum command command) {
            if (command == COME) { if (state == AUGER_IDLE) state = AUGER_SPIN_UP; }
            else if (command == READY) { if (state == AUGER_SPIN_UP) state = AUGER_FEED; }
            else if (command == FULL && state == AUGER_FEED) { state = AUGER_IDLE; }
            else if (command == STUCK && state == AUGER_FEED) { state = AUGER_JAM; }
        }
    """,
    "a copy is compared, a next state committed": """
        void step(void) {
            enum auger_state now = state, next = now;
            if (now == AUGER_IDLE && shore_asks()) next = AUGER_SPIN_UP;
            if (now == AUGER_SPIN_UP && at_speed()) next = AUGER_FEED;
            if (now == AUGER_FEED) { if (weighed()) next = AUGER_IDLE; if (current() > 40) next = AUGER_JAM; }
            state = next;
        }
    """,
    "a setter and a getter": """
        static void go(enum auger_state next) { state = next; }
        static enum auger_state where(void) { return state; }
        void step(void) {
            if (where() == AUGER_IDLE) { if (shore_asks()) go(AUGER_SPIN_UP); return; }
            if (where() == AUGER_SPIN_UP) { if (at_speed()) go(AUGER_FEED); return; }
            if (where() == AUGER_FEED) { if (weighed()) go(AUGER_IDLE); else if (current() > 40) go(AUGER_JAM); }
        }
    """,
}


@pytest.mark.parametrize("layout", LAYOUTS)
def test_the_graph_is_the_same_however_the_comparisons_stand(layout: str, tmp_path: Path) -> None:
    machine = machine_in(tmp_path, STATES + LAYOUTS[layout])
    assert steps(machine) == STEPS
    assert machine.form == ("switch and if-chain" if "switch" in layout else "if-chain")
    assert machine.initial == ("AUGER_IDLE",)
    assert machine.complete


def test_the_last_else_is_the_default_of_a_chain(tmp_path: Path) -> None:
    (dispatch,) = machine_in(tmp_path, STATES + LAYOUTS["else if"]).dispatches
    assert [label.states for label in dispatch.labels] == [("AUGER_IDLE",), ("AUGER_SPIN_UP",), ("AUGER_FEED",)]
    assert dispatch.form == "if-chain"
    assert dispatch.default_does == "calls"
    assert dispatch.default is not None


def test_a_chain_of_plain_numbers_in_a_member_is_a_machine(tmp_path: Path) -> None:
    text = """
        struct gate { unsigned char phase; int ticks; };
        int ready(struct gate *);
        void step(struct gate *g) {
            if (g->phase == 0) { if (ready(g)) g->phase = 1; }
            else if (g->phase == 1) { if (++g->ticks > 9) g->phase = 2; }
            else if (g->phase == 2) { g->phase = 0; }
        }
    """
    machine = machine_in(tmp_path, text)
    assert steps(machine) == {("0", "1"), ("1", "2"), ("2", "0")}
    assert machine.variable == "struct gate.phase"


def test_defined_names_of_a_group_are_states(tmp_path: Path) -> None:
    text = """
        #define HOPPER_SHUT 0
        #define HOPPER_FILLING 4
        #define HOPPER_FULL 8
        static unsigned char hopper_stage = HOPPER_SHUT;
        int level(void);
        void lid(void) { if (hopper_stage == HOPPER_SHUT) hopper_stage = HOPPER_FILLING; }
        void look(void) {
            if (hopper_stage == HOPPER_FILLING && level() > 80) hopper_stage = HOPPER_FULL;
            else if (hopper_stage == HOPPER_FULL && level() < 10) hopper_stage = HOPPER_SHUT;
        }
    """
    machine = machine_in(tmp_path, text)
    assert steps(machine) == {
        ("HOPPER_SHUT", "HOPPER_FILLING"),
        ("HOPPER_FILLING", "HOPPER_FULL"),
        ("HOPPER_FULL", "HOPPER_SHUT"),
    }


def test_two_machines_in_one_function(tmp_path: Path) -> None:
    text = (
        STATES
        + """
        enum lid_state { LID_SHUT, LID_MOVING, LID_OPEN };
        static enum lid_state lid;
        void step(void) {
            if (state == AUGER_IDLE && lid == LID_OPEN) { state = AUGER_SPIN_UP; }
            else if (state == AUGER_SPIN_UP && at_speed()) { state = AUGER_IDLE; lid = LID_MOVING; }
            if (lid == LID_SHUT) lid = LID_MOVING;
            else if (lid == LID_MOVING && weighed()) lid = LID_OPEN;
        }
    """
    )
    found = {machine.variable: machine for machine in machines_in(tmp_path, text)}
    assert set(found) == {"state", "lid"}
    assert steps(found["state"]) == {("AUGER_IDLE", "AUGER_SPIN_UP"), ("AUGER_SPIN_UP", "AUGER_IDLE")}
    assert {("LID_SHUT", "LID_MOVING"), ("LID_MOVING", "LID_OPEN")} <= steps(found["lid"])


def test_a_state_in_a_local_variable_of_a_loop(tmp_path: Path) -> None:
    text = (
        STATES.replace("static enum auger_state state;", "")
        + """
        void run(void) {
            enum auger_state state = AUGER_IDLE;
            for (;;) {
                if (state == AUGER_IDLE) { if (shore_asks()) state = AUGER_SPIN_UP; }
                else if (state == AUGER_SPIN_UP) { if (at_speed()) state = AUGER_FEED; }
                else if (weighed()) { state = AUGER_IDLE; }
            }
        }
    """
    )
    machine = machine_in(tmp_path, text)
    assert steps(machine) == {
        ("AUGER_IDLE", "AUGER_SPIN_UP"),
        ("AUGER_SPIN_UP", "AUGER_FEED"),
        ("AUGER_FEED", "AUGER_IDLE"),
    }


# What looks like a machine and is none: values that are mapped, set once, counted, or only passed on.
LOOK_ALIKES = {
    "a flag": "static int busy; int go(void); void a(void) { if (busy == 0 && go()) busy = 1; } "
    "void b(void) { if (busy == 1) busy = 0; }",
    "a boolean": "#include <stdbool.h>\nstatic bool open_state; int go(void); "
    "void a(void) { if (open_state == false && go()) open_state = true; else if (open_state == true) open_state = 0; }",
    "an error mapped in place": "enum e { E_OK, E_BUS, E_CRC, E_FAIL }; struct r { enum e error; };"
    "void m(struct r *r) { if (r->error == E_BUS) r->error = E_FAIL; else if (r->error == E_CRC) r->error = E_BUS;"
    " else if (r->error == E_FAIL) r->error = E_OK; }",
    "a mode that is set once": "enum m { AUTO, HAND, OFF }; static enum m mode; int pin(void); void work(void);"
    "void init(void) { mode = pin() ? AUTO : HAND; } void step(void) { if (mode == AUTO) work(); }",
    "a range that is made valid": "enum r { R2, R4, R8 }; static enum r range;"
    "void set(enum r r) { range = r; if (range != R2 && range != R4 && range != R8) range = R2; }",
    "a counter": "static int n; void work(void); void tick(void) { if (n == 10) { n = 0; work(); } else if (n == 5) "
    "{ work(); n++; } else n++; }",
    "a parameter": "enum s { A_STATE, B_STATE, C_STATE }; int f(enum s state) { if (state == A_STATE) state = B_STATE;"
    " else if (state == B_STATE) state = C_STATE; return state; }",
    "a character": "static char last_state; int get(void); void rd(void) { if (last_state == '\\\\') last_state = 'n';"
    " else if (last_state == 'n') last_state = 'r'; else last_state = get(); }",
    "a message that is replied to": "enum k { PING, PONG, BYE }; struct msg { enum k kind; }; void send(struct msg *);"
    "void reply(struct msg *m) { if (m->kind == PING) { m->kind = PONG; send(m); } else if (m->kind == BYE) "
    "{ m->kind = PING; send(m); } }",
}


@pytest.mark.parametrize("what", LOOK_ALIKES)
def test_what_looks_like_a_chain_and_is_none(what: str, tmp_path: Path) -> None:
    assert [machine.variable for machine in machines_in(tmp_path, LOOK_ALIKES[what])] == []
