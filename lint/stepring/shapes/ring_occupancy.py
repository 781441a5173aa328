"""Where the code of a ring's functions looks at what the ring holds: tests of a count, or of two indices at once."""

from collections.abc import Iterator, Mapping

from stepring.meaning.types import (
    Assign,
    Binary,
    Branch,
    Call,
    Cast,
    Expr,
    FunctionName,
    Load,
    PointerDistance,
    Return,
    Unary,
    VariablePlace,
)
from stepring.paths.types import Event
from stepring.places import Position
from stepring.shapes.ring_keys import place_keys
from stepring.shapes.ring_parameters import Operation
from stepring.shapes.ring_uses import Probe
from stepring.shapes.ring_world import Group, called


def occupancy_tests(probe: Probe, operation: Operation) -> frozenset[Position]:
    """The branches of an operation (and what it calls) that depend on a count, or on two indices at once."""
    group, ring = probe.world.group, probe.world.ring
    indices = {index.key: index.role for index in ring.indices}
    found: set[Position] = set()
    for identity in called(group, operation.function.identity):
        known = probe.tests.get(identity)
        if known is None:
            known = probe.tests[identity] = frozenset(_tests(group, identity, indices))
        found |= known
    return frozenset(found)


def _tests(group: Group, identity: str, indices: Mapping[tuple[str, ...], str]) -> Iterator[Position]:
    function = group.functions[identity]
    made_of = _made_of(group, identity, set(indices), 0)
    for block in function.blocks:
        end = block.terminator
        if isinstance(end, Branch):
            keys = _keys_in(end.condition, made_of) & set(indices)
            if len(keys) > 1 or any(indices[key] == "count" for key in keys):
                yield end.position


def _made_of(
    group: Group, identity: str, indices: set[tuple[str, ...]], depth: int
) -> dict[str, frozenset[tuple[str, ...]]]:
    """Which indices the local variables of a function are computed from."""
    function = group.functions[identity]
    made_of: dict[str, frozenset[tuple[str, ...]]] = {}
    for _ in range(2):
        for block in function.blocks:
            for statement in block.statements:
                match statement:
                    case Assign(place=VariablePlace(variable=variable), value=value) if not variable.lasting:
                        keys = _keys_in(value, made_of) & indices
                    case Call(callee=FunctionName(name=name), result=VariablePlace(variable=variable)):
                        keys = frozenset(_told_by(group, name, indices, depth))
                        for given in statement.arguments:
                            keys |= _keys_in(given, made_of) & indices
                    case _:
                        continue
                made_of[variable.identity] = made_of.get(variable.identity, frozenset()) | keys
    return made_of


def _told_by(group: Group, name: str, indices: set[tuple[str, ...]], depth: int) -> Iterator[tuple[str, ...]]:
    """The indices that a function's result depends on."""
    for callee in group.by_name.get(name, ())[:2] if depth < 3 else ():
        made_of = _made_of(group, callee.identity, indices, depth + 1)
        for block in callee.blocks:
            match block.terminator:
                case Return(value=value) if value is not None:
                    yield from _keys_in(value, made_of) & indices
                case Branch(condition=value):
                    yield from _keys_in(value, made_of) & indices


def _keys_in(expr: Expr, made_of: dict[str, frozenset[tuple[str, ...]]]) -> frozenset[tuple[str, ...]]:
    match expr:
        case Load(place=VariablePlace(variable=variable)) if not variable.lasting:
            return made_of.get(variable.identity, frozenset())
        case Load(place=place):
            return place_keys(place, "", {})
        case Unary(operand=operand) | Cast(operand=operand):
            return _keys_in(operand, made_of)
        case Binary(left=left, right=right) | PointerDistance(left=left, right=right):
            return _keys_in(left, made_of) | _keys_in(right, made_of)
    return frozenset()


def ways_taken(events: list[Event], tests: frozenset[Position]) -> frozenset[tuple[Position, bool]]:
    """Which ways the tests of occupancy went in a run."""
    return frozenset(
        (event.position, bool(event.value)) for event in events if event.kind == "branch" and event.position in tests
    )
