"""First pass over a unit's functions: which state-like variables each one dispatches on, tests or stores into.

Everything is noted by key (see ``keys``), with the block it happens in. Then the keys that could be states somewhere
in the program are chosen; the stages that follow work out only those.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from stepring.meaning.builder import successors
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
    Switch,
    TypedUnit,
    Unary,
    Unknown,
    VariablePlace,
)
from stepring.places import Origin, Position
from stepring.read.types import ReadUnit
from stepring.shapes.facts import (
    CallFact,
    DispatchFact,
    ForwardFact,
    KeyFact,
    StoreFact,
    TestFact,
    TransitionFact,
)
from stepring.shapes.keys import PlaceKey, is_integral, place_key, uncast
from stepring.shapes.names import STATE_NAME, Names
from stepring.shapes.state_aliases import Alias, copies, working_copies
from stepring.shapes.state_guards import Paths

if TYPE_CHECKING:  # state_handlers is made of what stands here
    from stepring.shapes.state_handlers import Handlers


@dataclass(slots=True)
class Seen:
    """What the first pass found of one key in one function."""

    key: PlaceKey
    type: object
    dispatches: list[tuple[int, Switch]] = field(default_factory=list)
    tests: list[tuple[Const, Position]] = field(default_factory=list)
    # Branches on its equality with a constant: the block, the constant, whether the first arm is that of equality.
    branches: list[tuple[int, Const, bool]] = field(default_factory=list)
    stores: list[tuple[int, Assign | Call | Clobber, PlaceKey]] = field(default_factory=list)
    instances: set[str] = field(default_factory=set)
    read_instances: set[str] = field(default_factory=set)


@dataclass(slots=True)
class Scan:
    """One function after the first pass."""

    function: Function
    keys: dict[str, Seen]
    copies: dict[str, PlaceKey]
    aliases: tuple[Alias, ...]
    calls: list[tuple[Call, str]]
    exposed: list[tuple[str, Position]]


@dataclass(slots=True)
class Work:
    """The facts under construction."""

    unit: TypedUnit
    read: ReadUnit
    names: Names
    by_name: Mapping[str, Function]
    scans: Sequence[Scan]
    # Functions that hand over the addresses of several variables with one machine, with that machine's key.
    apart: frozenset[tuple[str, str]] = frozenset()
    keys: dict[str, KeyFact] = field(default_factory=dict)
    dispatches: list[DispatchFact] = field(default_factory=list)
    tests: list[TestFact] = field(default_factory=list)
    # Each store with its place in the text that was parsed.
    stores: list[tuple[StoreFact, Position]] = field(default_factory=list)
    transitions: list[TransitionFact] = field(default_factory=list)
    # Each call with its place in the text that was parsed.
    calls: list[tuple[CallFact, Position]] = field(default_factory=list)
    exposed: list[tuple[str, Origin]] = field(default_factory=list)
    bounded: list[str] = field(default_factory=list)
    setters: dict[str, bool] = field(default_factory=dict)
    forwards: list[ForwardFact] = field(default_factory=list)
    commits: list[tuple[str, str]] = field(default_factory=list)
    # The calls through tables of functions, by the key that picks the function.
    handler_tables: dict[str, list["Handlers"]] = field(default_factory=dict)
    # The variables that hold handlers.
    handler_keys: dict[str, KeyFact] = field(default_factory=dict)
    # The ways through each function, by its identity.
    paths: dict[str, Paths] = field(default_factory=dict)


def scan_function(function: Function, known: Mapping[str, PlaceKey], handed: tuple[Alias, ...]) -> Scan:
    scan = Scan(function, {}, copies(function, known), (*working_copies(function), *handed), [], [])
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
            for key, type_ in _tested_keys(scan, _unmasked(end.value)):
                # A switch on a part of the variable looks at these values too, without being its dispatch.
                _seen(scan, key, type_).tests.extend(
                    (Const(case.low, case_type, case.constant, case.name), case.position)
                    for case_type in [end.value.type]
                    for case in end.cases
                )
        elif isinstance(end, Branch):
            _note_tests(scan, number, end.condition, end.position)
    return scan


def _unmasked(expr: Expr) -> Expr:
    """What ``x & MASK`` takes a part of; an expression of another form gives nothing that could be a key."""
    inner = uncast(expr)
    if isinstance(inner, Binary) and inner.op == "&":
        left, right = uncast(inner.left), uncast(inner.right)
        if isinstance(right, Const):
            return left
        if isinstance(left, Const):
            return right
    return Unknown(expr.type, "no masked value")


def _tested_keys(scan: Scan, expr: Expr) -> tuple[tuple[PlaceKey, object], ...]:
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


def _seen(scan: Scan, key: PlaceKey, type_: object) -> Seen:
    seen = scan.keys.get(key.key)
    if seen is None:
        seen = scan.keys[key.key] = Seen(key, type_)
    seen.instances.add(key.instance)
    return seen


def _note_store(scan: Scan, block: int, statement: Assign | Call | Clobber, place: object) -> None:
    key = place_key(place, scan.function.identity)  # type: ignore[arg-type]
    if key is not None and not (isinstance(place, VariablePlace) and place.variable.storage == "temporary"):
        _seen(scan, key, place.type).stores.append((block, statement, key))  # type: ignore[attr-defined]


def _note_tests(scan: Scan, block: int, condition: Expr, position: Position, equal: bool = True) -> None:
    condition = uncast(condition)
    if isinstance(condition, Unary) and condition.op == "!":
        _note_tests(scan, block, condition.operand, position, not equal)
    elif isinstance(condition, Binary) and condition.op in ("==", "!=", "<", "<=", ">", ">="):
        for side, other in ((condition.left, condition.right), (condition.right, condition.left)):
            number = uncast(other)
            plain = _tested_keys(scan, side)
            for key, type_ in (*plain, *_tested_keys(scan, _unmasked(side))):
                if key.scope == "parameter":
                    continue
                seen = _seen(scan, key, type_)
                seen.read_instances.add(key.instance)
                if isinstance(number, Const) and condition.op in ("==", "!="):
                    seen.tests.append((number, condition.position or position))
                    if (key, type_) in plain:
                        seen.branches.append((block, number, equal == (condition.op == "==")))


def _note_exposed(scan: Scan, expr: Expr, position: Position) -> None:
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


def state_candidates(scans: Sequence[Scan], names: Names) -> frozenset[str]:
    """The keys worth working out: dispatched on here, or holding named constants where another unit may dispatch."""
    chosen: set[str] = set()
    lasting: dict[str, list[Seen]] = {}
    for scan in scans:
        for key, seen in scan.keys.items():
            if seen.dispatches:
                if seen.key.scope == "lasting" or any(is_carried(scan, seen, block) for block, _ in seen.dispatches):
                    chosen.add(key)
            elif seen.key.scope == "lasting":
                lasting.setdefault(key, []).append(seen)
            elif seen.key.scope == "local" and len({number.value for _, number, _ in seen.branches}) > 1:
                if any(is_carried(scan, seen, block) for block, _, _ in seen.branches):
                    chosen.add(key)
    for key, group in lasting.items():
        if key not in chosen:
            elsewhere = [seen for seen in group if is_shared(seen)] if not key.endswith("[]") else []
            if (elsewhere and _holds_names(elsewhere, names)) or may_chain(group, names):
                chosen.add(key)
    return frozenset(chosen)


def may_chain(seen: Sequence[Seen], names: Names) -> bool:
    """Whether a key that no ``switch`` is on could be a state: compared with constants and given constants, and no
    flag."""
    type_ = seen[0].type
    if isinstance(type_, IntType) and type_.high <= 1 and type_.low == 0:
        return False
    tested = {number.value: number for one in seen for _, number, _ in one.branches}
    stored: dict[int, Const] = {}
    computed = 0
    counted = False
    for one in seen:
        for _, statement, _ in one.stores:
            inner = uncast(statement.value) if isinstance(statement, Assign) else None
            if isinstance(inner, Const):
                stored[inner.value] = inner
            else:
                computed += 1
                counted = counted or isinstance(inner, Binary)
    if not tested or not (stored or computed):
        return False
    values = tested | stored
    if len(values) < 2:
        return False
    says = bool(STATE_NAME.search(seen[0].key.shown))
    if (len(values) > 2 and not counted) or says:
        return True
    return sum(_is_named(const, names) for const in values.values()) > 1


def _is_named(const: Const, names: Names) -> bool:
    if const.name is not None:
        return True
    if const.position is None or not const.position.line:
        return False
    spelling = names.origin(const.position).spelling
    return spelling.isidentifier() and spelling.lower() not in ("true", "false", "null")


def _holds_names(seen: Sequence[Seen], names: Names) -> bool:
    """Whether a key is only ever given constants or copies, and some of the constants have names: no count, no
    length."""
    if any(stores_parameter(one) for one in seen):
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


def stores_parameter(seen: Seen) -> bool:
    """Whether some store gives the key a parameter's value, as setters do."""
    return any(
        isinstance(statement, Assign)
        and isinstance(inner := uncast(statement.value), Load)
        and isinstance(inner.place, VariablePlace)
        and inner.place.variable.storage == "parameter"
        for _, statement, _ in seen.stores
    )


