"""From a unit's IR to what it says about state variables.

One pass over every function notes dispatches, tests and stores by key; then only keys that could be states in the whole
program are worked out: the places get their original spelling, falls and defaults are judged, and ``state_flow``
finds the transitions. Coroutines made of ``case __LINE__`` label their cases with line numbers and are marked as such.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from typing import Literal

from stepring.meaning.builder import successors
from stepring.meaning.show import expr_text
from stepring.meaning.types import (
    AddressOf,
    Assign,
    Binary,
    Branch,
    Call,
    Cast,
    Clobber,
    Const,
    Expr,
    Function,
    FunctionName,
    IntType,
    Load,
    Object,
    PointerType,
    Return,
    StructLayout,
    StructType,
    Switch,
    TypedUnit,
    Unary,
    Variable,
    VariablePlace,
)
from stepring.places import Origin, Position
from stepring.read.types import ReadUnit
from stepring.shapes.facts import (
    CallFact,
    Constant,
    DispatchFact,
    Family,
    ForwardFact,
    KeyFact,
    LabelFact,
    StateFacts,
    StoreFact,
    TestFact,
    TransitionFact,
)
from stepring.shapes.keys import PlaceKey, is_integral, place_key, uncast
from stepring.shapes.names import Names, constant_at, constant_of, families, sets, starts
from stepring.shapes.state_aliases import Alias, copies, getters, working_copies, working_parameters
from stepring.shapes.state_flow import (
    ENTRY,
    FEW_VISITS,
    Setting,
    flow,
    guard_text,
)

_WIDE = 1 << 63


@dataclass(slots=True)
class _Seen:
    """What the first pass found of one key in one function."""

    key: PlaceKey
    type: object
    dispatches: list[tuple[int, Switch]] = field(default_factory=list)
    tests: list[tuple[Const, Position]] = field(default_factory=list)
    stores: list[tuple[int, Assign | Call | Clobber, PlaceKey]] = field(default_factory=list)
    instances: set[str] = field(default_factory=set)
    read_instances: set[str] = field(default_factory=set)


@dataclass(slots=True)
class _Scan:
    """One function after the first pass."""

    function: Function
    keys: dict[str, _Seen]
    copies: dict[str, PlaceKey]
    aliases: tuple[Alias, ...]
    calls: list[tuple[Call, str]]
    exposed: list[tuple[str, Position]]


def state_facts(unit: TypedUnit, read: ReadUnit) -> StateFacts:
    """What the unit says about state variables."""
    names = Names(read.macros, unit.types, read.origin)
    own = [function for function in unit.functions if function.own]
    known = getters(own)
    handed = working_parameters(own)
    scans = [_scan(function, known, handed.get(function.identity, ())) for function in own]
    chosen = _candidates(scans, names)
    work = _Work(unit, read, names, {function.name: function for function in own}, scans)
    for scan in scans:
        _function_facts(work, scan, chosen)
    _transitions(work, chosen)
    _key_facts(work, chosen)
    return StateFacts(
        tuple(work.keys.values()),
        tuple(work.dispatches),
        tuple(work.tests),
        tuple(store for store, _ in work.stores),
        tuple(dict.fromkeys(work.transitions)),
        tuple(work.calls),
        _families_by_key(names, work),
        tuple(work.bounded),
        tuple(work.exposed),
        _starters(work),
        tuple(work.forwards),
    )


def _starters(work: "_Work") -> tuple[tuple[str, str | None], ...]:
    """The functions whose names say that they give an object its first state, and who calls them."""
    own = {scan.function.identity for scan in work.scans}
    found: dict[tuple[str, str | None], None] = {
        (store.function, None): None for store, _ in work.stores if store.function in own and starts(store.function)
    }
    for scan in work.scans:
        for _, name in scan.calls:
            if starts(name):
                found[_identity(work, name), scan.function.identity] = None
    return tuple(found)


@dataclass(slots=True)
class _Work:
    """The facts under construction."""

    unit: TypedUnit
    read: ReadUnit
    names: Names
    by_name: Mapping[str, Function]
    scans: Sequence[_Scan]
    keys: dict[str, KeyFact] = field(default_factory=dict)
    dispatches: list[DispatchFact] = field(default_factory=list)
    tests: list[TestFact] = field(default_factory=list)
    # Each store with its place in the text that was parsed.
    stores: list[tuple[StoreFact, Position]] = field(default_factory=list)
    transitions: list[TransitionFact] = field(default_factory=list)
    calls: list[CallFact] = field(default_factory=list)
    exposed: list[tuple[str, Origin]] = field(default_factory=list)
    bounded: list[str] = field(default_factory=list)
    setters: dict[str, bool] = field(default_factory=dict)
    forwards: list[ForwardFact] = field(default_factory=list)


# ------------------------------------------------------------------------------------------------------ first pass


def _scan(function: Function, known: Mapping[str, PlaceKey], handed: tuple[Alias, ...]) -> _Scan:
    scan = _Scan(function, {}, copies(function, known), (*working_copies(function), *handed), [], [])
    for number, block in enumerate(function.blocks):
        for statement in block.statements:
            if isinstance(statement, Assign):
                if is_integral(statement.place):
                    _note_store(scan, number, statement, statement.place)
                _note_exposed(scan, statement.value, statement.position)
            elif isinstance(statement, Call):
                if statement.result is not None and is_integral(statement.result):
                    _note_store(scan, number, statement, statement.result)
                if isinstance(statement.callee, FunctionName):
                    scan.calls.append((statement, statement.callee.name))
                for argument in statement.arguments:
                    _note_exposed(scan, argument, statement.position)
            elif isinstance(statement, Clobber):
                for place in statement.places:
                    if is_integral(place):
                        _note_store(scan, number, statement, place)
        end = block.terminator
        if isinstance(end, Switch):
            for key, type_ in _tested_keys(scan, end.value):
                seen = _seen(scan, key, type_)
                seen.dispatches.append((number, end))
                seen.read_instances.add(key.instance)
        elif isinstance(end, Branch):
            _note_tests(scan, end.condition, end.position)
    return scan


def _tested_keys(scan: _Scan, expr: Expr) -> tuple[tuple[PlaceKey, object], ...]:
    """The keys whose value an expression is; a parameter can stand for several."""
    inner = uncast(expr)
    if not isinstance(inner, Load):
        return ()
    if isinstance(inner.place, VariablePlace):
        name = inner.place.variable.identity
        aliased = tuple((alias.key, inner.type) for alias in scan.aliases if alias.variable == name)
        if aliased:
            return aliased
        if name in scan.copies:
            return ((scan.copies[name], inner.type),)
    if not is_integral(inner.place):
        return ()
    key = place_key(inner.place, scan.function.identity)
    return () if key is None else ((key, inner.place.type),)


def _seen(scan: _Scan, key: PlaceKey, type_: object) -> _Seen:
    seen = scan.keys.get(key.key)
    if seen is None:
        seen = scan.keys[key.key] = _Seen(key, type_)
    seen.instances.add(key.instance)
    return seen


def _note_store(scan: _Scan, block: int, statement: Assign | Call | Clobber, place: object) -> None:
    key = place_key(place, scan.function.identity)  # type: ignore[arg-type]
    if key is not None and not (isinstance(place, VariablePlace) and place.variable.storage == "temporary"):
        _seen(scan, key, place.type).stores.append((block, statement, key))  # type: ignore[attr-defined]


def _note_tests(scan: _Scan, condition: Expr, position: Position) -> None:
    condition = uncast(condition)
    if isinstance(condition, Unary) and condition.op == "!":
        _note_tests(scan, condition.operand, position)
    elif isinstance(condition, Binary) and condition.op in ("==", "!=", "<", "<=", ">", ">="):
        for side, other in ((condition.left, condition.right), (condition.right, condition.left)):
            number = uncast(other)
            for key, type_ in _tested_keys(scan, side):
                if key.scope == "parameter":
                    continue
                seen = _seen(scan, key, type_)
                seen.read_instances.add(key.instance)
                if isinstance(number, Const) and condition.op in ("==", "!="):
                    seen.tests.append((number, condition.position or position))


def _note_exposed(scan: _Scan, expr: Expr, position: Position) -> None:
    """An integer whose address is taken can be changed by what got the address."""
    stack = [expr]
    while stack:
        node = stack.pop()
        if isinstance(node, AddressOf):
            if is_integral(node.place):
                key = place_key(node.place, scan.function.identity)
                if key is not None:
                    scan.exposed.append((key.key, position))
        elif isinstance(node, Cast | Unary):
            stack.append(node.operand)
        elif isinstance(node, Binary):
            stack.extend((node.left, node.right))


# ------------------------------------------------------------------------------------------------------ candidates


def _candidates(scans: Sequence[_Scan], names: Names) -> frozenset[str]:
    """The keys worth working out: dispatched on here, or holding named constants where another unit may dispatch."""
    chosen: set[str] = set()
    shared: dict[str, list[_Seen]] = {}
    for scan in scans:
        for key, seen in scan.keys.items():
            if seen.dispatches:
                if seen.key.scope == "lasting" or any(_carried(scan, seen, block) for block, _ in seen.dispatches):
                    chosen.add(key)
            elif seen.key.scope == "lasting" and not key.endswith("[]") and _shared(seen):
                shared.setdefault(key, []).append(seen)
    chosen.update(key for key, seen in shared.items() if key not in chosen and _holds_names(seen, names))
    return frozenset(chosen)


def _holds_names(seen: Sequence[_Seen], names: Names) -> bool:
    """Whether a key is only ever given constants or copies, and some of the constants have names: no count, no
    length."""
    if any(_stores_parameter(one) for one in seen):
        return True
    constants: list[Const] = [number for one in seen for number, _ in one.tests]
    for one in seen:
        for _, statement, _ in one.stores:
            inner = uncast(statement.value) if isinstance(statement, Assign) else None
            if isinstance(inner, Const):
                constants.append(inner)
            elif isinstance(inner, Binary):
                return False
    if any(isinstance(one.type, IntType) and one.type.enum is not None for one in seen):
        return bool(constants)
    if any(const.name is not None for const in constants):
        return True
    return any(
        const.position is not None and const.position.line and names.origin(const.position).spelling.isidentifier()
        for const in constants
        if isinstance(const.type, IntType)
    )


def _stores_parameter(seen: _Seen) -> bool:
    """Whether some store gives the key a parameter's value, as setters do."""
    return any(
        isinstance(statement, Assign)
        and isinstance(inner := uncast(statement.value), Load)
        and isinstance(inner.place, VariablePlace)
        and inner.place.variable.storage == "parameter"
        for _, statement, _ in seen.stores
    )


