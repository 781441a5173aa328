"""From a unit's IR to what it says about state variables.

One pass over every function notes dispatches, tests and stores by key; then only keys that could be states in the whole
program are worked out: the places get their original spelling, falls and defaults are judged, and ``state_flow``
finds the transitions. Coroutines made of ``case __LINE__`` label their cases with line numbers and are marked as such.
"""

from collections.abc import Mapping
from dataclasses import replace

from stepring.meaning.show import expr_text
from stepring.meaning.types import (
    Const,
    IntType,
    Load,
    Object,
    TypedUnit,
    UnknownType,
    VariablePlace,
)
from stepring.read.types import ReadUnit
from stepring.shapes.facts import (
    CallFact,
    StateFacts,
    TestFact,
)
from stepring.shapes.keys import uncast
from stepring.shapes.names import Names, constant_of, starts
from stepring.shapes.state_aliases import getters, working_parameters
from stepring.shapes.state_chain import chain_fact
from stepring.shapes.state_dispatch import dispatch_fact
from stepring.shapes.state_handlers import handler_dispatch, handler_facts, handler_tables
from stepring.shapes.state_keys import families_by_key, key_facts
from stepring.shapes.state_moves import note_transitions
from stepring.shapes.state_pointers import with_pointers_followed
from stepring.shapes.state_scan import Scan, Work, function_identity, scan_function, state_candidates
from stepring.shapes.state_spelled import spelled
from stepring.shapes.state_stores import before_all, may_set, note_forward, store_fact
from stepring.shapes.state_tables import Found, lookups, tables


def state_facts(unit: TypedUnit, read: ReadUnit) -> StateFacts:
    """What the unit says about state variables."""
    unit, apart = with_pointers_followed(unit)
    names = Names(read.macros, unit.types, read.origin)
    own = [function for function in unit.functions if function.own]
    known = getters(own)
    handed = working_parameters(own)
    scans = [scan_function(function, known, handed.get(function.identity, ())) for function in own]
    work = Work(unit, read, names, {function.name: function for function in own}, scans, apart)
    arrays = tables(work)
    looked_up = _looked_up(work, arrays)
    for through in handler_tables(work, arrays):
        work.handler_tables.setdefault(through.key, []).append(through)
    chosen = state_candidates(scans, names) | {found.dispatch.key for found in looked_up} | set(work.handler_tables)
    for scan in scans:
        _function_facts(work, scan, chosen)
    note_transitions(work, chosen)
    _note_lookups(work, looked_up)
    _note_handlers(work)
    key_facts(work, chosen)
    handlers = handler_facts(work)
    return StateFacts(
        (*work.keys.values(), *work.handler_keys.values()),
        tuple(work.dispatches),
        tuple(work.tests),
        tuple(store for store, _ in work.stores),
        tuple(dict.fromkeys(work.transitions)),
        tuple(dict.fromkeys(call for call, _ in work.calls)),
        families_by_key(names, work),
        tuple(work.bounded),
        tuple(work.exposed),
        _starters(work),
        tuple(work.forwards),
        tuple(work.commits),
        handlers,
    )


def _looked_up(work: Work, known: Mapping[str, Object]) -> tuple[Found, ...]:
    """The stores that take a state's next value out of a table."""
    if not known:
        return ()
    return tuple(
        found
        for scan in work.scans
        for key, seen in scan.keys.items()
        if seen.stores and seen.key.scope != "parameter"
        for found in lookups(work, scan, key, known)
    )


def _note_lookups(work: Work, looked_up: tuple[Found, ...]) -> None:
    """A table's cells are steps; what the store stores is then known."""
    for found in looked_up:
        work.dispatches.append(found.dispatch)
        work.transitions.extend(found.transitions)
        for number, (store, at) in enumerate(work.stores):
            if (store.key, store.function, at) == (found.dispatch.key, found.dispatch.function, found.at):
                known = replace(store, constants=found.targets, why_unknown="", parameter=None, stepped=False)
                work.stores[number] = (known, at)


def _note_handlers(work: Work) -> None:
    """Calls through tables of handlers are dispatches."""
    for key, sets in work.handler_tables.items():
        names = {
            constant.value: constant.name
            for store, _ in work.stores
            if store.key == key
            for constant in store.constants
        }
        names |= {move.target.value: move.target.name for move in work.transitions if move.key == key}
        types = [scan.keys[key].type for scan in work.scans if key in scan.keys]
        enumeration = work.unit.types.enums.get(
            next((type_.enum or "" for type_ in types if isinstance(type_, IntType)), "")
        )
        if enumeration is not None:
            names |= {item.value: item.name for item in enumeration.enumerators}
        if types:
            work.dispatches.extend(handler_dispatch(work, handlers, names) for handlers in sets)


def _starters(work: Work) -> tuple[tuple[str, str | None], ...]:
    """The functions whose names say that they give an object its first state, and who calls them."""
    own = {scan.function.identity for scan in work.scans}
    found: dict[tuple[str, str | None], None] = {
        (store.function, None): None for store, _ in work.stores if store.function in own and starts(store.function)
    }
    for scan in work.scans:
        for _, name in scan.calls:
            if starts(name):
                found[function_identity(work, name), scan.function.identity] = None
    return tuple(found)


def _function_facts(work: Work, scan: Scan, chosen: frozenset[str]) -> None:
    function = scan.function
    for key, seen in scan.keys.items():
        if key not in chosen:
            continue
        for block, switch in seen.dispatches:
            work.dispatches.append(dispatch_fact(work, scan, seen, block, switch))
        if not seen.dispatches:
            chain = chain_fact(work, scan, seen)
            if chain is not None:
                work.dispatches.append(chain)
        for number, position in seen.tests:
            where = work.names.origin(position)
            work.tests.append(TestFact(key, function.identity, constant_of(work.names, number, where), where))
        for block, statement, place in seen.stores:
            store = store_fact(work, scan, seen, statement, place)
            store = replace(store, fresh=True) if before_all(scan, seen, block) else store
            work.stores.append((store, statement.position))
    for call, name in scan.calls:
        if not may_set(work, name):
            continue
        for index, argument in enumerate(call.arguments):
            inner = uncast(argument)
            if not isinstance(inner.type, IntType | UnknownType):
                continue
            if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
                if note_forward(work, function, inner.place.variable, name, index):
                    continue
            where = work.names.origin(call.position)
            constant = constant_of(work.names, inner, where) if isinstance(inner, Const) else None
            text = "" if constant is not None else spelled(function, expr_text(inner))[:120]
            callee = function_identity(work, name)
            work.calls.append((CallFact(callee, index, constant, function.identity, where, text), call.position))
    for key, position in scan.exposed:
        if key in chosen:
            work.exposed.append((key, work.names.origin(position)))
