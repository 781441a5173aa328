"""SM01: a ``switch`` over a state with no default.

A corrupted or forgotten value then runs through the dispatch without a trace. Whether that is harmful depends on the
rest, so the finding is a note; CWE-478.
"""

from collections.abc import Iterator

from stepring.rule import Obligation, Rule
from stepring.shapes.types import Program
from stepring_rules.machine_common import about, short


def no_default(program: Program) -> Iterator[Obligation]:
    """One obligation for each dispatch of each machine."""
    for machine in program.machines:
        for dispatch in machine.dispatches:
            if dispatch.form != "switch":
                continue  # comparisons pick out the states they mean
            handled = len({name for label in dispatch.labels for name in label.states})
            if dispatch.default is not None:
                yield about(
                    "SM01",
                    machine,
                    "pass",
                    dispatch.where,
                    f"The switch on {dispatch.control} has a default.",
                    function=short(dispatch.function),
                )
                continue
            yield about(
                "SM01",
                machine,
                "fail",
                dispatch.where,
                f"The switch on {dispatch.control} has no default; it handles {handled} of "
                f"{len(machine.states)} known states of {machine.variable}.",
                "note",
                why="A value that is no handled state, from a fault or a later change, passes without being noticed.",
                advice="Add a default that brings the machine to a safe state or reports the value.",
                function=short(dispatch.function),
            )


RULE = Rule(
    "SM01",
    "SwitchOverStateWithoutDefault",
    "A switch over a state has no default.",
    "note",
    no_default,
    (478,),
)
