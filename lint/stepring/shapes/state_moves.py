"""The transitions of a unit's state variables, found by running ``state_flow`` over the functions that matter for each.

Functions that dispatch or test come first, so that what they call is seen with the states it is called in.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

from stepring.meaning.types import (
    Assign,
    Call,
    Function,
    Load,
    VariablePlace,
)
from stepring.places import Origin, Position
from stepring.shapes.facts import CallFact, Constant, TransitionFact
from stepring.shapes.keys import uncast
from stepring.shapes.names import constant_at, sets
from stepring.shapes.state_flow import (
    CHAIN_VISITS,
    ENTRY,
    FEW_VISITS,
    MOST_DEPTH,
    Chosen,
    Move,
    Setting,
    Value,
    flow,
)
from stepring.shapes.state_guards import Condition, Guards, Way, actions, conditions, paths_of, way_of
from stepring.shapes.state_handlers import Handlers, called_directly
from stepring.shapes.state_scan import Scan, Work, function_identity, is_shared, stores_parameter
from stepring.shapes.state_stores import is_fresh

Returned = tuple[int, Chosen] | None  # a constant with where it was chosen; None for what is not known


def note_transitions(work: Work, chosen: frozenset[str]) -> None:
    by_key: dict[str, list[Scan]] = {}
    for scan in work.scans:
        for key in scan.keys:
            if key in chosen:
                by_key.setdefault(key, []).append(scan)
    callers: dict[str, set[str]] = {}
    for scan in work.scans:
        for _, name in scan.calls:
            callers.setdefault(name, set()).add(scan.function.identity)
    for handlers in (one for several in work.handler_tables.values() for one in several):
        for _, name, _ in handlers.by_value:
            callers.setdefault(name, set()).add(handlers.function)
    for key, scans in by_key.items():
        _transitions_of(work, key, scans, callers)


def _transitions_of(work: Work, key: str, scans: Sequence[Scan], callers: Mapping[str, set[str]]) -> None:
    picked = work.handler_tables.get(key, [])
    if not picked and not any(scan.keys[key].read_instances for scan in scans) and not _has_setter(scans, key):
        _unconditional(work, key)
        return
    writers = _writers(work, key, scans, callers)
    first = scans[0].keys[key]
    outside = first.key.scope == "lasting" and is_shared(first)
    if not writers and not (outside and any(_asks_others(work, scan) for scan in scans)):
        return
    mentioned = frozenset(
        value
        for scan in scans
        for seen in [scan.keys[key]]
        for value in (
            *(
                number
                for _, switch in seen.dispatches
                for case in switch.cases
                for number in (range(case.low, case.high + 1) if case.high - case.low <= 64 else (case.low,))
            ),
            *(const.value for const, _ in seen.tests),
        )
    ) | {value for handlers in picked for value, _, _ in handlers.by_value}
    by_identity = {scan.function.identity: scan for scan in work.scans}

    def instances(function: str) -> frozenset[str]:
        scan = by_identity.get(function)
        seen = scan.keys.get(key) if scan is not None else None
        return frozenset(seen.instances) if seen is not None else frozenset()

    storing = {scan.function.identity for scan in scans if scan.keys[key].stores}
    shared = first.key.scope == "lasting" and (is_shared(first) or len(storing) > 1)
    commits = _commits(scans, key)
    work.commits.extend((variable, key) for variable in sorted(commits))
    setting = Setting(
        key,
        mentioned,
        work.by_name.get,
        writers,
        instances,
        commits,
        shared=shared,
        outside=outside,
        aliases=_aliases(scans, key),
    )
    dispatched = any(scan.keys[key].dispatches for scan in scans)
    if not dispatched:
        compared = any(scan.keys[key].branches for scan in scans)
        setting.most_visits = CHAIN_VISITS if compared else FEW_VISITS
    handling = _run_handlers(work, key, setting, picked)
    # Functions that dispatch or test come first: what they call is then seen with its sources.
    readers = [scan for scan in scans if scan.keys[key].read_instances or scan.function.identity in writers]
    readers.sort(key=lambda scan: not scan.keys[key].read_instances)
    others = [
        scan
        for scan in work.scans
        if key not in scan.keys
        and (scan.function.identity, key) not in work.apart
        and any(function_identity(work, name) in writers for _, name in scan.calls)
    ]
    for scan in [*readers, *others]:
        function = scan.function
        seen = scan.keys.get(key)
        if function.identity in handling and not called_directly(work, function.name):
            continue
        if function.identity in setting.followed and function.static and (seen is None or not seen.read_instances):
            continue
        for instance in sorted(seen.instances) if seen is not None else [key]:
            reads = seen is not None and instance in seen.read_instances
            if seen is not None and not reads and is_fresh(seen, instance):
                continue
            flow(setting, function, instance, ENTRY, ENTRY, {})
    for handlers in picked:
        if handlers.result_at is not None:
            setting.stored[handlers.function, handlers.result_at] = _all_returned(handling)
    if setting.bounded and not dispatched and not picked:
        _unconditional(work, key)
        return
    if setting.bounded:
        work.bounded.append(key)
    paths = _Paths(work, key, setting, by_identity)
    writing = [by_identity[identity].function for identity in writers if identity in by_identity]
    paths.setters = frozenset(function.name for function in writing if _only_stores(function))
    for move in sorted(
        setting.moves,
        key=lambda move: (move.at, move.source is None, move.source or 0, move.target, move.chosen.block),
    ):
        if first.key.scope == "local" and move.source is None and not move.excluded:
            continue  # a local variable has no state before its first value
        here = move.chosen.position if move.chosen.position is not None and move.chosen.position.line else move.at
        where = work.names.origin(here)
        way = _way(paths, move)
        target = constant_at(work.names, move.target, move.chosen.position, move.chosen.name, where)
        work.transitions.append(
            TransitionFact(
                key,
                move.chosen.function,
                move.source,
                tuple(sorted(move.excluded)) if move.source is None else (),
                target,
                way.guard,
                where,
                move.function,
                move.through,
                move.dispatched,
                way.event,
                way.actions,
                way.timed,
            )
        )
    if not setting.bounded and not setting.cut:
        _settle_stores(work, key, setting)
        _settle_calls(work, key, setting)


def _run_handlers(work: Work, key: str, setting: Setting, picked: Sequence[Handlers]) -> dict[str, set[Returned]]:
    """Run each handler from the state that picks it; what handlers were run, and what their calls can return."""
    found: dict[str, set[Returned]] = {}
    for handlers in picked:
        for value, name, _ in handlers.by_value:
            function = work.by_name.get(name)
            if function is None:
                found.setdefault(name, set()).add(None)
                continue
            told = Chosen(handlers.function, -1, handlers.position, None)
            ways = sorted(setting.instances(function.identity)) or [key]
            returned = found.setdefault(function.identity, set())
            setting.followed.add(function.identity)
            for way in ways:
                source = Value("known", value, told)
                for leaving in flow(setting, function, way, source, Value("known", value), {}):
                    one = leaving.returned
                    if handlers.result_at is None or (one.kind == "known" and one.chosen is None):
                        continue
                    if one.kind != "known" or one.chosen is None:
                        returned.add(None)
                        continue
                    returned.add((one.number, one.chosen))
                    at = one.chosen.position or handlers.result_at
                    setting.moves.add(
                        Move(function.identity, value, frozenset(), one.number, one.chosen, at, None, True)
                    )
    return found


def _all_returned(handling: Mapping[str, set[Returned]]) -> set[Returned]:
    """All that handlers can return."""
    return {one for returned in handling.values() for one in returned}


@dataclass(slots=True)
class _Paths:
    """What is needed to say how a key's steps are taken."""

    work: Work
    key: str
    setting: Setting
    scans: Mapping[str, Scan]
    guards: dict[str, Guards] = field(default_factory=dict)
    # The names of functions that do nothing but store: as actions they say no more than the step itself.
    setters: frozenset[str] = frozenset()