def is_shared(seen: Seen) -> bool:
    root = seen.key.root
    if seen.key.kind == "member":
        return True
    return root is not None and root.storage in ("global", "extern")


def _constant_store(statement: Assign | Call | Clobber) -> bool:
    return isinstance(statement, Assign) and isinstance(uncast(statement.value), Const)


def is_carried(scan: Scan, seen: Seen, dispatch: int) -> bool:
    """Whether a constant stored in a loop can reach the dispatch with no other store on the way."""
    function = scan.function
    around = blocks_after(function, dispatch)
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


def _targets(function: Function, block: int) -> tuple[int, ...]:
    return successors(function.blocks[block].terminator)


def blocks_from(function: Function, start: int, stop: int) -> frozenset[int]:
    """The blocks that control can come to from ``start`` without passing ``stop`` again."""
    seen = {start}
    pending = [start]
    while pending:
        for target in _targets(function, pending.pop()):
            if target not in seen and target != stop:
                seen.add(target)
                pending.append(target)
    return frozenset(seen)


def blocks_after(function: Function, block: int) -> frozenset[int]:
    return frozenset().union(*(blocks_from(function, target, -1) for target in set(_targets(function, block))))


def function_identity(work: Work, name: str) -> str:
    function = work.by_name.get(name)
    return function.identity if function is not None else name
