"""Which state variables are machines, and what each machine is: the program's facts brought together.

A ``switch`` on a stored value is a machine if the value survives until the next evaluation, constants of the labels'
own group are stored in it, and it is no character, cursor or value mapped in place. (The criteria are those that
separated machines from other switches on a hand-labelled sample of public firmware.) A machine is then everything in
the program that dispatches on the variable, tests it or stores into it.
"""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace
from types import MappingProxyType
from typing import TypeVar, get_args

from stepring.places import Origin
from stepring.shapes.facts import (
    CallFact,
    Constant,
    DispatchFact,
    Family,
    ForwardFact,
    KeyFact,
    StateFacts,
    TransitionFact,
)
from stepring.shapes.handler_machines import handler_groups
from stepring.shapes.names import starts_or_runs
from stepring.shapes.state_kinds import MOST_STATES, Gathered, dispatches_of, is_machine, is_switched, stored_constants
from stepring.shapes.types import (
    STEPPED,
    Dispatch,
    Form,
    Label,
    Machine,
    State,
    StateStore,
    Transition,
)

T = TypeVar("T")
FORMS = get_args(Form)


def find_machines(
    facts: Iterable[StateFacts], *, unread: Mapping[str, str] = MappingProxyType({}), whole: bool = True
) -> tuple[Machine, ...]:
    """The machines of a program, in the order of their places.

    ``unread`` are the files of which something could not be read, with what that was; ``whole`` says that a whole
    program was asked for and not some files of one.
    """
    facts = list(facts)
    gathered = _gather(facts)
    stored_in: dict[str, dict[str, str]] = {}
    for group in gathered.values():
        for constant in stored_constants(group):
            if constant.name is not None and group.key.kind == "member":
                stored_in.setdefault(constant.name, {})[group.key.key] = group.key.shown
    chosen = {key: group for key, group in gathered.items() if is_machine(group)}
    chosen.update((group.key.key, group) for group in handler_groups(facts))
    for part in facts:
        for following, state in part.commits:
            # A next state that is kept until it is committed is part of the machine that it is committed to.
            if state in chosen and following in chosen and following != state and not is_switched(chosen[following]):
                del chosen[following]
    machines = [_machine(group, unread, whole, stored_in) for group in chosen.values()]
    return tuple(sorted(machines, key=lambda machine: (machine.where, machine.identity)))


def _gather(facts: Sequence[StateFacts]) -> dict[str, Gathered]:
    gathered: dict[str, Gathered] = {}
    families: dict[str, Family] = {}
    for part in facts:
        by_name = {
            member.name: families.setdefault(family.identity, family)
            for family in part.families
            for member in family.members
            if member.name is not None
        }
        for key in part.keys:
            group = gathered.setdefault(key.key, Gathered(key))
            if group.key.low < key.low or group.key.high > key.high:
                group.key = key
            group.initials.extend(key.initials)
            group.named.update((name, family) for name, family in by_name.items() if name not in group.named)
            group.starts_zero = group.starts_zero or key.starts_zero
    callers: dict[str, list[CallFact]] = {}
    forwards: dict[tuple[str, int], list[ForwardFact]] = {}
    for part in facts:
        for forward in part.forwards:
            forwards.setdefault((forward.callee, forward.argument), []).append(forward)
        for call in part.calls:
            callers.setdefault(call.callee, []).append(call)
        for dispatch in part.dispatches:
            gathered[dispatch.key].dispatches.append(dispatch)
        for test in part.tests:
            gathered[test.key].tests.append(test)
        for store in part.stores:
            gathered[store.key].stores.append(store)
        for transition in part.transitions:
            if transition.key in gathered:
                gathered[transition.key].transitions.append(transition)
        for key_name in part.bounded:
            gathered[key_name].bounded = True
        for exposed_key, where in part.exposed:
            if exposed_key in gathered:
                gathered[exposed_key].exposed.append(where)
    starters = _starters(facts)
    for group in gathered.values():
        # A header's inline function is seen by many units; its facts count once.
        group.dispatches = _distinct(group.dispatches)
        group.tests = _distinct(group.tests)
        group.stores = _distinct(group.stores)
        group.transitions = _distinct(group.transitions)
        group.initials = _distinct(group.initials)
        _settle_starters(group, starters)
        _settle_setters(group, callers, forwards)
    return gathered


