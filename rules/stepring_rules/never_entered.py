"""SM03: a state that nothing enters, so that its case is dead code.

A store of it by the state's own code enters nothing. Said only where every store of the variable is known; otherwise
the verdict is open. CWE-561.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Related, Rule
from stepring.shapes.types import Program
from stepring_rules.machine_common import about, short


def never_entered(program: Program) -> Iterator[Obligation]:
    """One obligation for each labelled state of each machine, at its first case."""
    for machine in program.machines:
        seen: set[str] = set()
        for dispatch in machine.dispatches:
            for label in dispatch.labels:
                if label.high != label.low or not label.states or label.states[0] in seen:
                    continue
                if not dispatch.control_low <= label.low <= dispatch.control_high:
                    continue  # the constant cannot match at all; that is SM15's finding
                state = machine.state(label.states[0])
                seen.add(state.name)
                if state.initial or (state.stored and not state.kept):
                    yield about(
                        "SM03",
                        machine,
                        "pass",
                        label.where,
                        f"{state.name} is entered.",
                        function=short(dispatch.function),
                    )
                elif not machine.complete or state.elsewhere:
                    yield about(
                        "SM03",
                        machine,
                        "open",
                        label.where,
                        f"No store of {state.name} was found."
                        if not state.kept
                        else f"No store of {state.name} in another state was found.",
                        reason=machine.why_incomplete[0]
                        if machine.why_incomplete
                        else f"{state.elsewhere} is stored with it, which may be the same memory",
                        function=short(dispatch.function),
                    )
                else:
                    yield about(
                        "SM03",
                        machine,
                        "fail",
                        label.where,
                        f"Nothing {'in the program' if not state.kept else 'but its own code'} stores {state.name} in "
                        f"{machine.variable}; "
                        + ("this case is never run." if dispatch.form == "switch" else "the machine is never in it."),
                        "warning",
                        why="Either the code is left over, or the transition that should lead here is missing.",
                        advice=f"Add the transition to {state.name}, or remove the state and its case.",
                        function=short(dispatch.function),
                        states=(state.name,),
                        related=(Related(state.where, f"{state.name} is declared here."),)
                        if state.where != label.constant
                        else (),
                    )


RULE = Rule(
    "SM03",
    "StateNeverEntered",
    "A state is never entered; its case is dead.",
    "warning",
    never_entered,
    (561,),
)
