"""Where a state can be kept: one machine in every storage that firmware uses has the same graph."""

from pathlib import Path

import pytest
from tests.marks import machine_in, machines_in, steps

STATES = "enum gate { SHUT, OPENING, OPEN };\nint asked(void); int at_end(void); int left_alone(void);\n"
BODY = """
    switch (PLACE) {
    case SHUT:
        if (asked()) { PLACE = OPENING; }
        break;
    case OPENING:
        if (at_end()) { PLACE = OPEN; } else if (left_alone()) { PLACE = SHUT; }
        break;
    case OPEN:
        if (left_alone()) { PLACE = SHUT; }
        break;
    default:
        break;
    }
"""
STEPS = {("SHUT", "OPENING"), ("OPENING", "OPEN"), ("OPENING", "SHUT"), ("OPEN", "SHUT")}

# name: (the place as the code writes it, how the machine is shown, the program around BODY)
FORMS = {
    "static of the file": ("gate", "gate", "static enum gate gate = SHUT; void step(void) { BODY }"),
    "global": ("gate", "gate", "enum gate gate; void step(void) { BODY }"),
    "static of the function": ("gate", "gate", "void step(void) { static enum gate gate = SHUT; BODY }"),
    "local of a loop": ("gate", "gate", "void run(void) { enum gate gate = SHUT; for (;;) { BODY } }"),
    "local of a loop with a condition": (
        "gate",
        "gate",
        "void run(void) { enum gate gate = SHUT; do { BODY } while (!left_alone()); }",
    ),
    "member through a parameter": (
        "f->gate",
        "struct feeder.gate",
        "struct feeder { int kg; enum gate gate; }; void step(struct feeder *f) { BODY }",
    ),
    "member of an object": (
        "hopper.gate",
        "struct feeder.gate",
        "struct feeder { int kg; enum gate gate; }; static struct feeder hopper; void step(void) { BODY }",
    ),
    "member of a structure without a tag": (
        "hopper.gate",
        "feeder_t.gate",
        "typedef struct { int kg; enum gate gate; } feeder_t; static feeder_t hopper; void step(void) { BODY }",
    ),
    "member through a local pointer": (
        "f->gate",
        "struct feeder.gate",
        "struct feeder { int kg; enum gate gate; }; static struct feeder hoppers[3];"
        "void step(int i) { struct feeder *f = &hoppers[i]; BODY }",
    ),
    "member of an array's element": (
        "hoppers[i].gate",
        "struct feeder.gate",
        "struct feeder { int kg; enum gate gate; }; static struct feeder hoppers[3]; void step(int i) { BODY }",
    ),
    "member of each element": (
        "hoppers[i].gate",
        "struct feeder.gate",
        "struct feeder { int kg; enum gate gate; }; static struct feeder hoppers[3];"
        "void step(void) { for (int i = 0; i < 3; i++) { BODY } }",
    ),
    "element": ("gates[i]", "gates[]", "static enum gate gates[4]; void step(int i) { BODY }"),
    "element at a constant": ("gates[2]", "gates[]", "static enum gate gates[4]; void step(void) { BODY }"),
    "member of a member": (
        "b->left.gate",
        "struct side.gate",
        "struct side { enum gate gate; }; struct barge { struct side left, right; };"
        "void step(struct barge *b) { BODY }",
    ),
    "member behind two pointers": (
        "b->side->gate",
        "struct side.gate",
        "struct side { enum gate gate; }; struct barge { struct side *side; }; void step(struct barge *b) { BODY }",
    ),
    "bit-field": (
        "f->gate",
        "struct feeder.gate",
        "struct feeder { unsigned kg : 5; unsigned gate : 3; }; void step(struct feeder *f) { BODY }",
    ),
    "byte": (
        "f->gate",
        "struct feeder.gate",
        "struct feeder { unsigned char gate; }; void step(struct feeder *f) { BODY }",
    ),
    "signed byte": ("gate", "gate", "static signed char gate; void step(void) { BODY }"),
    "volatile": ("gate", "gate", "static volatile enum gate gate; void step(void) { BODY }"),
    "long": ("gate", "gate", "static unsigned long gate; void step(void) { BODY }"),
    "member of a union": (
        "f->u.gate",
        "union word.gate",
        "union word { enum gate gate; int raw; }; struct feeder { union word u; };void step(struct feeder *f) { BODY }",
    ),
}


@pytest.mark.parametrize("form", FORMS)
def test_the_graph_is_the_same_wherever_the_state_is_kept(form: str, tmp_path: Path) -> None:
    place, shown, program = FORMS[form]
    machine = machine_in(tmp_path, STATES + program.replace("BODY", BODY.replace("PLACE", place)))
    assert steps(machine) == STEPS
    assert machine.variable == shown
    assert machine.kind == ("member" if "." in shown else "variable")
    assert [state.name for state in machine.states] == ["SHUT", "OPENING", "OPEN"]
    assert machine.initial == ("SHUT",)
    assert machine.complete


def test_two_members_of_one_structure_are_two_machines(tmp_path: Path) -> None:
    program = "struct feeder { enum gate left, right; }; void step(struct feeder *f) { LEFT RIGHT }"
    text = STATES + program.replace("LEFT", BODY.replace("PLACE", "f->left"))
    found = machines_in(tmp_path, text.replace("RIGHT", BODY.replace("PLACE", "f->right")))
    assert [(machine.variable, steps(machine)) for machine in found] == [
        ("struct feeder.left", STEPS),
        ("struct feeder.right", STEPS),
    ]


def test_two_objects_of_one_structure_are_one_machine_and_not_mixed_up(tmp_path: Path) -> None:
    """A step that depends on one object's state and stores into another's is no step from that state."""
    program = """
        struct feeder { enum gate gate; };
        void step(struct feeder *f, struct feeder *other) {
            BODY
            switch (f->gate) {
            case OPEN: other->gate = OPENING; break;
            default: break;
            }
        }
    """
    machine = machine_in(tmp_path, STATES + program.replace("BODY", BODY.replace("PLACE", "f->gate")))
    assert {pair for pair in steps(machine) if pair[1] != "OPENING"} == STEPS - {("SHUT", "OPENING")}
    assert {pair for pair in steps(machine) if pair[1] == "OPENING"} == {
        (source, "OPENING") for source in ("SHUT", "OPENING", "OPEN")
    }


def test_statics_of_the_same_name_in_two_files_are_two_machines(tmp_path: Path) -> None:
    one = STATES + "static enum gate gate; void one(void) { " + BODY.replace("PLACE", "gate") + "}"
    found = machines_in(tmp_path, one, shore=one.replace("void one", "void other"))
    assert [machine.variable for machine in found] == ["gate", "gate"]
    assert len({machine.identity for machine in found}) == 2
    assert all(steps(machine) == STEPS for machine in found)


def test_a_global_dispatched_on_in_one_file_and_stored_in_another_is_one_machine(tmp_path: Path) -> None:
    machine = machine_in(
        tmp_path,
        STATES + "enum gate gate; void step(void) { " + BODY.replace("PLACE", "gate") + "}",
        shore=STATES + "extern enum gate gate; void storm(void) { if (gate == OPEN) { gate = OPENING; } }",
    )
    assert steps(machine) == STEPS | {("OPEN", "OPENING")}
    assert {step.function for step in machine.transitions} == {"step", "storm"}
