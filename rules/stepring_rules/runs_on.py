"""SM06: a case that runs on into the next state's code with nothing that says it is meant.

Stacked labels are no fall; a comment or attribute between the last statement and the label marks one as meant (common
practice; C23 has an attribute for it). CWE-484.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Related, Rule
from stepring.shapes.types import Program
from stepring_rules.machine_common import about, listed, short


def runs_on(program: Program) -> Iterator[Obligation]:
    """One obligation for each fall into a case of a machine's dispatch."""
    for machine in program.machines:
        for dispatch in machine.dispatches:
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


RULE = Rule(
    "SM06",
    "CaseRunsOn",
    "A case runs on into the next state's code unmarked.",
    "warning",
    runs_on,
    (484,),
)
