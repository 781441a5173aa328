"""What a branch taken tells of the places in its condition.

``constrain`` knows that an expression's value lies in a set and works back through the operators whose inverse is
simple: conversions that keep the value or shift the whole set by a multiple of the type's range, sums, products and
quotients with a constant, shifts, masks, negation. ``compare`` bounds each side of a comparison by the other. All
of it leaves a superset of what is possible; where no step back is known nothing is learned.

The functions work on anything that can read a place and can be told that a place's value is limited (``Limiter``).
"""

from typing import Final, Protocol

from stepring.meaning.types import Binary, Cast, Const, Expr, IntType, Load, PlaceExpr, Unary
from stepring.values import intervals as iv
from stepring.values.evaluate import compute
from stepring.values.intervals import UNBOUNDED, constant, contains, interval, meet, number_type, within, without
from stepring.values.types import Interval

OPPOSITE: Final = {"<": ">=", ">=": "<", ">": "<=", "<=": ">", "==": "!=", "!=": "=="}
MIRROR: Final = {"<": ">", ">": "<", "<=": ">=", ">=": "<=", "==": "==", "!=": "!="}


class Limiter(Protocol):
    """A state that can be read and limited."""

    def read(self, place: PlaceExpr) -> Interval:
        """The values that the place may hold."""

    def limit(self, place: PlaceExpr, allowed: Interval) -> bool:
        """Keep only ``allowed`` values of the place; False if none is left."""


def assume(state: Limiter, condition: Expr, holds: bool) -> bool:
    """Limit the state to where the condition is (not) zero; False if that cannot be."""
    while isinstance(condition, Unary) and condition.op == "!":
        condition = condition.operand
        holds = not holds
    if isinstance(condition, Cast) and _is_comparison(condition.operand) and isinstance(condition.type, IntType):
        return assume(state, condition.operand, holds)
    if isinstance(condition, Binary) and condition.op in OPPOSITE:
        return compare(state, condition.op if holds else OPPOSITE[condition.op], condition.left, condition.right)
    if isinstance(condition, Binary) and condition.op in ("&", "|") and holds == (condition.op == "&"):
        if _is_truth(condition.left) and _is_truth(condition.right):
            return assume(state, condition.left, holds) and assume(state, condition.right, holds)
    value = compute(condition, state.read)
    if value is UNBOUNDED:
        return True
    if not holds:
        return contains(value, 0) and constrain(state, condition, constant(0))
    rest = without(value, 0)
    if rest is None:
        return False
    return not_equal(state, condition, 0) and (rest == value or constrain(state, condition, rest))


def compare(state: Limiter, operator: str, left: Expr, right: Expr) -> bool:
    """Limit the state to where the comparison holds; False if that cannot be."""
    a = compute(left, state.read)
    b = compute(right, state.read)
    if a is UNBOUNDED or b is UNBOUNDED:
        return True
    if iv.compare(operator, a, b) == iv.FALSE:
        return False
    return _limit_side(state, left, a, operator, b) and _limit_side(state, right, b, MIRROR[operator], a)


def _limit_side(state: Limiter, side: Expr, own: Interval, operator: str, other: Interval) -> bool:
    """Limit one side of a comparison by the values of the other."""
    if operator == "!=":
        return other.stride != 0 or other.low != other.high or not_equal(state, side, other.low)
    if operator == "==":
        allowed = meet(own, other)
    elif operator in ("<", "<="):
        allowed = within(own, own.low, other.high - (operator == "<"))
    else:
        allowed = within(own, other.low + (operator == ">"), own.high)
    if allowed is None:
        return False
    return allowed == own or constrain(state, side, allowed)


def not_equal(state: Limiter, expression: Expr, value: int) -> bool:
    """Limit the state to where the expression has not that value; False if it has no other."""
    if isinstance(expression, Binary) and expression.op == "&" and isinstance(expression.right, Const) and value == 0:
        return _some_bit(state, expression.left, expression.right.value)
    if isinstance(expression, Cast) and _keeps_value(state, expression):
        return not_equal(state, expression.operand, value)
    own = compute(expression, state.read)
    if own is UNBOUNDED:
        return True
    rest = without(own, value)
    if rest is None:
        return False
    return rest == own or constrain(state, expression, rest)