def _shared(seen: _Seen) -> bool:
    root = seen.key.root
    if seen.key.kind == "member":
        return True
    return root is not None and root.storage in ("global", "extern")


def _constant_store(statement: Assign | Call | Clobber) -> bool:
    return isinstance(statement, Assign) and isinstance(uncast(statement.value), Const)


# ------------------------------------------------------------------------------------------------------ facts


def _function_facts(work: _Work, scan: _Scan, chosen: frozenset[str]) -> None:
    function = scan.function
    for key, seen in scan.keys.items():
        if key not in chosen:
            continue
        for block, switch in seen.dispatches:
            work.dispatches.append(_dispatch(work, scan, seen, block, switch))
        for number, position in seen.tests:
            where = work.names.origin(position)
            work.tests.append(TestFact(key, function.identity, constant_of(work.names, number, where), where))
        for block, statement, place in seen.stores:
            store = _store(work, scan, seen, statement, place)
            store = replace(store, fresh=True) if _before_all(scan, seen, block) else store
            work.stores.append((store, statement.position))
    for call, name in scan.calls:
        if not _may_set(work, name):
            continue
        for index, argument in enumerate(call.arguments):
            inner = uncast(argument)
            if isinstance(inner, Const) and isinstance(inner.type, IntType):
                where = work.names.origin(call.position)
                constant = constant_of(work.names, inner, where)
                if constant.name is not None:
                    callee = work.by_name.get(name)
                    identity = callee.identity if callee is not None else name
                    work.calls.append(CallFact(identity, index, constant, function.identity, where))
            elif isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
                _note_forward(work, function, inner.place.variable, name, index)
    for key, position in scan.exposed:
        if key in chosen:
            work.exposed.append((key, work.names.origin(position)))