def _guards(paths: _Paths, function: str) -> Guards:
    found = paths.guards.get(function)
    if found is None:
        scan = paths.scans[function]
        standing = {alias.variable for alias in scan.aliases if alias.key.key == paths.key}
        standing |= {name for name, copied in scan.copies.items() if copied.key == paths.key}
        known = paths.work.paths.get(function)
        if known is None:
            known = paths.work.paths[function] = paths_of(scan.function, paths.work.read)
        found = paths.guards[function] = Guards(known, paths.key, frozenset(standing))
    return found


def _way(paths: _Paths, move: Move) -> Way:
    """The conditions and actions of a step: where it was chosen, where it is stored, the calls between."""
    places = [(move.chosen.function, move.chosen.block)]
    if move.block >= 0 and (move.function, move.block) not in places:
        places.append((move.function, move.block))
    parts: list[Condition] = []
    called: list[str] = []
    for function, block in _callers(paths, places[0][0], move.source):
        parts.extend(conditions(_guards(paths, function), block))
    for function, block in places:
        parts.extend(conditions(_guards(paths, function), block))
        called.extend(actions(_guards(paths, function), block, paths.setters))
    if move.through is not None:
        called = [name for name in called if name != move.through[0]]
    return way_of(parts, called, move.chosen.function)


def _callers(paths: _Paths, function: str, source: int | None) -> list[tuple[str, int]]:
    """Where a function of this file alone was called from in a state, if that is one place; outermost first."""
    found: list[tuple[str, int]] = []
    while function in paths.scans and paths.scans[function].function.static and len(found) < MOST_DEPTH:
        sites = {(caller, block) for caller, block, known in paths.setting.sites.get(function, ()) if known == source}
        if len(sites) != 1 or source is None:
            break
        (site,) = sites
        if site in found:
            break
        found.insert(0, site)
        function = site[0]
    return found


