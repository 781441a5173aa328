"""SM06: a case that runs on into the next state's code with nothing that says it is meant.

A fall into the ``default`` is surely wrong where that stores over what the case has just stored, or reports a fault;
one into a default that does nothing changes nothing. Stacked labels are no fall; a comment or attribute between the
last statement and the label marks one as meant (common practice; C23 has an attribute for it). CWE-484.
"""

from collections.abc import Iterator

from stepring.places import Origin
from stepring.rule import Obligation, Related, Rule
from stepring.shapes.types import DefaultFall, Dispatch, Machine, Program
from stepring_rules.machine_common import about, listed, short


def runs_on(program: Program) -> Iterator[Obligation]:
    """One obligation for each fall into a case or the default of a machine's dispatch."""
    for machine in program.machines:
        for dispatch in machine.dispatches:
            if dispatch.default is not None and dispatch.default_fall is not None:
                yield _into_default(machine, dispatch, dispatch.default, dispatch.default_fall)
            for label in dispatch.labels:
                if label.fallen_into_from is None:
                    continue
                shown = listed(label.states) if label.states else str(label.low)
                if label.fall_marked:
                    yield about(
                        "SM06",
                        machine,
                        "pass",
                        label.where,
                        f"The fall into {shown} is marked as meant.",
                        function=short(dispatch.function),
                    )
                    continue
                overwrites = " and stores the state again" if label.overwrites else ""
                yield about(
                    "SM06",
                    machine,
                    "fail",
                    label.where,
                    f"The case before runs on into the code of {shown}{overwrites}; nothing marks this as meant.",
                    "warning",
                    why=f"The work of {shown} is then done in a state where it was not asked for.",
                    advice="End the case with break, or mark the fall-through as meant.",
                    function=short(dispatch.function),
                    states=label.states,
                    related=(Related(label.fallen_into_from, "Control comes from here."),),
                )


def _into_default(machine: Machine, dispatch: Dispatch, where: Origin, fall: DefaultFall) -> Obligation:
    if fall.marked or dispatch.default_does == "nothing":
        what = (
            "The fall into the default is marked as meant."
            if fall.marked
            else "The case before runs on into the default, which does nothing."
        )
        return about("SM06", machine, "pass", where, what, function=short(dispatch.function))
    effect, why = "", "The code for values that no case handles is then run in a state that has a case."
    if fall.overwrites:
        effect = " and stores the state again"
        why = "The state that the case has just stored is lost, so its transition is never taken."
    elif fall.faults:
        effect = f" and calls {fall.faults[0]}"
        why = "A state that is in order is then reported as a fault."
    return about(
        "SM06",
        machine,
        "fail",
        where,
        f"The case before runs on into the default{effect}; nothing marks this as meant.",
        "warning" if effect else "note",
        why=why,
        advice="End the case with break, or mark the fall-through as meant.",
        function=short(dispatch.function),
        related=(Related(fall.source, "Control comes from here."),),
    )


RULE = Rule(
    "SM06",
    "CaseRunsOn",
    "A case runs on into the next state's code unmarked.",
    "warning",
    runs_on,
    (484,),
)