def _settle_setters(
    group: Gathered, callers: Mapping[str, list[CallFact]], forwards: Mapping[tuple[str, int], list[ForwardFact]]
) -> None:
    """The calls that store a constant through a setter, or through functions that hand it on to one; steps through
    functions that turned out to be no setters go."""
    entries: set[tuple[str, int]] = set()
    for store in group.stores:
        if store.parameter is None:
            continue
        reached = {(store.function, store.parameter)}
        pending = list(reached)
        while pending:
            entry = pending.pop()
            for call in _distinct(callers.get(entry[0], [])):
                if call.argument == entry[1] and call.constant is not None:
                    group.setters.append((store, call, call.constant))
                elif call.argument == entry[1]:
                    group.unknown.append(call)
            for forward in forwards.get(entry, ()):
                outer = (forward.caller, forward.parameter)
                if outer not in reached:
                    reached.add(outer)
                    pending.append(outer)
        entries |= reached
    group.transitions = [move for move in group.transitions if move.through is None or move.through in entries]


def _starters(facts: Iterable[StateFacts]) -> frozenset[str]:
    """The functions that are named for setting up and that nothing calls but set-up code or a program's beginning."""
    callers: dict[str, set[str]] = {}
    for part in facts:
        for starter, caller in part.starters:
            callers.setdefault(starter, set()).update(() if caller is None else (caller,))
    return frozenset(
        starter for starter, calling in callers.items() if all(starts_or_runs(caller) for caller in calling)
    )


def _settle_starters(group: Gathered, starters: frozenset[str]) -> None:
    """What set-up code stores without looking at the state first is an initial state and no transition."""
    looking = {dispatch.function for dispatch in group.dispatches} | {test.function for test in group.tests}
    blind = starters - looking
    group.stores = [replace(store, fresh=True) if store.function in blind else store for store in group.stores]
    group.transitions = [
        move for move in group.transitions if move.source is not None or move.mentioned or move.function not in blind
    ]


def _distinct(items: "Iterable[T]") -> "list[T]":
    return list(dict.fromkeys(items))


# ------------------------------------------------------------------------------------------------------ one machine


def _is_open(group: Gathered) -> bool:
    """Whether files that were not named could store the variable: it is declared in a header, global, or has a
    setter."""
    key = group.key
    if key.scope != "lasting":
        return False
    shared = key.where.file.endswith(".h") if key.kind == "member" else ":" not in key.key
    return shared or any(store.parameter is not None and ":" not in store.function for store in group.stores)


def _machine(
    group: Gathered, unread: Mapping[str, str], whole: bool, stored_in: Mapping[str, Mapping[str, str]]
) -> Machine:
    key = group.key
    family = _family(group)
    states = tuple(_elsewhere(state, group.key, stored_in) for state in _states(group, family))
    by_value = {state.value: state for state in states}
    why: list[str] = []
    reach = _is_open(group)
    for file, what in unread.items():
        if reach or file == key.file:
            why.append(f"{what} was not read and may store it")
            break
    if not whole and reach:
        why.append("only some files of the program were named, and others may store it")
    if group.exposed:
        why.append(f"its address is taken (line {group.exposed[0].line})")
    if group.bounded:
        why.append("its transitions are too many to follow them all")
    for call in sorted(group.unknown, key=lambda call: call.where):
        why.append(f"{_short(call.function)} hands {call.text} to {_short(call.callee)} (line {call.where.line})")
    setters = {store for store, _, _ in group.setters}
    for store in group.stores:
        if store.why_unknown and store not in setters:
            why.append(f"{_short(store.function)} stores {store.why_unknown} (line {store.where.line})")
        elif store.stepped:
            why.append(f"{_short(store.function)} computes the next state (line {store.where.line})")
    facts = sorted(dispatches_of(group), key=lambda dispatch: dispatch.where)
    dispatches = tuple(_dispatch(dispatch, key, by_value) for dispatch in facts)
    transitions = tuple(_transitions(group, states))
    initial = tuple(state.name for state in states if state.initial)
    return Machine(
        key.key,
        key.shown,
        key.kind,
        key.where,
        " and ".join(dict.fromkeys(sorted((one.form for one in facts), key=FORMS.index))),
        states,
        dispatches,
        tuple(_stores(group, by_value)),
        transitions,
        initial,
        not why,
        tuple(dict.fromkeys(why)),
        family.identity.split("@", 1)[0] if family is not None else "",
        key.scope == "lasting",
    )