def _note_forward(work: _Work, function: Function, variable: Variable, name: str, argument: int) -> None:
    """A parameter that is handed on as it came."""
    for number, parameter in enumerate(function.parameters):
        if parameter.identity == variable.identity and not _assigned(function, variable):
            work.forwards.append(ForwardFact(_identity(work, name), argument, function.identity, number))


def _before_all(scan: _Scan, seen: _Seen, block: int) -> bool:
    """Whether a local variable is given its first value: no dispatch on it comes before the store."""
    return seen.key.scope == "local" and not any(
        block in _reach_after(scan.function, dispatch) for dispatch, _ in seen.dispatches
    )


def _may_set(work: _Work, name: str) -> bool:
    """Whether a function may be a setter: one seen here that stores a parameter or hands it on to one that may be, or
    one elsewhere that is named like one."""
    known = work.setters.get(name)
    if known is None:
        function = work.by_name.get(name)
        work.setters[name] = False  # for one that calls itself
        known = work.setters[name] = sets(name) if function is None else _stores_own(work, function)
    return known


def _stores_own(work: _Work, function: Function) -> bool:
    own = {parameter.identity for parameter in function.parameters}

    def is_own(value: Expr) -> bool:
        inner = uncast(value)
        return (
            isinstance(inner, Load) and isinstance(inner.place, VariablePlace) and inner.place.variable.identity in own
        )

    statements = [statement for block in function.blocks for statement in block.statements]
    return any(isinstance(statement, Assign) and is_own(statement.value) for statement in statements) or any(
        isinstance(statement, Call)
        and isinstance(statement.callee, FunctionName)
        and any(is_own(argument) for argument in statement.arguments)
        and _may_set(work, statement.callee.name)
        for statement in statements
    )


