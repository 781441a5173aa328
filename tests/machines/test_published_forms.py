"""Machines that standards publish, in thirteen forms each: what is extracted equals the tables, whatever the form.

The sources are those of ``standards``. Each text is run first, so that it is known to be what the standard says. The
figures that follow from a table are worked out by networkx from the extracted graph.
"""

import itertools
from pathlib import Path

import networkx
import pytest
from tests.machines.check import edge_faults, events_of, state_fault
from tests.machines.host import COMPILER, differences
from tests.machines.programs import Made
from tests.machines.standards import MACHINES, STYLES, published
from tests.machines.to_come import FORMS_TO_COME, params

from stepring.pipeline import Options, inspect
from stepring.report.types import Outcome
from stepring.shapes.types import Machine

FORM_PARAMS = params(STYLES, FORMS_TO_COME)


@pytest.fixture(scope="module")
def seen(tmp_path_factory: pytest.TempPathFactory) -> dict[tuple[str, str], tuple[Made, Outcome]]:
    """Every machine in every form, with what an inspection says of it."""
    found = {}
    for name, form in itertools.product(MACHINES, STYLES):
        made = published(name, form)
        folder = tmp_path_factory.mktemp(f"{name}_{form.replace(' ', '_')}")
        (folder / f"{name}.c").write_text(made.text, encoding="utf-8")
        found[name, form] = (made, inspect([folder], Options(use_compiler=False)))
    return found


Seen = dict[tuple[str, str], tuple[Made, Outcome]]


def the_machine(seen: Seen, name: str, form: str) -> tuple[Made, Machine]:
    made, outcome = seen[name, form]
    assert not outcome.notices
    assert not state_fault(made, outcome.program.machines)
    return made, outcome.program.machines[0]


def figures(machine: Machine) -> tuple["networkx.DiGraph[str]", str]:
    """The extracted graph, and the state that its machine starts in."""
    (start,) = machine.initial
    return networkx.DiGraph(machine.graph()), start


@pytest.mark.skipif(COMPILER is None, reason="no compiler to run the programs with")
def test_every_text_does_what_the_standard_says(tmp_path: Path) -> None:
    assert differences([published(name, form) for name in MACHINES for form in STYLES], tmp_path) == {}


def test_the_tables_have_the_published_sizes() -> None:
    tables = {name: published(name, "switch").table for name in MACHINES}
    assert {name: (len(table.states), len(table.events)) for name, table in tables.items()} == {
        "tap": (16, 2),
        "lcp": (10, 16),
        "tcp": (11, 12),
    }
    assert {name: len(set(table.edges())) for name, table in tables.items()} == {"tap": 32, "lcp": 120, "tcp": 21}


@pytest.mark.parametrize("form", FORM_PARAMS)
@pytest.mark.parametrize("name", MACHINES)
def test_the_graph_is_the_table(name: str, form: str, seen: Seen) -> None:
    made, machine = the_machine(seen, name, form)
    assert edge_faults(made, machine)[0] == ""
    graph, _ = figures(machine)
    pairs = {(made.spelled(source), made.spelled(target)) for source, _, target in made.table.edges()}
    # A handler that gives its own state back stays; whether that is a step is a matter of taste.
    free = {(state, state) for state in graph.nodes} if made.form == "next returned" else set()
    assert set(graph.edges) - free == pairs - free


@pytest.mark.parametrize("form", FORM_PARAMS)
@pytest.mark.parametrize("name", MACHINES)
def test_each_cell_of_the_table_is_a_transition(name: str, form: str, seen: Seen) -> None:
    made, machine = the_machine(seen, name, form)
    assert edge_faults(made, machine) == ("", "")
    told = {(step.source, event, step.target) for step in machine.transitions for event in events_of(made, step)}
    cells = {(made.spelled(source), event, made.spelled(target)) for source, event, target in made.table.edges()}
    if made.form == "next returned":
        told, cells = ({one for one in found if one[0] != one[2]} for found in (told, cells))
    assert told == cells


