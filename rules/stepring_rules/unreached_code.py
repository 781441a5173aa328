"""SM15: code in a state's ``switch`` that no case reaches.

Statements before the first label or after a jump and before the next label (N1570 6.8.4.2p7), and cases whose
constant the control's type cannot hold (p5). CWE-561.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule
from stepring.shapes.types import Program
from stepring_rules.machine_common import about, short


def unreached_code(program: Program) -> Iterator[Obligation]:
    """One obligation for each dispatch, and a failure for each piece of code that is not reached."""
    for machine in program.machines:
        for dispatch in machine.dispatches:
            if dispatch.form != "switch":
                continue
            function = short(dispatch.function)
            beyond = [
                label for label in dispatch.labels if not dispatch.control_low <= label.low <= dispatch.control_high
            ]
            if not dispatch.unreached and not beyond:
                yield about(
                    "SM15", machine, "pass", dispatch.where, "Every statement is led to by a label.", function=function
                )
            for where in dispatch.unreached:
                yield about(
                    "SM15",
                    machine,
                    "fail",
                    where,
                    f"No label of the switch on {dispatch.control} leads to this statement; it is never run.",
                    "warning",
                    why="What it does is missing in every state.",
                    advice="Move it under the case it belongs to, or remove it.",
                    function=function,
                )
            for label in beyond:
                yield about(
                    "SM15",
                    machine,
                    "fail",
                    label.where,
                    f"{machine.variable} holds {dispatch.control_low} to {dispatch.control_high}; the case for "
                    f"{label.written} never matches.",
                    "warning",
                    why="The code of this case is never run.",
                    advice="Widen the variable's type or change the constant.",
                    function=function,
                )


RULE = Rule(
    "SM15",
    "CodeInSwitchNotReached",
    "Code in a state's switch is reached by no case.",
    "warning",
    unreached_code,
    (561,),
)