def _store(work: _Work, scan: _Scan, seen: _Seen, statement: Assign | Call | Clobber, place: PlaceKey) -> StoreFact:
    function = scan.function
    where = work.names.origin(statement.position)
    fresh = _fresh(function, place) and place.instance not in seen.read_instances
    if isinstance(statement, Clobber):
        return StoreFact(seen.key.key, function.identity, where, (), statement.why, fresh=fresh)
    if isinstance(statement, Call):
        name = statement.callee.name if isinstance(statement.callee, FunctionName) else ""
        if name and name in work.by_name:
            returned = _returned_constants(work, work.by_name[name])
            if returned is not None:
                return StoreFact(seen.key.key, function.identity, where, returned, fresh=fresh)
        return StoreFact(seen.key.key, function.identity, where, (), f"the value returned by {name or 'a call'}")
    constants, why, parameter, stepped, copied = _values(work, scan, statement.value, seen.key.key, where)
    return StoreFact(
        seen.key.key, function.identity, where, constants, why, parameter, fresh and bool(constants), stepped, copied
    )


def _fresh(function: Function, place: PlaceKey) -> bool:
    """Whether the object is the function's own (a local, or reached through a local that is no parameter)."""
    root = place.root
    return root is not None and root.storage in ("automatic", "temporary") and place.kind == "member"


def _values(
    work: _Work, scan: _Scan, value: Expr, key: str, where: Origin, depth: int = 0
) -> tuple[tuple[Constant, ...], str, int | None, bool, bool]:
    """The constants that a stored value can be: (constants, why not known, parameter, stepped, copied)."""
    inner = uncast(value)
    if isinstance(inner, Const):
        return (constant_of(work.names, inner, where),), "", None, False, False
    if isinstance(inner, Load):
        found = place_key(inner.place, scan.function.identity)
        if found is not None and found.key == key:
            return (), "", None, False, True
        if isinstance(inner.place, VariablePlace):
            variable = inner.place.variable
            for number, parameter in enumerate(scan.function.parameters):
                if parameter.identity == variable.identity and not _assigned(scan.function, variable):
                    return (), f"the parameter {variable.name}", number, False, False
            if depth < 4 and not (variable.lasting and variable.storage in ("global", "extern")):
                return _from_variable(work, scan, variable, key, where, depth)
        if found is not None and found.kind == "member":
            return (), f"the value of {found.shown}", None, False, False
    if isinstance(inner, Binary) and _mentions(inner, key, scan.function):
        return (), "arithmetic on its own value", None, True, False
    return (), f"the value of {expr_text(inner)}"[:120], None, False, False


def _assigned(function: Function, variable: Variable) -> bool:
    return any(
        isinstance(statement, Assign)
        and isinstance(statement.place, VariablePlace)
        and statement.place.variable.identity == variable.identity
        for block in function.blocks
        for statement in block.statements
    )


def _from_variable(
    work: _Work, scan: _Scan, variable: Variable, key: str, where: Origin, depth: int
) -> tuple[tuple[Constant, ...], str, int | None, bool, bool]:
    """What a variable can hold: the join over everything that is stored in it."""
    constants: list[Constant] = []
    copied = False
    functions = [other.function for other in work.scans] if variable.lasting else [scan.function]
    stored = False
    for function in functions:
        for block in function.blocks:
            for statement in block.statements:
                if isinstance(statement, Assign) and isinstance(statement.place, VariablePlace):
                    if statement.place.variable.identity != variable.identity:
                        continue
                    stored = True
                    here = work.names.origin(statement.position)
                    some, why, parameter, stepped, copy = _values(work, scan, statement.value, key, here, depth + 1)
                    if why or stepped:
                        return (), why or "a computed value", parameter, stepped, False
                    constants.extend(some)
                    copied = copied or copy
                elif isinstance(statement, Call) and isinstance(statement.result, VariablePlace):
                    if statement.result.variable.identity != variable.identity:
                        continue
                    stored = True
                    name = statement.callee.name if isinstance(statement.callee, FunctionName) else "a call"
                    known = work.by_name.get(name)
                    returned = _returned_constants(work, known) if known is not None else None
                    if returned is None:
                        return (), f"the value returned by {name}", None, False, False
                    constants.extend(returned)
    if not stored:
        return (), f"the value of {variable.name}", None, False, False
    if variable.lasting:
        for item in work.unit.objects:
            if item.variable.identity == variable.identity:
                constants.extend(_initial_constants(work, item, ()))
    return tuple(dict.fromkeys(constants)), "", None, False, copied


