"""SM04: a state, or a group of states, that is never left.

The groups are the strongly connected components of the transition graph without an edge out. States whose name says
that the machine may rest there, or whose case does nothing, are taken for final and get a note, as does the end of a
sequence that an object goes through once. CWE-835 is about loops; the nearest entry for a stuck machine is CWE-841.
"""

from collections.abc import Iterator

import networkx

from stepring.places import Origin
from stepring.rule import Level, Obligation, Related, Rule
from stepring.shapes.types import Machine, Program
from stepring_rules.machine_common import about, is_final, listed, main_dispatch, short


def never_left(program: Program) -> Iterator[Obligation]:
    """One obligation for each machine, and a failure for each trap."""
    for machine in program.machines:
        if not machine.transitions or not machine.dispatches or not machine.lasting:
            continue  # a machine in a loop's own variable is left with the loop
        traps = list(_traps(machine))
        dispatch = main_dispatch(machine)
        if not traps:
            yield about(
                "SM04", machine, "pass", dispatch.where, "Every state can be left.", function=short(dispatch.function)
            )
        for trap in traps:
            where, function = _where(machine, trap)
            shown = listed(trap)
            verb = "is" if len(trap) == 1 else "are"
            if not machine.complete:
                yield about(
                    "SM04",
                    machine,
                    "open",
                    where,
                    f"No transition out of {shown} was found.",
                    reason=machine.why_incomplete[0],
                    function=function,
                    states=trap,
                )
                continue
            # Where only start states lie outside, the trap is the machine at work after its start.
            at_work = all(
                state.name in trap or state.initial for state in machine.states if state.labelled or state.stored
            )
            rests = at_work or any(is_final(name) for name in trap) or _one_way(machine)
            level: Level = "note" if rests else "warning"
            ways_in = [step for step in machine.transitions if step.target in trap and step.source not in trap]
            yield about(
                "SM04",
                machine,
                "fail",
                where,
                f"{shown} of {machine.variable} {verb} never left: no transition leads out"
                + ("." if len(trap) == 1 else " of the group."),
                level,
                why="Once there, the machine stays until the controller is reset.",
                advice="Add the transition that leaves, with a time limit if it waits for something outside; if the "
                "machine is meant to rest there, say so in the state's name.",
                function=function,
                states=trap,
                related=tuple(
                    Related(step.where, f"{step.source} goes to {step.target} here.") for step in ways_in[:3]
                ),
            )


def _one_way(machine: Machine) -> bool:
    """Whether a member's states are gone through once, in the order of their values.

    Such a sequence ends with its object: a request that is answered, a transfer that is closed.
    """
    values = {state.name: state.value for state in machine.states}
    steps = [step for step in machine.transitions if step.source != step.target]
    return (
        machine.kind == "member" and len(steps) > 1 and all(values[step.source] < values[step.target] for step in steps)
    )


def _traps(machine: Machine) -> Iterator[tuple[str, ...]]:
    """Components that are entered, hold code, and have no edge out; in the order of the states."""
    graph: networkx.DiGraph[str] = networkx.DiGraph(machine.graph())
    order = {state.name: number for number, state in enumerate(machine.states)}
    labelled = {state.name for state in machine.states if state.labelled}
    # What only dead states lead to is SM03's matter; a trap that holds the start is the whole working machine.
    alive = set(machine.initial).union(*(networkx.descendants(graph, name) for name in machine.initial))
    if alive:
        graph = graph.subgraph(alive)
    condensed = networkx.condensation(graph)
    for component in condensed.nodes:
        members = condensed.nodes[component]["members"]
        if condensed.out_degree(component) or not condensed.in_degree(component):
            continue
        if not members <= labelled or members & set(machine.initial):
            continue
        yield tuple(sorted(members, key=lambda name: order[name]))


def _where(machine: Machine, trap: tuple[str, ...]) -> tuple[Origin, str]:
    for dispatch in sorted(machine.dispatches, key=lambda dispatch: -len(dispatch.labels)):
        for label in dispatch.labels:
            if any(name in trap for name in label.states):
                return label.where, short(dispatch.function)
    dispatch = main_dispatch(machine)
    return dispatch.where, short(dispatch.function)


RULE = Rule(
    "SM04",
    "StateNeverLeft",
    "A state, or a group of states, is never left.",
    "warning",
    never_left,
    (841,),
)
