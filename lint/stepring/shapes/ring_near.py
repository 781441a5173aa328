"""Which lasting integers a subscript is made of, and which parameters nobody checks.

The one idea: what a value is made of (``ring_sources``) is too much, for a length that was added counts as well. Near
is what leads to the value by copying, stepping by constants and reducing: one fixpoint over the locals.
"""

from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass

from stepring.meaning.fold import fold
from stepring.meaning.types import Binary, Branch, Cast, Expr, IntType, Load
from stepring.places import Position
from stepring.shapes.ring_flat import Set, Touch
from stepring.shapes.ring_keys import NOTHING, Key, is_local, is_scalar, place_keys
from stepring.shapes.ring_sources import (
    Sight,
    Use,
    compared,
    control_order,
    locals_of,
    reduction_of,
    sources,
    told,
)


def _scaled_sources(sight: Sight, expr: Expr, frame: str) -> frozenset[Key]:
    """The same, through multiplications as well: ``head * size``."""
    match expr:
        case Cast(operand=operand):
            return _scaled_sources(sight, operand, frame)
        case Binary(op="+" | "-" | "*", left=left, right=right):
            return _scaled_sources(sight, left, frame) | _scaled_sources(sight, right, frame)
        case Binary(op="<<", left=left):
            return _scaled_sources(sight, left, frame)
    return sources(sight, expr, frame)


def _scaled(expr: Expr) -> bool:
    match expr:
        case Cast(operand=operand):
            return _scaled(operand)
        case Binary(op="*" | "<<"):
            return True
        case Binary(op="+" | "-", left=left, right=right):
            return _scaled(left) or _scaled(right)
    return False


def use_of(sight: Sight, touch: Touch) -> Use | None:
    cells = _scaled_sources(sight, touch.subscript, touch.frame)
    if cells:
        cells &= near(sight, touch.subscript, touch.frame)
        cells = cells & near(sight, touch.subscript, touch.frame, True) or cells
    if not cells:
        return None
    form, modulus, at, term = reduction_of(sight, touch.subscript, touch.frame, 0)
    return Use(touch, cells, form, modulus, at, _scaled(touch.subscript), term)


def near(sight: Sight, expr: Expr, frame: str, strict: bool = False) -> frozenset[Key]:
    """The lasting integers that an expression is near to: their value, or a copy that was stepped or reduced.

    A local that starts from something else and only adds up what came from a lasting integer is not near to it. With
    ``strict``, how far two lasting integers are apart is near to neither.
    """
    table = sight.close.get(strict)
    if table is None:
        table = sight.close[strict] = _nearness(sight, strict)
    return _near(sight, expr, frame, table, strict)


def _near(
    sight: Sight, expr: Expr, frame: str, table: Mapping[Key, frozenset[Key]], strict: bool
) -> frozenset[Key]:
    match expr:
        case Load(place=place):
            found: frozenset[Key] = NOTHING
            for key in place_keys(place, frame, sight.flat.points):
                found |= table.get(key, NOTHING) if is_local(key) else frozenset((key,))
            return found
        case Cast(operand=operand):
            return _near(sight, operand, frame, table, strict)
        case Binary(op="+" | "&" | "*", left=left, right=right):
            return _near(sight, left, frame, table, strict) | _near(sight, right, frame, table, strict)
        case Binary(op="-", left=left, right=right) if fold(left) is not None:
            return _near(sight, right, frame, table, strict)  # slots counted down from the end
        case Binary(op="-", right=right) if strict and sources(sight, right, frame):
            return NOTHING  # how far two are apart
        case Binary(op="-" | "%" | "<<", left=left):
            return _near(sight, left, frame, table, strict)
    return NOTHING


@dataclass(slots=True)
class _Made:
    """What a local is made of: copies and steps of its own (expression, frame, whether it is a step), and the blocks
    in which a constant replaces that."""

    parts: list[tuple[Expr, str, bool]]
    replaced: list[int]


def _nearness(sight: Sight, strict: bool) -> dict[Key, frozenset[Key]]:
    """The lasting integers that every local is near to."""
    made = {key: _made(sight, key) for key, found in sight.sources.items() if found}
    lost: set[Key] = set()
    while True:
        table = _spread_near(sight, made, lost, strict)
        more = {key for key, item in made.items() if table.get(key) and _is_replaced(sight, item, table[key])}
        if not more:
            return table
        lost |= more