def _returned_constants(work: _Work, function: Function) -> tuple[Constant, ...] | None:
    """The constants that a function can return, or None where it returns something else."""
    found: list[Constant] = []
    for block in function.blocks:
        end = block.terminator
        if isinstance(end, Return):
            inner = uncast(end.value) if end.value is not None else None
            where = work.names.origin(end.position)
            if isinstance(inner, Const):
                found.append(constant_of(work.names, inner, where))
            elif isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
                variable = inner.place.variable
                if variable.storage not in ("automatic", "temporary"):
                    return None
                scan = next(other for other in work.scans if other.function is function)
                constants, why, _, stepped, _ = _from_variable(work, scan, variable, "", where, 3)
                if why or stepped:
                    return None
                found.extend(constants)
            else:
                return None
    return tuple(dict.fromkeys(found)) or None


def _mentions(expr: Expr, key: str, function: Function) -> bool:
    stack = [expr]
    while stack:
        node = stack.pop()
        if isinstance(node, Load):
            found = place_key(node.place, function.identity)
            if found is not None and found.key == key:
                return True
        elif isinstance(node, Cast | Unary):
            stack.append(node.operand)
        elif isinstance(node, Binary):
            stack.extend((node.left, node.right))
    return False


# ------------------------------------------------------------------------------------------------------ dispatches


def _dispatch(work: _Work, scan: _Scan, seen: _Seen, block: int, switch: Switch) -> DispatchFact:
    function = scan.function
    names = work.names
    where = names.origin(switch.syntax.position)
    falls = {fall.label: fall.source for fall in switch.syntax.falls}
    labels: list[LabelFact] = []
    characters = False
    line_numbers = 0
    for case in switch.cases:
        at = names.origin(case.position)
        constant = constant_at(names, case.written, case.constant, case.name, at)
        characters = characters or constant.where.spelling.startswith(("'", "L'"))
        if constant.name is None and case.written == at.line and case.low > 1:
            line_numbers += 1
        source = falls.get(case.position)
        labels.append(
            LabelFact(
                Constant(case.low, constant.name, constant.where),
                case.high,
                case.written,
                at,
                names.origin(source) if source is not None else None,
                source is not None and _marked(work, source, case.position),
                source is not None and _overwrites(function, case.target, seen.key.key),
            )
        )
    reach = [_reach(function, case.target, block) for case in switch.cases]
    default_does: Literal["none", "nothing", "stores", "calls", "leaves", "work"] = "none"
    if switch.syntax.default is not None:
        others = frozenset().union(*reach) if reach else frozenset()
        default_does = _does(function, _reach(function, switch.default, block) - others, seen.key.key)
    return DispatchFact(
        seen.key.key,
        seen.key.instance,
        function.identity,
        expr_text(switch.value),
        where,
        tuple(labels),
        names.origin(switch.syntax.default) if switch.syntax.default is not None else None,
        default_does,
        tuple(names.origin(position) for position in switch.syntax.unreached),
        block in _reach_after(function, block),
        characters,
        line_numbers > 0 and line_numbers >= len([label for label in labels if label.constant.value > 1]),
        seen.key.scope == "local" and _carried(scan, seen, block),
        _is_packet(function, seen.key),
        _is_working(scan, switch.value),
        switch.syntax.end,
    )


def _is_working(scan: _Scan, value: Expr) -> bool:
    """Whether a dispatch is on a local variable that stands for the state."""
    inner = uncast(value)
    return (
        isinstance(inner, Load)
        and isinstance(inner.place, VariablePlace)
        and inner.place.variable.identity in {alias.variable for alias in scan.aliases if not alias.anywhere}
    )


def _is_packet(function: Function, key: PlaceKey) -> bool:
    """Whether the object is reached through a local pointer that was made from a pointer to bytes."""
    root = key.root
    if root is None or root.storage != "automatic" or not isinstance(root.type, PointerType):
        return False
    made = [
        statement.value
        for block in function.blocks
        for statement in block.statements
        if isinstance(statement, Assign)
        and isinstance(statement.place, VariablePlace)
        and statement.place.variable.identity == root.identity
    ]
    return any(
        isinstance(value, Cast)
        and isinstance(inner := uncast(value).type, PointerType)
        and isinstance(inner.to, IntType)
        and inner.to.width == 8
        for value in made
    )


