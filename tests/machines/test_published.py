"""Machines that standards publish as tables: what is extracted from five C forms of them equals the tables.

IEEE Std 1149.1, clause 6.1.1 (the TAP controller), and RFC 1661 section 4.1 (the option negotiation automaton of the
Link Control Protocol). The figures that follow from the tables (components, distances, the shortest synchronising
word) are worked out by networkx from the extracted graph and compared with what follows from the published ones.
"""

import csv
import itertools
from collections import Counter

import networkx
import pytest
from tests.marks import DATA

from stepring.pipeline import Options, inspect
from stepring.shapes.types import Machine, Transition

FORMS = DATA / "published"


def rows(name: str) -> list[dict[str, str]]:
    with (DATA / name).open(encoding="utf-8", newline="") as text:
        return list(csv.DictReader((line for line in text if not line.startswith("#")), delimiter="\t"))


def extracted(form: str, use_compiler: bool) -> Machine:
    outcome = inspect([FORMS / f"{form}.c"], Options(use_compiler=use_compiler))
    assert not outcome.notices
    (machine,) = outcome.program.machines
    return machine


def spelled(prefix: str, name: str) -> str:
    """A state's or event's name in the tables as the C files spell it."""
    plain = name.replace("+", "_plus").replace("TO-", "TO_minus").replace("RCR-", "RCR_minus")
    return prefix + plain.replace("RXJ-", "RXJ_minus").replace("-", "_").replace("/", "_").upper()


# ---------------------------------------------------------------------------------------------------------- the TAP

TAP = sorted(
    (spelled("TAP_", row["state"]), int(row["tms"]), spelled("TAP_", row["next_state"])) for row in rows("jtag_tap.tsv")
)


def tms(step: Transition) -> int:
    """The input with which a transition is taken, from its guard or from the function that takes it."""
    by_function = {"tap_clock_tms_high": 1, "tap_clock_tms_low": 0}
    if step.function in by_function:
        assert step.guard == ""
        return by_function[step.function]
    assert step.function == "tap_clock"
    return {"tms": 1, "!tms": 0}[step.guard]


@pytest.fixture(params=["tap_switch_field", "tap_next_variable", "tap_two_functions"])
def tap(request: pytest.FixtureRequest) -> Machine:
    return extracted(request.param, use_compiler=False)


def test_the_tap_is_its_table(tap: Machine) -> None:
    assert len(TAP) == 32
    assert sorted((step.source, tms(step), step.target) for step in tap.transitions) == TAP
    assert len(tap.states) == 16
    assert tap.initial == ("TAP_TEST_LOGIC_RESET",)
    # Of a single named file a global is open to others; everything else is settled.
    assert tap.complete or tap.why_incomplete == ("only some files of the program were named, and others may store it",)
    assert all(state.declared and state.labelled and state.stored for state in tap.states)
    assert [state.value for state in tap.states] == list(range(16))


def test_figures_of_the_tap(tap: Machine) -> None:
    graph: networkx.DiGraph[str] = networkx.DiGraph(tap.graph())
    assert sorted(networkx.nodes_with_selfloops(graph)) == sorted(
        f"TAP_{name}" for name in ("TEST_LOGIC_RESET", "RUN_TEST_IDLE", "SHIFT_DR", "SHIFT_IR", "PAUSE_DR", "PAUSE_IR")
    )
    assert networkx.number_strongly_connected_components(graph) == 1
    far = networkx.single_source_shortest_path_length(graph, "TAP_TEST_LOGIC_RESET")
    assert max(far.values()) == 7
    assert [name for name, distance in far.items() if distance == 7] == ["TAP_EXIT2_IR"]
    assert networkx.diameter(graph) == 8


def test_five_clocks_with_tms_high_reset_the_tap_and_no_shorter_word_does(tap: Machine) -> None:
    step = {(one.source, tms(one)): one.target for one in tap.transitions}

    def ends(word: tuple[int, ...]) -> set[str]:
        found = {state.name for state in tap.states}
        for bit in word:
            found = {step[name, bit] for name in found}
        return found

    words = [word for length in range(1, 6) for word in itertools.product((0, 1), repeat=length)]
    assert [word for word in words if len(ends(word)) == 1] == [(1, 1, 1, 1, 1)]
    assert ends((1, 1, 1, 1, 1)) == {"TAP_TEST_LOGIC_RESET"}


# ---------------------------------------------------------------------------------------------------------- LCP

LCP = sorted(
    (spelled("LCP_", row["state"]), spelled("", row["event"]), spelled("LCP_", row["next_state"]))
    for row in rows("rfc1661_lcp.tsv")
    if row["status"] == "legal"
)


def event(step: Transition) -> str:
    """The event that takes a transition, from the function or from the label in its guard."""
    if step.function == "lcp_event":
        assert step.guard.startswith("ev == EV_")
        return step.guard.removeprefix("ev == EV_")
    assert step.guard == ""
    return step.function.removeprefix("lcp_").upper()


@pytest.fixture(params=["lcp_events", "lcp_one_function"])
def lcp(request: pytest.FixtureRequest) -> Machine:
    return extracted(request.param, use_compiler=False)


def test_the_negotiation_automaton_is_its_table(lcp: Machine) -> None:
    assert len(LCP) == 120
    assert sorted((step.source, event(step), step.target) for step in lcp.transitions) == LCP
    assert len(lcp.states) == 10
    assert lcp.initial == ("LCP_INITIAL",)
    assert lcp.complete


def test_figures_of_the_negotiation_automaton(lcp: Machine) -> None:
    pairs = {(step.source, step.target) for step in lcp.transitions}
    assert len(pairs) == 46
    assert sum(source == target for source, target in pairs) == 10
    assert sum(step.source != step.target for step in lcp.transitions) == 53
    graph: networkx.DiGraph[str] = networkx.DiGraph(lcp.graph())
    assert networkx.number_strongly_connected_components(graph) == 1
    assert networkx.eccentricity(graph, "LCP_INITIAL") == 4
    assert networkx.diameter(graph) == 4


def test_events_that_a_state_excludes(lcp: Machine) -> None:
    held = Counter(step.source for step in lcp.transitions)
    excluded = [16 - held[state.name] for state in lcp.states]
    assert excluded == [13, 13, 3, 3, 1, 1, 1, 1, 1, 3]
    by_event = Counter(event(step) for step in lcp.transitions)
    assert {name: 10 - count for name, count in by_event.items() if count < 10} == {
        **dict.fromkeys(
            ["RCR_PLUS", "RCR_MINUS", "RCA", "RCN", "RTR", "RTA", "RUC", "RXJ_PLUS", "RXJ_MINUS", "RXR"], 2
        ),
        "UP": 8,
        "DOWN": 2,
        "TO_PLUS": 5,
        "TO_MINUS": 5,
    }


# ---------------------------------------------------------------------------------------------------------- all forms


@pytest.mark.parametrize("form", [path.stem for path in sorted(FORMS.glob("*.c"))])
def test_published_machines_are_without_a_finding_and_read_the_same_by_any_preprocessor(form: str) -> None:
    outcomes = [inspect([FORMS / f"{form}.c"], Options(use_compiler=use)) for use in (False, True)]
    assert not [item for item in outcomes[0].obligations if item.kind == "fail"]
    assert outcomes[0].obligations == outcomes[1].obligations
    one, other = (outcome.program.machines[0] for outcome in outcomes)
    assert (one.states, one.transitions, one.stores) == (other.states, other.transitions, other.stores)
