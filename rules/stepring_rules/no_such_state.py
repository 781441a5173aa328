"""SM05: a stored value that is no state of the machine.

The states are the declared constants and every value that a dispatch or a test knows; a stored constant outside
them is a slip: another group's constant, a plain number, one step past the last state. CWE-372.
"""

from collections.abc import Iterator

from stepring.places import Origin
from stepring.rule import Level, Obligation, Related, Rule
from stepring.shapes.types import STEPPED, Machine, Program, State
from stepring_rules.machine_common import about, is_bound, main_dispatch, short


def no_such_state(program: Program) -> Iterator[Obligation]:
    """One obligation for each store of a constant."""
    for machine in program.machines:
        if not machine.dispatches:
            continue
        by_value = {state.value: state for state in machine.states}
        for where, function, value in _stores(machine):
            state = by_value[value]
            if state.declared or state.labelled or state.tested:
                yield about("SM05", machine, "pass", where, f"{state.name} is a state.", function=function)
                continue
            yield _failure(machine, state, where, function)


def _stores(machine: Machine) -> Iterator[tuple[Origin, str, int]]:
    """Every place where a constant gets into the variable, computed steps included."""
    seen: set[tuple[Origin, int]] = set()
    for store in machine.stores:
        for _, value in store.values or ():
            if (store.where, value) not in seen:
                seen.add((store.where, value))
                yield store.where, short(store.function), value
    lines = {(where.file, where.line, value) for where, value in seen}
    values = {state.name: state.value for state in machine.states}
    # A step from a known state (``state++``) stores a known value; other computed stores may be corrected later on.
    stepped = {(store.where.file, store.where.line) for store in machine.stores if store.why_unknown == STEPPED}
    for step in machine.transitions:
        value = values[step.target]
        place = (step.where.file, step.where.line)
        if place in stepped and (*place, value) not in lines:
            lines.add((*place, value))
            yield step.where, short(step.function), value


def _failure(machine: Machine, state: State, where: Origin, function: str) -> Obligation:
    dispatch = main_dispatch(machine)
    named = any(other.declared for other in machine.states)
    # Among plain numbers a default that works may be the value's own case; a bound's name may mean "none now".
    works = dispatch.default_does in ("stores", "calls", "work", "leaves") or dispatch.form != "switch"
    level: Level = "warning" if (named or not works) and not is_bound(state.name) else "note"
    shown = state.name if state.name == str(state.value) else f"{state.name} ({state.value})"
    return about(
        "SM05",
        machine,
        "fail",
        where,
        f"{shown} is stored in {machine.variable}, but it is no state of this machine: no case, test or declaration of "
        f"{machine.family or 'its constants'} knows it.",
        level,
        why="No case handles the value, so the machine stops doing its work until something overwrites it.",
        advice="Store the state that was meant, or give the value a case.",
        function=function,
        states=(state.name,),
        related=(Related(dispatch.where, "The dispatch that does not know the value."),),
    )


RULE = Rule(
    "SM05",
    "StoredValueIsNoState",
    "A value is stored that is no state of the machine.",
    "warning",
    no_such_state,
    (372,),
)