def _carried(scan: _Scan, seen: _Seen, dispatch: int) -> bool:
    """Whether a constant stored in a loop can reach the dispatch with no other store on the way."""
    function = scan.function
    around = _reach_after(function, dispatch)
    if dispatch not in around:
        return False
    storing = {block for block, _, _ in seen.stores}
    for block, statement, _ in seen.stores:
        last = [one for number, one, _ in seen.stores if number == block][-1]
        if block not in around or statement is not last or not _constant_store(statement):
            continue
        passed = {block}
        pending = [block]
        while pending:
            for target in _targets(function, pending.pop()):
                if target == dispatch and target not in storing:
                    return True
                if target not in passed and target not in storing:
                    passed.add(target)
                    pending.append(target)
    return False


def _marked(work: _Work, source: Position, label: Position) -> bool:
    """Whether a comment or attribute between two places says that the fall is meant."""
    return any(file == label.file and source.line <= line <= label.line for file, line in work.read.marked_falls)


def _overwrites(function: Function, target: int, key: str) -> bool:
    """Whether the code run into stores the state at once."""
    for statement in function.blocks[target].statements:
        if isinstance(statement, Assign):
            found = place_key(statement.place, function.identity)
            if found is not None and found.key == key:
                return True
    return False


def _targets(function: Function, block: int) -> tuple[int, ...]:
    return successors(function.blocks[block].terminator)


def _reach(function: Function, start: int, stop: int) -> frozenset[int]:
    """The blocks that control can come to from ``start`` without passing ``stop`` again."""
    seen = {start}
    pending = [start]
    while pending:
        for target in _targets(function, pending.pop()):
            if target not in seen and target != stop:
                seen.add(target)
                pending.append(target)
    return frozenset(seen)


def _reach_after(function: Function, block: int) -> frozenset[int]:
    return frozenset().union(*(_reach(function, target, -1) for target in set(_targets(function, block))))


def _does(
    function: Function, region: frozenset[int], key: str
) -> Literal["nothing", "stores", "calls", "leaves", "work"]:
    calls = work = leaves = False
    for number in region:
        for statement in function.blocks[number].statements:
            if isinstance(statement, Assign):
                found = place_key(statement.place, function.identity)
                if found is not None and found.key == key:
                    return "stores"
                work = True
            elif isinstance(statement, Call):
                calls = True
        leaves = leaves or isinstance(function.blocks[number].terminator, Return)
    return "calls" if calls else "work" if work else "leaves" if leaves else "nothing"


# ------------------------------------------------------------------------------------------------------ transitions


def _transitions(work: _Work, chosen: frozenset[str]) -> None:
    by_key: dict[str, list[_Scan]] = {}
    for scan in work.scans:
        for key in scan.keys:
            if key in chosen:
                by_key.setdefault(key, []).append(scan)
    callers: dict[str, set[str]] = {}
    for scan in work.scans:
        for _, name in scan.calls:
            callers.setdefault(name, set()).add(scan.function.identity)
    for key, scans in by_key.items():
        _transitions_of(work, key, scans, callers)


def _transitions_of(work: _Work, key: str, scans: Sequence[_Scan], callers: Mapping[str, set[str]]) -> None:
    if not any(scan.keys[key].read_instances for scan in scans) and not _has_setter(scans, key):
        _unconditional(work, key)
        return
    writers = _writers(work, key, scans, callers)
    first = scans[0].keys[key]
    outside = first.key.scope == "lasting" and _shared(first)
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
    )
    by_identity = {scan.function.identity: scan for scan in work.scans}

    def instances(function: str) -> frozenset[str]:
        scan = by_identity.get(function)
        seen = scan.keys.get(key) if scan is not None else None
        return frozenset(seen.instances) if seen is not None else frozenset()

    storing = {scan.function.identity for scan in scans if scan.keys[key].stores}
    shared = first.key.scope == "lasting" and (_shared(first) or len(storing) > 1)
    setting = Setting(
        key,
        mentioned,
        work.by_name.get,
        writers,
        instances,
        _commits(scans, key),
        shared=shared,
        outside=outside,
        aliases=_aliases(scans, key),
    )
    dispatched = any(scan.keys[key].dispatches for scan in scans)
    if not dispatched:
        setting.most_visits = FEW_VISITS
    # Functions that dispatch or test come first: what they call is then seen with its sources.
    readers = [scan for scan in scans if scan.keys[key].read_instances or scan.function.identity in writers]
    readers.sort(key=lambda scan: not scan.keys[key].read_instances)
    others = [
        scan
        for scan in work.scans
        if key not in scan.keys and any(_identity(work, name) in writers for _, name in scan.calls)
    ]
    for scan in [*readers, *others]:
        function = scan.function
        seen = scan.keys.get(key)
        if function.identity in setting.followed and function.static and (seen is None or not seen.read_instances):
            continue
        for instance in sorted(seen.instances) if seen is not None else [key]:
            reads = seen is not None and instance in seen.read_instances
            if seen is not None and not reads and _is_fresh(seen, instance):
                continue
            flow(setting, function, instance, ENTRY, ENTRY, {})
    if setting.bounded and not dispatched:
        _unconditional(work, key)
        return
    if setting.bounded:
        work.bounded.append(key)
    for move in sorted(
        setting.moves,
        key=lambda move: (move.at, move.source is None, move.source or 0, move.target, move.chosen.block),
    ):
        if first.key.scope == "local" and move.source is None and not move.excluded:
            continue  # a local variable has no state before its first value
        here = move.chosen.position if move.chosen.position is not None and move.chosen.position.line else move.at
        where = work.names.origin(here)
        target = constant_at(work.names, move.target, move.chosen.position, move.chosen.name, where)
        work.transitions.append(
            TransitionFact(
                key,
                move.chosen.function,
                move.source,
                tuple(sorted(move.excluded)) if move.source is None else (),
                target,
                _guard(by_identity[move.chosen.function], move.chosen.block, key),
                where,
                move.function,
                move.through,
                move.dispatched,
            )
        )
    if not setting.bounded:
        _settle_stores(work, key, setting)