def _some_bit(state: Limiter, operand: Expr, mask: int) -> bool:
    """``operand & mask`` is not zero."""
    own = compute(operand, state.read)
    if own is UNBOUNDED or mask <= 0:
        return True
    if own.low >= 0:
        least = mask & -mask
        allowed = within(own, least, own.high)
        return allowed is not None and (allowed == own or constrain(state, operand, allowed))
    return True


def constrain(state: Limiter, expression: Expr, allowed: Interval) -> bool:
    """Limit the state to where the expression's value is in ``allowed``; False if that cannot be."""
    if isinstance(expression, Load):
        return state.limit(expression.place, allowed)
    own = compute(expression, state.read)
    if own is UNBOUNDED:
        return True
    target = meet(own, allowed)
    if target is None:
        return False
    if isinstance(expression, Cast):
        return _through_cast(state, expression, target)
    if isinstance(expression, Unary):
        return _through_unary(state, expression, target)
    if isinstance(expression, Binary):
        if expression.op in OPPOSITE:
            return target.stride != 0 or assume(state, expression, target.low != 0)
        return _through_binary(state, expression, target)
    return True


def _through_cast(state: Limiter, cast: Cast, allowed: Interval) -> bool:
    """The operand's value from the converted value's."""
    operand = cast.operand
    own = compute(operand, state.read)
    kind = number_type(cast.type)
    if own is UNBOUNDED or kind is None:
        return True
    if kind.name == "_Bool":
        return allowed.stride != 0 or assume(state, operand, allowed.low != 0)
    back = _unwrap(own, allowed, kind)
    return back is not None and (back == own or constrain(state, operand, back))


def _unwrap(own: Interval, allowed: Interval, kind: IntType) -> Interval | None:
    """The members of ``own`` that are in ``allowed`` after conversion to ``kind``, or a superset of them."""
    if iv.fits(own, kind):
        return meet(own, allowed)
    modulus = 1 << kind.width
    first, last = (own.low - kind.low) // modulus, (own.high - kind.low) // modulus
    result: Interval | None = None
    if last - first > 2:
        if allowed.stride == 0:
            return meet(own, interval(allowed.low + first * modulus, allowed.low + last * modulus, modulus))
        return own
    for turn in range(first, last + 1):
        shifted = Interval(allowed.low + turn * modulus, allowed.high + turn * modulus, allowed.stride)
        result = iv.join(result, meet(own, shifted))
    return result


def _through_unary(state: Limiter, expression: Unary, allowed: Interval) -> bool:
    if expression.op == "!":
        return allowed.stride != 0 or assume(state, expression.operand, allowed.low == 0)
    kind = number_type(expression.type)
    own = compute(expression.operand, state.read)
    if kind is None or own is UNBOUNDED:
        return True
    exact = iv.negate(allowed) if expression.op == "-" else iv.complement(allowed)
    return _back(state, expression.operand, own, iv.wrap(exact, kind))


def _back(state: Limiter, operand: Expr, own: Interval, possible: Interval | None) -> bool:
    """Limit an operand that has the value ``own`` to the ``possible`` ones."""
    allowed = meet(own, possible)
    return allowed is not None and (allowed == own or constrain(state, operand, allowed))


def _through_binary(state: Limiter, expression: Binary, allowed: Interval) -> bool:
    kind = number_type(expression.type)
    left, right = expression.left, expression.right
    a, b = compute(left, state.read), compute(right, state.read)
    if kind is None or a is UNBOUNDED or b is UNBOUNDED:
        return True
    operator = expression.op
    if operator in ("+", "-"):
        return _through_sum(state, expression, a, b, kind, allowed)
    if b.stride != 0:
        if a.stride == 0 and operator in ("*", "&"):
            left, right, a, b = right, left, b, a
        else:
            return True
    possible = _inverse(operator, a, b.low, kind, allowed)
    return _back(state, left, a, possible)


def _through_sum(
    state: Limiter, expression: Binary, a: Interval, b: Interval, kind: IntType, allowed: Interval
) -> bool:
    """The operands of a sum or difference: modulo arithmetic has exact inverses, a signed sum if it cannot overflow."""
    plus = expression.op == "+"
    exact = iv.add(a, b) if plus else iv.subtract(a, b)
    if iv.fits(exact, kind):
        left = iv.subtract(allowed, b) if plus else iv.add(allowed, b)
        right = iv.subtract(allowed, a) if plus else iv.subtract(a, allowed)
    elif kind.signed:
        return True
    else:
        left = iv.wrap(iv.subtract(allowed, b) if plus else iv.add(allowed, b), kind)
        right = iv.wrap(iv.subtract(allowed, a) if plus else iv.subtract(a, allowed), kind)
    return _back(state, expression.left, a, left) and _back(state, expression.right, b, right)


