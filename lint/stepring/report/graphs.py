"""Machines as SARIF graphs, and the walks through them that a finding speaks of.

A run's graphs are the machines it found (2.1.0 sections 3.14.20, 3.39 to 3.41): a node is a state with its name as the
source spells it, an edge a transition with the function that takes it. A finding about a trap or a dead state is a
traversal (3.42): it starts at an initial state if one leads there, and goes along edges that connect end to end.
"""

from collections import Counter
from collections.abc import Mapping, Sequence
from itertools import pairwise
from typing import Any

import networkx
import sarif_om as om

from stepring.report.locations import Register, message
from stepring.report.text import clean, escape_message, function_name
from stepring.shapes.types import Machine, State, Transition


def graph_of(machine: Machine, index: int, register: Register, verdicts: Mapping[str, int]) -> Any:
    """The machine as graph number ``index``; node ids are state names, edge ids count from ``t1``."""
    place = register.sources.of(machine.where.file)
    return om.Graph(
        description=message(f"The state machine on {machine.variable}."),
        nodes=[_node(state, register) for state in _states(machine)]
        + [om.Node(id=name, label=message(name), properties={"listed": False}) for name in _unlisted(machine)],
        edges=[_edge(number, step, register) for number, step in enumerate(machine.transitions, start=1)],
        properties={
            "index": index,
            "variable": clean(machine.variable),
            "functions": sorted({clean(function_name(dispatch.function)) for dispatch in machine.dispatches}),
            "initial": [clean(name) for name in machine.initial],
            "form": clean(machine.form),
            "uri": place.uri,
            "line": machine.where.line,
            "family": clean(machine.family),
            "complete": machine.complete,
            "whyIncomplete": [clean(text) for text in machine.why_incomplete],
            "verdicts": dict(verdicts),
        },
    )


def _states(machine: Machine) -> list[State]:
    """The states, one for each name (node ids are unique)."""
    by_name: dict[str, State] = {}
    for state in machine.states:
        by_name.setdefault(clean(state.name), state)
    return list(by_name.values())


def _unlisted(machine: Machine) -> list[str]:
    """Names that a transition uses although no state has them, in order of appearance."""
    listed = {clean(state.name) for state in machine.states}
    ends = [clean(name) for step in machine.transitions for name in (step.source, step.target)]
    return [name for name in dict.fromkeys(ends) if name not in listed]


def _node(state: State, register: Register) -> Any:
    marks = {"declared": state.declared, "labelled": state.labelled, "tested": state.tested, "stored": state.stored}
    return om.Node(
        id=clean(state.name),
        label=message(state.name),
        location=register.location(state.where),
        properties={"value": state.value, **marks, "initial": state.initial},
    )


def _edge(number: int, step: Transition, register: Register) -> Any:
    source = register.sources.of(step.where.file)
    return om.Edge(
        id=f"t{number}",
        source_node_id=clean(step.source),
        target_node_id=clean(step.target),
        label=message(step.guard) if step.guard else None,
        properties={"function": clean(function_name(step.function)), "uri": source.uri, "line": step.where.line},
    )


def traversal_of(machine: Machine, index: int, states: Sequence[str]) -> Any:
    """A walk along the edges of graph ``index`` that visits ``states``; None where no edge touches them."""
    walk = _walk(machine, states)
    if not walk:
        return None
    variable = clean(machine.variable)
    return om.GraphTraversal(
        run_graph_index=index,
        description=message(f"How {machine.variable} comes to {_list_of(states)}."),
        initial_state={variable: om.MultiformatMessageString(text=escape_message(walk[0][1].source))},
        edge_traversals=[
            om.EdgeTraversal(
                edge_id=f"t{number}",
                message=message(_step_text(step)),
                final_state={variable: om.MultiformatMessageString(text=escape_message(step.target))},
            )
            for number, step in walk
        ],
    )


def _list_of(names: Sequence[str]) -> str:
    return names[0] if len(names) == 1 else ", ".join(names[:-1]) + " and " + names[-1]


def _step_text(step: Transition) -> str:
    guard = f" if {step.guard}" if step.guard else ""
    return f"{function_name(step.function)} goes from {step.source} to {step.target}{guard}."


def _walk(machine: Machine, states: Sequence[str]) -> list[tuple[int, Transition]]:
    """Numbered transitions that connect end to end: to the first state from an initial one, then on through the others.

    A state that no initial one leads to is shown by a transition out of it; one where the walk would be empty by a
    transition back to itself.
    """
    graph: networkx.MultiDiGraph[str] = networkx.MultiDiGraph()
    graph.add_nodes_from(state.name for state in machine.states)
    for number, step in enumerate(machine.transitions, start=1):
        graph.add_edge(step.source, step.target, number=number)
    stops = [name for name in states if name in graph]
    if not stops:
        return []
    starts = [name for name in machine.initial if name in graph and networkx.has_path(graph, name, stops[0])]
    start = min(starts, key=lambda name: networkx.shortest_path_length(graph, name, stops[0]), default=stops[0])
    walked: list[str] = [start]
    for stop in stops:
        if stop not in walked and networkx.has_path(graph, walked[-1], stop):
            walked += networkx.shortest_path(graph, walked[-1], stop)[1:]
    if graph.has_edge(walked[-1], walked[-1]) and (len(stops) == 1 or len(walked) == 1):
        walked.append(walked[-1])
    elif len(walked) == 1 and start not in machine.initial:
        walked += list(graph.successors(start))[:1]
    numbers = [min(edge["number"] for edge in graph[here][there].values()) for here, there in pairwise(walked)]
    return [(number, machine.transitions[number - 1]) for number in numbers]


def verdict_counts(kinds: Sequence[str]) -> dict[str, int]:
    """How often each verdict was given; ``review`` is listed only where it was."""
    counted = Counter(kinds)
    listed = {kind: counted[kind] for kind in ("pass", "fail", "open")}
    return listed | ({"review": counted["review"]} if counted["review"] else {})
