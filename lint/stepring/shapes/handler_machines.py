"""Machines whose state is the function that a variable holds, brought together from all units.

The functions stored in a variable are its states. One that a handler stores (itself, or through a function that only
handlers call) is a step from that handler; one that is stored from elsewhere can come from any, but for what never
runs: a function of the handlers' type that nothing stores or calls is a state that is never entered. A variable is a
machine if at least two different steps lead from one of its handlers to another; what else holds functions is a
callback.
"""

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import replace

from stepring.shapes.facts import (
    Constant,
    DispatchFact,
    HandlerFact,
    KeyFact,
    LabelFact,
    StateFacts,
    StoreFact,
    TransitionFact,
)
from stepring.shapes.state_handlers import handler_value
from stepring.shapes.state_kinds import Gathered

FEWEST_STEPS = 2


def handler_groups(facts: Iterable[StateFacts]) -> Iterator[Gathered]:
    """All facts about each variable that holds the state's handler."""
    keys: dict[str, KeyFact] = {}
    by_key: dict[str, dict[HandlerFact, None]] = {}
    returned: dict[int, dict[HandlerFact, None]] = {}
    for part in facts:
        for key in part.keys:
            keys.setdefault(key.key, key)
        for fact in part.handlers:
            if fact.kind == "returned":
                returned.setdefault(handler_value(fact.function), {})[fact] = None
            else:
                by_key.setdefault(fact.key, {})[fact] = None
    for name, about in by_key.items():
        if name in keys:
            group = _group(keys[name], tuple(about), returned)
            if group is not None:
                yield group


def _group(
    key: KeyFact, about: tuple[HandlerFact, ...], returned: Mapping[int, Mapping[HandlerFact, None]]
) -> Gathered | None:
    calls = [fact for fact in about if fact.kind == "called"]
    if not calls:
        return None
    first: dict[int, HandlerFact] = {}
    for fact in sorted((fact for fact in about if fact.kind != "called"), key=lambda fact: fact.where):
        first.setdefault(fact.constant.value, fact)
    for fact in about:
        if fact.idle and fact.fits and fact.kind == "stored":
            own = Constant(handler_value(fact.function), fact.function.rsplit(":", 1)[-1], fact.where)
            first.setdefault(own.value, replace(fact, constant=own))
    following = [fact for fact in about if fact.kind == "stored"]
    if any(call.kept for call in calls):
        pending = list(first)
        while pending:
            for fact in returned.get(pending.pop(), ()):
                following.append(fact)
                if fact.constant.value not in first:
                    first[fact.constant.value] = fact
                    pending.append(fact.constant.value)
    steps = [(source, fact) for fact in following for source in _sources(fact, first)]
    known = {(source, fact.constant.value) for source, fact in steps if source not in (None, fact.constant.value)}
    if len(known) < FEWEST_STEPS:
        return None
    # Numbers from 1: what is zero here is no function.
    numbers = {value: number for number, value in enumerate(sorted(first, key=lambda value: first[value].where), 1)}
    group = Gathered(key)

    def constant(fact: HandlerFact) -> Constant:
        return Constant(numbers[fact.constant.value], fact.constant.name, fact.where)

    labels = tuple(
        LabelFact(constant(first[value]), number, number, first[value].where, None, False, False)
        for value, number in numbers.items()
    )
    for call in calls:
        group.dispatches.append(_dispatch(key, call, labels))
    for fact in about:
        if fact.kind == "initial" and not fact.function:
            group.initials.append(constant(fact))
        elif fact.kind != "called":
            fresh = fact.kind == "initial"
            group.stores.append(StoreFact(key.key, fact.function, fact.where, (constant(fact),), fresh=fresh))
    for source, fact in steps:
        group.transitions.append(
            TransitionFact(
                key.key,
                fact.function,
                numbers[source] if source is not None else None,
                (),
                constant(fact),
                fact.guard,
                fact.where,
                fact.function,
                None,
                source is not None,
                fact.event,
                fact.actions,
                fact.timed,
            )
        )
    return group


def _sources(fact: HandlerFact, handlers: Mapping[int, HandlerFact]) -> Iterator[int | None]:
    """The handlers that a store is made in; None for any."""
    own = handler_value(fact.function)
    if own in handlers:
        yield own
        return
    if fact.idle:
        return
    callers = [handler_value(caller) for caller in fact.callers]
    if callers and all(caller in handlers for caller in callers):
        yield from dict.fromkeys(callers)
    else:
        yield None


def _dispatch(key: KeyFact, call: HandlerFact, labels: tuple[LabelFact, ...]) -> DispatchFact:
    return DispatchFact(
        key.key,
        "",
        call.function,
        key.shown,
        call.where,
        labels,
        None,
        "none",
        (),
        False,
        False,
        False,
        False,
        False,
        call.where.line,
        "next state returned" if call.kept else "function pointer",
    )
