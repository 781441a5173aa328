"""How states can be written: enumerators, macros, plain numbers; and the names and places that come back."""

from pathlib import Path

import pytest
from tests.marks import inspect_texts, machine_in, steps

from stepring.pipeline import Options
from stepring.shapes.types import Machine

BODY = """
int asked(void);
static TYPE pump;
void step(void)
{
    switch (pump) {
    case REST:
        if (asked()) { pump = FEED_PRIME; }
        break;
    case FEED_PRIME:
        pump = asked() ? RUN : REST;
        break;
    case RUN:
        if (asked()) { pump = REST; }
        break;
    default:
        break;
    }
}
"""
STEPS = {("REST", "FEED_PRIME"), ("FEED_PRIME", "RUN"), ("FEED_PRIME", "REST"), ("RUN", "REST")}

# name: (declarations, type, values of REST, FEED_PRIME and RUN)
GROUPS = {
    "enumerators": ("enum pump { REST, FEED_PRIME, RUN };", "enum pump", (0, 1, 2)),
    "enumerators of a typedef": ("typedef enum { REST, FEED_PRIME, RUN } pump_t;", "pump_t", (0, 1, 2)),
    "enumerators in a byte": ("enum { REST, FEED_PRIME, RUN };", "unsigned char", (0, 1, 2)),
    "enumerators with gaps": ("enum pump { REST = 4, FEED_PRIME = 9, RUN = 2 };", "enum pump", (4, 9, 2)),
    "negative enumerators": ("enum pump { REST = -1, FEED_PRIME, RUN };", "enum pump", (-1, 0, 1)),
    "negative in a byte": ("enum pump { REST = -1, FEED_PRIME, RUN };", "signed char", (-1, 0, 1)),
    "macros": ("#define REST 0\n#define FEED_PRIME 1\n#define RUN 2", "int", (0, 1, 2)),
    "macros in a byte": (
        "#define REST 0x10u\n#define FEED_PRIME 0x20u\n#define RUN 0xF0u",
        "unsigned char",
        (16, 32, 240),
    ),
    "negative macros": ("#define REST (-2)\n#define FEED_PRIME -1\n#define RUN 0", "signed char", (-2, -1, 0)),
    "macros of shifts": (
        "#define REST (1 << 0)\n#define FEED_PRIME (1 << 2)\n#define RUN (1u << 4)",
        "unsigned",
        (1, 4, 16),
    ),
    "macros of macros": (
        "#define BASE 0x40\n#define REST (BASE + 0)\n#define FEED_PRIME (BASE + 1)\n#define RUN (FEED_PRIME + 1)",
        "int",
        (64, 65, 66),
    ),
    "macros with casts": (
        "typedef unsigned char u8;\n#define REST ((u8)0)\n#define FEED_PRIME ((u8)1)\n#define RUN ((u8)2)",
        "u8",
        (0, 1, 2),
    ),
    "macros of characters": ("#define REST 'r'\n#define FEED_PRIME 'p'\n#define RUN 'R'", "char", (114, 112, 82)),
    "constant objects of an enumeration": (
        "enum pump { REST, FEED_PRIME, RUN };\n#define PUMP_FIRST REST",
        "volatile enum pump",
        (0, 1, 2),
    ),
}


@pytest.mark.parametrize("group", GROUPS)
def test_states_are_named_as_the_source_names_them(group: str, tmp_path: Path) -> None:
    declarations, type_, values = GROUPS[group]
    machine = machine_in(tmp_path, declarations + BODY.replace("TYPE", type_))
    assert steps(machine) == STEPS
    named = {state.name: state.value for state in machine.states if state.labelled}
    assert named == dict(zip(("REST", "FEED_PRIME", "RUN"), values, strict=True))
    unnamed = [state for state in machine.states if not state.labelled]
    assert [state.value for state in unnamed] == ([] if 0 in values else [0])  # what a static object starts with


def test_plain_numbers_are_their_own_names(tmp_path: Path) -> None:
    plain = BODY.replace("TYPE", "int").replace("REST", "0").replace("FEED_PRIME", "10").replace("RUN", "20")
    machine = machine_in(tmp_path, plain)
    assert steps(machine) == {("0", "10"), ("10", "20"), ("10", "0"), ("20", "0")}
    assert machine.family == ""