def _guard(scan: _Scan, block: int, key: str) -> str:
    standing = frozenset(alias.variable for alias in scan.aliases if alias.key.key == key)
    return guard_text(scan.function, block, key, standing)


def _settle_stores(work: _Work, key: str, setting: Setting) -> None:
    """Stores of computed values whose every value was seen: what they store is known after all."""
    # All of a local variable's values are seen from its function's start; a store that is not reached stores nothing.
    key_is_local = any(scan.keys[key].key.scope == "local" for scan in work.scans if key in scan.keys)
    for number, (store, at) in enumerate(work.stores):
        if store.key != key or store.parameter is not None or len(store.constants) == 1:
            continue
        seen = setting.stored.get((store.function, at), set())
        if None in seen or (not seen and not key_is_local):
            continue
        values = sorted((one for one in seen if one is not None), key=lambda one: (one[0], one[1].block))
        constants = dict.fromkeys(
            constant_at(work.names, value, chosen.position, chosen.name, store.where) for value, chosen in values
        )
        work.stores[number] = (replace(store, constants=tuple(constants), why_unknown="", stepped=False), at)


def _asks_others(work: _Work, scan: _Scan) -> bool:
    """Whether a function calls what may be a setter in another unit."""
    return any(name not in work.by_name and sets(name) for _, name in scan.calls)


def _aliases(scans: Sequence[_Scan], key: str) -> dict[tuple[str, str], frozenset[str]]:
    found: dict[tuple[str, str], set[str]] = {}
    for scan in scans:
        for alias in scan.aliases:
            if alias.key.key == key:
                way = "" if alias.anywhere else alias.key.instance
                found.setdefault((scan.function.identity, way), set()).add(alias.variable)
    return {way: frozenset(names) for way, names in found.items()}


def _commits(scans: Sequence[_Scan], key: str) -> frozenset[str]:
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


def _has_setter(scans: Sequence[_Scan], key: str) -> bool:
    """Whether some function stores one of its parameters in the key."""
    return any(_stores_parameter(scan.keys[key]) for scan in scans)


def _unconditional(work: _Work, key: str) -> None:
    """Stores in a unit that never looks at the state: from any state to each constant."""
    for store, _ in work.stores:
        if store.key == key and not store.fresh:
            for constant in store.constants:
                function, where = store.function, store.where
                work.transitions.append(TransitionFact(key, function, None, (), constant, "", where, function))


def _identity(work: _Work, name: str) -> str:
    function = work.by_name.get(name)
    return function.identity if function is not None else name


def _is_fresh(seen: _Seen, instance: str) -> bool:
    roots = [place.root for _, _, place in seen.stores if place.instance == instance]
    return (
        bool(roots)
        and all(root is not None and root.storage in ("automatic", "temporary") for root in roots)
        and (seen.key.kind == "member")
    )


def _writers(work: _Work, key: str, scans: Sequence[_Scan], callers: Mapping[str, set[str]]) -> frozenset[str]:
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
            if caller not in found:
                found.add(caller)
                depth[caller] = depth[identity] + 1
                pending.append(caller)
    return frozenset(found)


# ------------------------------------------------------------------------------------------------------ keys