def _short(function: str) -> str:
    return function.rsplit(":", 1)[-1]


def _family(group: Gathered) -> Family | None:
    """The group of constants that most of the machine's labels come from, if they are not mostly plain numbers."""
    votes: dict[str, int] = {}
    plain: set[int] = set()
    found: dict[str, Family] = {}
    for dispatch in group.dispatches:
        for label in dispatch.labels:
            family = group.named.get(label.constant.name or "")
            if family is not None:
                votes[family.identity] = votes.get(family.identity, 0) + 1
                found[family.identity] = family
            elif label.constant.name is None:
                plain.add(label.constant.value)
    # One comparison of plain numbers with a name does not make them that name's group.
    if not votes or max(votes.values()) < len(plain):
        return None
    return found[max(sorted(votes), key=lambda identity: votes[identity])]


def _states(group: Gathered, family: Family | None) -> tuple[State, ...]:
    names: dict[int, tuple[str, Origin]] = {}
    declared: set[int] = set()
    labelled: set[int] = set()
    tested: set[int] = set()
    stored: set[int] = set()
    initial: set[int] = set()
    by_family = {member.name: member for member in family.members} if family is not None else {}

    def see(constant: Constant, into: set[int]) -> None:
        into.add(constant.value)
        known = names.get(constant.value)
        if known is None or (constant.name is not None and constant.name in by_family and known[0] not in by_family):
            names[constant.value] = (constant.name or str(constant.value), constant.where)

    for member in by_family.values():
        see(member, declared)
    for dispatch in dispatches_of(group):
        for label in dispatch.labels:
            see(label.constant, labelled)
            if label.high > label.constant.value:
                for value in range(label.constant.value, min(label.high, label.constant.value + MOST_STATES) + 1):
                    see(Constant(value, None, label.where), labelled)
    for test in group.tests:
        see(test.constant, tested)
    for store in group.stores:
        for constant in store.constants:
            see(constant, initial if store.fresh else stored)
            stored.add(constant.value)
    for _, _, constant in group.setters:
        see(constant, stored)
    for move in group.transitions:
        see(move.target, stored)
    for constant in group.initials:
        see(constant, initial)
    if group.starts_zero or (0 in names and (group.key.kind == "member" or not initial)):
        # Static storage starts as zero (6.7.9p10); an object of unknown origin may have been cleared.
        see(Constant(0, None, group.key.where), initial)
    kept = _kept(group)
    return tuple(
        State(
            name,
            value,
            where,
            value in declared,
            value in labelled,
            value in tested,
            value in stored,
            value in initial,
            "",
            value in kept,
        )
        for value, (name, where) in sorted(names.items())
    )


def _kept(group: Gathered) -> frozenset[int]:
    """The values that are only stored where the state has them already: by their own case, handler or row.

    A store is one if the steps of its function are known and all of those to its value come from that value. What
    tables and handlers give is stored where they are looked up, and their steps are all known.
    """
    if group.bounded:
        return frozenset()
    sources: dict[int, set[int | None]] = {}
    stepping: set[tuple[str, int]] = set()
    for move in group.transitions:
        value = move.target.value
        sources.setdefault(value, set()).add(move.source)
        stepping |= {(move.function, value), (move.stored_by, value)}
    # A table without a handler for a state that is entered leaves steps unknown.
    looking = {
        one.function
        for one in group.dispatches
        if one.form not in ("switch", "if-chain") and sources.keys() <= {label.constant.value for label in one.labels}
    }
    stored = [(store, store.function, constant.value) for store in group.stores for constant in store.constants]
    stored += [(store, call.function, constant.value) for store, call, constant in group.setters]
    entered = {
        value
        for store, function, value in stored
        if store.fresh or ((function, value) not in stepping and function not in looking)
    }
    return frozenset(value for value, found in sources.items() if found == {value}) - entered