def _inverse(operator: str, a: Interval, c: int, kind: IntType, allowed: Interval) -> Interval | None:
    """A superset of the members of ``a`` for which ``a operator c`` is in ``allowed``."""
    exact = iv.exact_binary(operator, a, constant(c), kind.width)
    if exact is None or (not iv.fits(exact, kind) and operator in ("*", "<<")):
        return a
    if operator in ("*", "<<"):
        factor = c if operator == "*" else 1 << c
        if factor == 0:
            return a
        ends = sorted((_ceiling(allowed.low, factor, factor < 0), _ceiling(allowed.high, factor, factor > 0)))
        return within(a, ends[0], ends[1])
    if operator == ">>":
        return within(a, allowed.low << c, (allowed.high << c) + (1 << c) - 1)
    if operator == "/" and c > 0 and a.low >= 0:
        return within(a, allowed.low * c, allowed.high * c + c - 1)
    if operator == "%" and a.low >= 0 and allowed.stride == 0 and c != 0:
        return meet(a, interval(allowed.low, a.high, abs(c)))
    if operator == "&":
        return _unmask(a, c, allowed)
    if operator == "|" and c >= 0 and a.low >= 0:
        return within(a, a.low, allowed.high)
    if operator == "^" and allowed.stride == 0:
        return meet(a, constant(allowed.low ^ c))
    return a


def _ceiling(value: int, factor: int, down: bool) -> int:
    """``value / factor`` rounded to an integer, down or up."""
    return value // factor if down else -(-value // factor)


def _unmask(a: Interval, mask: int, allowed: Interval) -> Interval | None:
    """The members of ``a`` whose masked value can be in ``allowed``."""
    if mask >= 0 and mask & (mask + 1) == 0 and allowed.stride == 0:
        step = mask + 1
        return meet(a, interval(allowed.low + (a.low - allowed.low) // step * step, a.high, step))
    if allowed == iv.FALSE and a.low >= 0:
        # No bit of the mask is set: if the mask covers all high bits, only values below its lowest bit are left.
        least = mask & -mask
        covered = mask + least
        if mask > 0 and covered & (covered - 1) == 0 and a.high < covered:
            return within(a, 0, least - 1)
        if mask < 0 and -mask & (-mask - 1) == 0:
            return within(a, 0, -mask - 1)
    if a.low >= 0 and allowed.low > 0:
        return within(a, allowed.low, a.high)
    return a


def _is_comparison(expression: Expr) -> bool:
    return isinstance(expression, Binary) and expression.op in OPPOSITE


def _is_truth(expression: Expr) -> bool:
    """Whether an expression is 0 or 1 by its form."""
    while isinstance(expression, Cast):
        expression = expression.operand
    return _is_comparison(expression) or (isinstance(expression, Unary) and expression.op == "!")


def _keeps_value(state: Limiter, cast: Cast) -> bool:
    kind = number_type(cast.type)
    own = compute(cast.operand, state.read)
    return kind is not None and kind.name != "_Bool" and own is not UNBOUNDED and iv.fits(own, kind)


def refine_by_case(state: Limiter, value: Expr, low: int, high: int) -> bool:
    """Limit the state to where the control of a switch is from ``low`` to ``high``."""
    own = compute(value, state.read)
    if own is UNBOUNDED:
        return True
    allowed = within(own, low, high)
    return allowed is not None and (allowed == own or constrain(state, value, allowed))


def refine_by_default(state: Limiter, value: Expr, ranges: list[tuple[int, int]]) -> bool:
    """Limit the state to where the control of a switch is in none of the (sorted) ranges of values."""
    own: Interval | None = compute(value, state.read)
    if own is UNBOUNDED or own is None:
        return True
    start = own
    for low, high in ranges:
        if own is not None and low <= own.low <= high:
            own = within(own, high + 1, own.high)
    for low, high in reversed(ranges):
        if own is not None and low <= own.high <= high:
            own = within(own, own.low, low - 1)
    if own is None:
        return False
    return own == start or constrain(state, value, own)