def _spread_near(
    sight: Sight, made: Mapping[Key, _Made], lost: set[Key], strict: bool
) -> dict[Key, frozenset[Key]]:
    table: dict[Key, frozenset[Key]] = {}
    pending = True
    while pending:
        pending = False
        for key, item in made.items():
            if key in lost:
                continue
            known = table.get(key, NOTHING)
            found = known
            for expr, frame, step in item.parts:
                found |= (_added if step else _near)(sight, expr, frame, table, strict)
            if found != known:
                table[key] = found
                pending = True
    return table


def _made(sight: Sight, key: Key) -> _Made:
    constants: list[tuple[int, Position]] = []
    copies: list[Position] = []
    steps: list[Position] = []
    parts: list[tuple[Expr, str, bool]] = []
    for number, op in sight.sets.get(key, ()):
        if fold(op.value) is not None:
            constants.append((number, op.position))
            continue
        step = key in locals_of(sight, op.value, op.frame)
        (steps if step else copies).append(op.position)
        parts.append((op.value, op.frame, step))
    first = min(copies) if copies and not any(step < min(copies) for step in steps) else None
    # A first value that is replaced before anything is done with it does not count.
    return _Made(parts, [number for number, at in constants if first is None or at > first])


def _is_replaced(sight: Sight, item: _Made, found: frozenset[Key]) -> bool:
    """Whether a constant replaces the value where no comparison of what it was made from decides on that."""
    if not item.replaced:
        return False
    known, decides = compared(sight), control_order(sight)[1]
    return any(
        not any(
            found & (known[branch].left | known[branch].right)
            for branch in decides.get(number, ())
            if branch in known
        )
        for number in item.replaced
    )


def _added(
    sight: Sight, expr: Expr, frame: str, table: Mapping[Key, frozenset[Key]], strict: bool
) -> frozenset[Key]:
    """What a local's step adds to it, if that is a lasting integer as it stands (``at += count``): a local that says
    how far to go (``at += part``) is no place, whatever it was made from."""
    match expr:
        case Cast(operand=operand):
            return _added(sight, operand, frame, table, strict)
        case Binary(op="+" | "&" | "%", left=left, right=right):
            return _added(sight, left, frame, table, strict) | _added(sight, right, frame, table, strict)
        case Load(place=place):
            if not any(is_local(key) for key in place_keys(place, frame, sight.flat.points)):
                return _near(sight, expr, frame, table, strict)
    return NOTHING


def unchecked(sight: Sight) -> frozenset[Key]:
    """The integer parameters that slots or lasting integers are made from and that the function compares with no
    limit: only its callers know what they can be.

    A value that the function's own check lets through is one that it must be able to deal with.
    """
    function = sight.flat.function
    keys = {
        ("local", "", parameter.identity) for parameter in function.parameters if isinstance(parameter.type, IntType)
    }
    if not keys:
        return NOTHING
    made: dict[Key, set[Key]] = defaultdict(set)
    for key, sets in sight.sets.items():
        if is_local(key):
            made[key] = {other for _, op in sets for other in locals_of(sight, op.value, op.frame)}
    data: list[Key] = []
    compared_with: list[Key] = []
    for block in sight.flat.blocks:
        for op in block.ops:
            if isinstance(op, Touch):
                data.extend(locals_of(sight, op.subscript, op.frame))
            elif isinstance(op, Set) and any(is_scalar(key) for key in place_keys(op.place, op.place_frame, {})):
                data.extend(locals_of(sight, op.value, op.frame))
        if isinstance(block.end, Branch):
            condition, frame = told(sight, block.end.condition, block.frame, 0)
            if isinstance(condition, Binary) and condition.op in ("<", "<=", ">", ">="):
                for side in (condition.left, condition.right):
                    compared_with.extend(locals_of(sight, side, frame))
    return frozenset(keys & _origins(made, data) - _origins(made, compared_with))


def _origins(made: Mapping[Key, set[Key]], keys: list[Key]) -> set[Key]:
    """Some locals, with all that they are made of."""
    found: set[Key] = set()
    pending = list(keys)
    while pending:
        key = pending.pop()
        if key not in found:
            found.add(key)
            pending.extend(made.get(key, ()))
    return found