def _elsewhere(state: State, key: KeyFact, stored_in: Mapping[str, Mapping[str, str]]) -> State:
    """A state that nothing stores here but that is stored in a member of another structure with the same name."""
    if state.stored or state.initial or key.kind != "member":
        return state
    member = key.key.rsplit(".", 1)[-1]
    others = [
        shown
        for other, shown in sorted(stored_in.get(state.name, {}).items())
        if other != key.key and other.rsplit(".", 1)[-1] == member
    ]
    return replace(state, elsewhere=others[0]) if others else state


def _dispatch(fact: DispatchFact, key: KeyFact, by_value: Mapping[int, State]) -> Dispatch:
    labels = tuple(
        Label(
            tuple(
                by_value[value].name
                for value in range(label.constant.value, min(label.high, label.constant.value + MOST_STATES) + 1)
                if value in by_value
            ),
            label.constant.value,
            label.high,
            label.written,
            label.where,
            label.constant.where,
            label.fell_from,
            label.fall_marked,
            label.overwrites,
        )
        for label in fact.labels
    )
    return Dispatch(
        fact.function,
        fact.control,
        fact.where,
        labels,
        fact.default,
        fact.default_does,
        fact.unreached,
        key.low,
        key.high,
        fact.form,
        fact.default_fall,
    )


def _stores(group: Gathered, by_value: Mapping[int, State]) -> Iterable[StateStore]:
    def named(constants: Iterable[Constant]) -> tuple[tuple[str, int], ...]:
        return tuple((by_value[constant.value].name, constant.value) for constant in constants)

    setters = {store for store, _, _ in group.setters}
    for store in sorted(group.stores, key=lambda store: store.where):
        if store in setters or (store.copied and not store.constants):
            continue
        unknown = store.why_unknown or (STEPPED if store.stepped else "")
        yield StateStore(
            store.function,
            store.where,
            None if unknown else named(store.constants),
            unknown,
            None,
            store.fresh,
        )
    for _, call, constant in sorted(group.setters, key=lambda one: (one[1].where, one[2].value)):
        yield StateStore(call.function, call.where, named([constant]), "", _short(call.callee))


def _transitions(group: Gathered, states: Sequence[State]) -> Iterable[Transition]:
    by_value = {state.value: state for state in states}
    seen: set[Transition] = set()

    def step(source: State, target: int, move: TransitionFact) -> Iterable[Transition]:
        found = Transition(
            source.name,
            by_value[target].name,
            move.function,
            move.guard,
            move.where,
            move.event,
            move.actions,
            move.timed,
        )
        if found not in seen:
            seen.add(found)
            yield found

    # A state that is only ever declared cannot be left by code that never sees it; it gets no transitions.
    real = [state for state in states if state.labelled or state.tested or state.stored or state.initial]
    for move in sorted(group.transitions, key=lambda move: (move.where, move.source is None, move.source or 0)):
        if move.source is not None:
            source = by_value.get(move.source)
            if source is not None and source in real:
                yield from step(source, move.target.value, move)
        else:
            for state in real:
                if state.value not in move.mentioned:
                    yield from step(state, move.target.value, move)
    followed = {(move.function, move.stored_by, move.target.value) for move in group.transitions}
    followed |= {(move.function, move.through[0], move.target.value) for move in group.transitions if move.through}
    for store, call, constant in sorted(group.setters, key=lambda one: (one[1].where, one[2].value)):
        if store.fresh or (call.function, store.function, constant.value) in followed:
            continue
        # A setter called from another file: from which state is not known, so from any.
        text = f"calls {_short(call.callee)}"
        handed = TransitionFact(store.key, call.function, None, (), constant, text, call.where, store.function)
        for state in real:
            yield from step(state, constant.value, handed)