def _key_facts(work: _Work, chosen: frozenset[str]) -> None:
    objects = _objects_by_key(work)
    for scan in work.scans:
        for key, seen in scan.keys.items():
            if key not in chosen or key in work.keys:
                continue
            root = seen.key.root
            type_ = seen.type
            where: Origin | None = None
            if seen.key.kind == "variable" and root is not None and root.position is not None:
                where = work.names.origin(root.position)
            if where is None:
                layout = work.unit.types.structs.get(key.rsplit(".", 1)[0]) if seen.key.kind == "member" else None
                if layout is not None and layout.position is not None:
                    where = work.names.origin(layout.position)
            if where is None:
                where = work.names.origin(scan.function.position)
            initials, zero = objects.get(key, ((), False))
            low, high, enum = -_WIDE, _WIDE, None
            if isinstance(type_, IntType):
                low, high, enum = type_.low, type_.high, type_.enum
            work.keys[key] = KeyFact(
                key,
                seen.key.shown,
                seen.key.kind,
                where,
                low,
                high,
                enum,
                seen.key.scope,
                initials,
                zero,
                work.names.origin(scan.function.position).file,
            )


def _objects_by_key(work: _Work) -> dict[str, tuple[tuple[Constant, ...], bool]]:
    """The initial values of each key: the constants that initialisers give, and whether some object starts as zero."""
    found: dict[str, tuple[list[Constant], bool]] = {}
    structs = work.unit.types.structs
    for item in work.unit.objects:
        type_ = item.variable.type
        if isinstance(type_, IntType):
            constants = _initial_constants(work, item, ())
            found[item.variable.identity] = (constants, not constants and not item.initial)
            continue
        given: dict[str, int] = {}
        for initial in item.initial:
            key = _member_key(structs, type_, initial.path, item.variable.identity)
            if key is None:
                continue
            inner = uncast(initial.value)
            given[key] = given.get(key, 0) + 1
            if isinstance(inner, Const):
                where = work.names.origin(initial.position)
                found.setdefault(key, ([], False))[0].append(constant_of(work.names, inner, where))
        for key, count in _member_counts(structs, type_, item.variable.identity, 0).items():
            constants, zero = found.setdefault(key, ([], False))
            found[key] = (constants, zero or count > given.get(key, 0))
    return {key: (tuple(dict.fromkeys(constants)), zero) for key, (constants, zero) in found.items()}


def _initial_constants(work: _Work, item: Object, path: tuple[str | int, ...]) -> list[Constant]:
    found = []
    for initial in item.initial:
        inner = uncast(initial.value)
        if initial.path == path and isinstance(inner, Const):
            found.append(constant_of(work.names, inner, work.names.origin(initial.position)))
    return found


def _member_key(
    structs: Mapping[str, StructLayout], type_: object, path: tuple[str | int, ...], identity: str
) -> str | None:
    key = identity
    for step in path:
        if isinstance(step, int):
            type_ = getattr(type_, "element", None)
            key = f"{key}[]"
        elif isinstance(type_, StructType):
            layout = structs.get(type_.identity)
            member = layout.field(step) if layout is not None else None
            if member is None:
                return None
            key = f"{type_.identity}.{step}"
            type_ = member.type
    return key if isinstance(type_, IntType) else None


def _member_counts(structs: Mapping[str, StructLayout], type_: object, key: str, depth: int) -> dict[str, int]:
    """How many scalars of each key an object of a type holds (elements of an array count once each)."""
    if isinstance(type_, IntType):
        return {key: 1}
    found: dict[str, int] = {}
    if depth > 6:
        return found
    if isinstance(type_, StructType):
        layout = structs.get(type_.identity)
        for member in layout.fields if layout is not None else ():
            inner = _member_counts(structs, member.type, f"{type_.identity}.{member.name}", depth + 1)
            for name, count in inner.items():
                found[name] = found.get(name, 0) + count
    elif hasattr(type_, "element"):
        inner = _member_counts(structs, type_.element, f"{key}[]", depth + 1)
        length = type_.length or 1  # type: ignore[attr-defined]
        found = {name: count * length for name, count in inner.items()}
    return found


def _families_by_key(names: Names, work: _Work) -> tuple[Family, ...]:
    by_key: dict[str, list[Constant]] = {}
    for dispatch in work.dispatches:
        by_key.setdefault(dispatch.key, []).extend(label.constant for label in dispatch.labels)
    for store, _ in work.stores:
        by_key.setdefault(store.key, []).extend(store.constants)
    found: dict[str, Family] = {}
    for constants in by_key.values():
        for family in families(names, constants):
            found.setdefault(family.identity, family)
    return tuple(found[identity] for identity in sorted(found))