@pytest.mark.parametrize("use_compiler", [False, True], ids=["built-in", "compiler"])
@pytest.mark.parametrize("group", ["enumerators", "macros", "macros of shifts"])
def test_places_are_those_of_the_source(group: str, use_compiler: bool, tmp_path: Path) -> None:
    """Labels, stores and the dispatch stand at the line and column where the source has them, macros or not."""
    declarations, type_, _ = GROUPS[group]
    text = declarations + BODY.replace("TYPE", type_)
    outcome = inspect_texts(tmp_path, {"feeder.c": text}, Options(use_compiler=use_compiler))
    (machine,) = outcome.program.machines
    lines = (tmp_path / "feeder.c").read_text(encoding="utf-8").splitlines()

    def line_of(start: str, after: int = 0) -> int:
        return next(number for number, line in enumerate(lines, 1) if number > after and line.strip().startswith(start))

    (dispatch,) = machine.dispatches
    assert (dispatch.where.line, dispatch.where.column) == (line_of("switch"), 5)
    for label, name in zip(dispatch.labels, ("REST", "FEED_PRIME", "RUN"), strict=True):
        assert label.states == (name,)
        assert (label.where.line, label.where.column) == (line_of(f"case {name}"), 5)
        constant = (label.constant.line, label.constant.column, label.constant.end_column, label.constant.spelling)
        assert constant == (line_of(f"case {name}"), 10, 10 + len(name), name)
    assert dispatch.default is not None
    assert (dispatch.default.line, dispatch.default.column) == (line_of("default"), 5)
    to_prime = next(step for step in machine.transitions if step.target == "FEED_PRIME")
    line = line_of("if (asked()) { pump = FEED_PRIME")
    assert to_prime.where.line == line
    assert to_prime.where.column in (lines[line - 1].index("pump = ") + 1, lines[line - 1].index("FEED_PRIME") + 1)
    declared = next(state for state in machine.states if state.name == "RUN").where
    assert "RUN" in lines[declared.line - 1]
    assert machine.where.line == line_of("static")
    assert machine.where.spelling == "pump"


def macro_machine(folder: Path, use_compiler: bool) -> Machine:
    text = """
        #define STATE(name) case PUMP_##name:
        #define GO(name) pump = PUMP_##name
        enum pump { PUMP_REST, PUMP_PRIME };
        int asked(void);
        static enum pump pump;
        void step(void)
        {
            switch (pump) {
            STATE(REST)  if (asked()) GO(PRIME); break;
            STATE(PRIME) if (asked()) GO(REST);  break;
            }
        }
    """
    outcome = inspect_texts(folder, {"feeder.c": text}, Options(use_compiler=use_compiler))
    (machine,) = outcome.program.machines
    return machine


@pytest.mark.parametrize("use_compiler", [False, True], ids=["built-in", "compiler"])
def test_labels_made_by_a_macro_stand_where_the_macro_is_used(use_compiler: bool, tmp_path: Path) -> None:
    machine = macro_machine(tmp_path, use_compiler)
    assert steps(machine) == {("PUMP_REST", "PUMP_PRIME"), ("PUMP_PRIME", "PUMP_REST")}
    lines = (tmp_path / "feeder.c").read_text(encoding="utf-8").splitlines()
    for label, word in zip(machine.dispatches[0].labels, ("STATE(REST)", "STATE(PRIME)"), strict=True):
        line = next(number for number, text in enumerate(lines, 1) if word in text)
        assert (label.where.line, label.where.column) == (line, lines[line - 1].index("STATE") + 1)


def test_states_of_a_header_are_declared_there(tmp_path: Path) -> None:
    names = ("PUMP_REST", "PUMP_FEED_PRIME", "PUMP_RUN", "PUMP_DRAIN")
    header = "".join(f"#define {name} {value}\n" for value, name in enumerate(names))
    body = BODY.replace("TYPE", "int").replace("FEED_PRIME", "PUMP_FEED_PRIME")
    body = body.replace("REST", "PUMP_REST").replace("RUN", "PUMP_RUN")
    (machine,) = inspect_texts(tmp_path, {"pump.h": header, "feeder.c": '#include "pump.h"\n' + body}).program.machines
    assert [(state.name, Path(state.where.file).name, state.where.line) for state in machine.states] == [
        (name, "pump.h", line) for line, name in enumerate(names, 1)
    ]
    assert machine.family == "PUMP_*"
    drain = machine.state("PUMP_DRAIN")
    assert drain.declared and not (drain.labelled or drain.stored or drain.tested or drain.initial)


def test_a_range_of_labels_covers_its_states(tmp_path: Path) -> None:
    text = """
        enum pump { REST, PRIME_A, PRIME_B, PRIME_C, RUN };
        int asked(void);
        static enum pump pump;
        void step(void)
        {
            switch (pump) {
            case REST: if (asked()) pump = PRIME_A; break;
            case PRIME_A ... PRIME_C: pump++; break;
            case RUN: pump = REST; break;
            }
        }
    """
    machine = machine_in(tmp_path, text)
    assert steps(machine) == {
        ("REST", "PRIME_A"),
        ("PRIME_A", "PRIME_B"),
        ("PRIME_B", "PRIME_C"),
        ("PRIME_C", "RUN"),
        ("RUN", "REST"),
    }
    assert machine.dispatches[0].labels[1].states == ("PRIME_A", "PRIME_B", "PRIME_C")
    assert all(state.labelled for state in machine.states)