def _only_stores(function: Function) -> bool:
    """Whether a function calls nothing."""
    return not any(isinstance(statement, Call) for block in function.blocks for statement in block.statements)


def _settle_stores(work: Work, key: str, setting: Setting) -> None:
    """Stores of computed values whose every value was seen: what they store is known after all."""
    # All of a local variable's values are seen from its function's start; a store that is not reached stores nothing.
    key_is_local = any(scan.keys[key].key.scope == "local" for scan in work.scans if key in scan.keys)
    for number, (store, at) in enumerate(work.stores):
        if store.key != key or store.parameter is not None or len(store.constants) == 1:
            continue
        seen = setting.stored.get((store.function, at), set())
        if None in seen or (not seen and not key_is_local):
            continue
        constants = _constants(work, seen, store.where)
        work.stores[number] = (replace(store, constants=constants, why_unknown="", stepped=False), at)


def _settle_calls(work: Work, key: str, setting: Setting) -> None:
    """Calls of the key's setters with computed arguments whose every value was seen."""
    setters = {(store.function, store.parameter) for store, _ in work.stores if store.key == key}
    settled: list[tuple[CallFact, Position]] = []
    for call, at in work.calls:
        seen = setting.handed.get((call.function, at, call.argument), set())
        if call.constant is not None or (call.callee, call.argument) not in setters or not seen or None in seen:
            settled.append((call, at))
            continue
        for constant in _constants(work, seen, call.where):
            settled.append((replace(call, constant=constant, text=""), at))
    work.calls[:] = settled


def _constants(work: Work, seen: set[tuple[int, Chosen] | None], where: Origin) -> tuple[Constant, ...]:
    values = sorted((one for one in seen if one is not None), key=lambda one: (one[0], one[1].block))
    return tuple(
        dict.fromkeys(constant_at(work.names, value, chosen.position, chosen.name, where) for value, chosen in values)
    )


def _asks_others(work: Work, scan: Scan) -> bool:
    """Whether a function calls what may be a setter in another unit."""
    return any(name not in work.by_name and sets(name) for _, name in scan.calls)


def _aliases(scans: Sequence[Scan], key: str) -> dict[tuple[str, str], frozenset[str]]:
    found: dict[tuple[str, str], set[str]] = {}
    for scan in scans:
        for alias in scan.aliases:
            if alias.key.key == key:
                way = "" if alias.anywhere else alias.key.instance
                found.setdefault((scan.function.identity, way), set()).add(alias.variable)
    return {way: frozenset(names) for way, names in found.items()}


def _commits(scans: Sequence[Scan], key: str) -> frozenset[str]:
    """The lasting variables that are copied into the state: next states that are committed later."""
    return frozenset(
        inner.place.variable.identity
        for scan in scans
        for _, statement, _ in scan.keys[key].stores
        if isinstance(statement, Assign)
        and isinstance(inner := uncast(statement.value), Load)
        and isinstance(inner.place, VariablePlace)
        and inner.place.variable.lasting
    )


def _has_setter(scans: Sequence[Scan], key: str) -> bool:
    """Whether some function stores one of its parameters in the key."""
    return any(stores_parameter(scan.keys[key]) for scan in scans)


def _unconditional(work: Work, key: str) -> None:
    """Stores in a unit that never looks at the state: from any state to each constant."""
    scans = {scan.function.identity: scan for scan in work.scans if key in scan.keys}
    paths = _Paths(work, key, Setting(key, frozenset(), work.by_name.get, frozenset(), lambda _: frozenset()), scans)
    for store, at in work.stores:
        if store.key == key and not store.fresh and store.constants:
            function, where = store.function, store.where
            block = next((block for block, one, _ in scans[function].keys[key].stores if one.position == at), 0)
            guards = _guards(paths, function)
            way = way_of(conditions(guards, block), actions(guards, block, frozenset()), function)
            for constant in store.constants:
                work.transitions.append(
                    TransitionFact(key, function, None, (), constant, way.guard, where, function, None, False, *way[1:])
                )


def _writers(work: Work, key: str, scans: Sequence[Scan], callers: Mapping[str, set[str]]) -> frozenset[str]:
    """The functions that store into the key, and those that call one of them."""
    by_identity = {scan.function.identity: scan for scan in work.scans}
    found = {scan.function.identity for scan in scans if scan.keys[key].stores}
    pending = list(found)
    depth = dict.fromkeys(found, 0)
    while pending:
        identity = pending.pop()
        if depth[identity] >= 2:
            continue
        name = by_identity[identity].function.name
        for caller in callers.get(name, ()):
            if caller not in found and (caller, key) not in work.apart:
                found.add(caller)
                depth[caller] = depth[identity] + 1
                pending.append(caller)
    return frozenset(found)
