"""SM02: a declared state that no case handles, also where a default hides it.

Handled means: some dispatch has a case for it or some code compares the variable with it, anywhere in the program; a
function that is itself an event handles only some states by design. CWE-478.
"""

from collections.abc import Iterator

from stepring.rule import Level, Obligation, Related, Rule
from stepring.shapes.types import Dispatch, Machine, Program, State
from stepring_rules.machine_common import about, is_bound, main_dispatch, short


def unhandled_state(program: Program) -> Iterator[Obligation]:
    """One obligation for each machine and declared state."""
    for machine in program.machines:
        if not machine.dispatches:
            continue
        dispatch = main_dispatch(machine)
        for state in machine.states:
            if not state.declared:
                continue
            if state.labelled or state.tested:
                yield about(
                    "SM02",
                    machine,
                    "pass",
                    dispatch.where,
                    f"{state.name} is handled.",
                    function=short(dispatch.function),
                )
                continue
            if is_bound(state.name) and not _entered(machine, state):
                continue
            stores = [
                store.where
                for store in machine.stores
                if store.values is not None and any(value == state.value for _, value in store.values)
            ]
            entered = _entered(machine, state)
            hidden = dispatch.default is not None and dispatch.default_does not in ("nothing", "none")
            # A function that is itself an event handles some states only; a default that stores a state recovers.
            recovers = dispatch.default_does == "stores" and _is_whole(machine, dispatch)
            level: Level = "warning" if entered and recovers and dispatch.form == "switch" else "note"
            how = (
                "the default takes it for an unknown value"
                if level == "warning"
                else "only the default handles it, with every other value that has no case"
                if hidden
                else "the default does nothing with it"
                if dispatch.default is not None
                else "there is no default either"
            )
            fact = "is stored but no case handles it" if entered else "is declared, but nothing stores or handles it"
            yield about(
                "SM02",
                machine,
                "fail",
                dispatch.where,
                f"State {state.name} of {machine.variable} {fact}; {how}.",
                level,
                why="In this state the machine does not do its own work, or falls into code meant for faults.",
                advice=f"Give {state.name} a case of its own, or remove the state.",
                function=short(dispatch.function),
                states=(state.name,),
                related=(
                    Related(state.where, f"{state.name} is declared here."),
                    *(Related(where, f"{state.name} is stored here.") for where in stores[:3]),
                ),
            )


def _is_whole(machine: Machine, dispatch: Dispatch) -> bool:
    """Whether a dispatch is meant to handle every state: it has cases for most of those that occur."""
    real = [state.name for state in machine.states if state.stored or state.initial]
    handled = {name for label in dispatch.labels for name in label.states}
    return 3 * len(handled & set(real)) >= 2 * len(real)


def _entered(machine: Machine, state: State) -> bool:
    return state.stored and any(
        store.values is not None and any(value == state.value for _, value in store.values) for store in machine.stores
    )


RULE = Rule(
    "SM02",
    "DeclaredStateNotHandled",
    "A declared state is handled by no case.",
    "warning",
    unhandled_state,
    (478,),
)