@pytest.mark.parametrize("form", FORM_PARAMS)
def test_figures_of_the_tap(form: str, seen: Seen) -> None:
    made, machine = the_machine(seen, "tap", form)
    graph, start = figures(machine)
    assert networkx.number_strongly_connected_components(graph) == 1
    far = networkx.single_source_shortest_path_length(graph, start)
    assert max(far.values()) == networkx.eccentricity(graph, start) == 7
    assert [name for name, distance in far.items() if distance == 7] == [made.spelled("TAP_EXIT2_IR")]
    assert networkx.diameter(graph) == 8
    if made.form != "next returned":
        assert networkx.number_of_selfloops(graph) == 6


@pytest.mark.parametrize("form", FORM_PARAMS)
def test_five_clocks_with_tms_high_reset_the_tap_and_no_shorter_word_does(form: str, seen: Seen) -> None:
    made, machine = the_machine(seen, "tap", form)
    # Where a handler gives its own state back without a test of TMS, that is the step of the value not tested.
    step = {(one.source, event): one.target for one in machine.transitions for event in events_of(made, one)}

    def after(state: str, event: str) -> str:
        return step.get((state, event)) or step[state, "*"]

    def ends(word: tuple[str, ...]) -> set[str]:
        found = {state.name for state in machine.states}
        for event in word:
            found = {after(state, event) for state in found}
        return found

    words = [word for size in range(1, 6) for word in itertools.product(made.table.events, repeat=size)]
    assert [word for word in words if len(ends(word)) == 1] == [("EV_TMS_HIGH",) * 5]
    assert ends(("EV_TMS_HIGH",) * 5) == {made.spelled("TAP_TEST_LOGIC_RESET")}


@pytest.mark.parametrize("form", FORM_PARAMS)
def test_figures_of_the_negotiation_automaton(form: str, seen: Seen) -> None:
    made, machine = the_machine(seen, "lcp", form)
    graph, start = figures(machine)
    if made.form != "next returned":
        assert graph.number_of_edges() == 46
        assert networkx.number_of_selfloops(graph) == 10
    assert networkx.number_strongly_connected_components(graph) == 1
    assert networkx.eccentricity(graph, start) == 4
    assert networkx.diameter(graph) == 4


@pytest.mark.parametrize("form", FORM_PARAMS)
def test_figures_of_the_connection(form: str, seen: Seen) -> None:
    made, machine = the_machine(seen, "tcp", form)
    graph, start = figures(machine)
    if made.form != "next returned":
        assert networkx.number_of_selfloops(graph) == 0
    assert start == made.spelled("TCP_CLOSED")
    assert networkx.number_strongly_connected_components(graph) == 1
    assert networkx.eccentricity(graph, start) == 4
    # Without the step of note 2, TIME-WAIT is one step further away.
    graph.remove_edge(made.spelled("TCP_FIN_WAIT_1"), made.spelled("TCP_TIME_WAIT"))
    assert networkx.eccentricity(graph, start) == 5


@pytest.mark.parametrize("form", STYLES)
@pytest.mark.parametrize("name", MACHINES)
def test_published_machines_are_without_an_error_or_a_warning(name: str, form: str, seen: Seen) -> None:
    _, outcome = seen[name, form]
    loud = [item for item in outcome.obligations if item.kind == "fail" and item.level in ("error", "warning")]
    assert not loud, [f"{item.rule} {item.where.line} {item.what}" for item in loud]


@pytest.mark.parametrize("form", FORM_PARAMS)
@pytest.mark.parametrize("name", ["lcp", "tcp"])
def test_actions_are_those_of_the_table(name: str, form: str, seen: Seen) -> None:
    made, machine = the_machine(seen, name, form)
    known = set(made.table.actions())
    wanted = {
        (made.spelled(state), made.spelled(step.target), step.actions)
        for (state, _), steps in made.table.cells.items()
        for step in steps
    }
    told = set()
    for step in machine.transitions:
        # A table points to one function that calls the actions of a cell.
        called = [act for name in step.actions for act in name.split("_then_")]
        told.add((step.source, step.target, tuple(act for act in called if act in known)))
    if made.form == "next returned":
        told, wanted = ({one for one in found if one[0] != one[1]} for found in (told, wanted))
    assert told == wanted
