"""Exact evaluation of expressions whose parts are all constants, in the target's arithmetic.

One place for C's rules on values: conversion (N1570 6.3.1.3), unsigned wrap-round (6.2.5p9), truncating division
(6.5.5p6), shifts (6.5.7). What the standard leaves undefined gives None. Conversion to a signed type that cannot hold
the value is implementation-defined; every compiler of the trade takes it modulo 2^N (common practice), and so does
this.
"""

from stepring.meaning.types import (
    Binary,
    Cast,
    Const,
    CType,
    Expr,
    FloatConst,
    IntType,
    PointerType,
    Unary,
)


def convert(value: int, type_: CType) -> int:
    """``value`` converted to an integer or pointer type."""
    if isinstance(type_, IntType):
        if type_.name == "_Bool":
            return int(value != 0)
        value &= (1 << type_.width) - 1
        return value - (1 << type_.width) if type_.signed and value >> (type_.width - 1) else value
    if isinstance(type_, PointerType):
        return value & ((1 << type_.width) - 1)
    return value


def apply_unary(op: str, operand: int, type_: CType) -> int | None:
    """A unary operator on a value of the promoted ``type_``; None where the result is undefined."""
    if op == "!":
        return int(operand == 0)
    result = -operand if op == "-" else ~operand
    return _settle(result, type_)


def apply_binary(op: str, left: int, right: int, type_: CType) -> int | None:
    """A binary operator; ``type_`` is the result's type (for comparisons it plays no part). None where undefined."""
    match op:
        case "==":
            return int(left == right)
        case "!=":
            return int(left != right)
        case "<":
            return int(left < right)
        case "<=":
            return int(left <= right)
        case ">":
            return int(left > right)
        case ">=":
            return int(left >= right)
        case "/" | "%":
            if right == 0:
                return None
            quotient = abs(left) // abs(right) * (1 if (left < 0) == (right < 0) else -1)
            if _settle(quotient, type_) is None:
                return None
            return quotient if op == "/" else left - quotient * right
        case "<<" | ">>":
            if not isinstance(type_, IntType) or not 0 <= right < type_.width:
                return None
            if op == ">>":
                return left >> right
            # Shifting a negative value, or a bit into the sign, is undefined in C11; compilers of the trade shift
            # two's complement bits, but a result that does not fit is not settled here.
            return None if type_.signed and left < 0 else _settle(left << right, type_)
        case "+":
            return _settle(left + right, type_)
        case "-":
            return _settle(left - right, type_)
        case "*":
            return _settle(left * right, type_)
        case "&":
            return left & right
        case "|":
            return left | right
        case "^":
            return left ^ right
    return None


def apply_constant(op: str, left: int, right: int, type_: CType) -> int | None:
    """A binary operator on constants, as compilers fold it: ``1 << 31`` sets the sign bit.

    C leaves that undefined (6.5.7p4), but every compiler of the trade gives a constant the bits that stand there.
    """
    result = apply_binary(op, left, right, type_)
    if result is None and op == "<<" and left >= 0 and isinstance(type_, IntType) and 0 <= right < type_.width:
        bits = left << right
        return convert(bits, type_) if bits >> type_.width == 0 else None
    return result


def _settle(value: int, type_: CType) -> int | None:
    """Unsigned results wrap; a signed result that does not fit is undefined (6.5p5)."""
    if not isinstance(type_, IntType):
        return convert(value, type_)
    if not type_.signed:
        return value & ((1 << type_.width) - 1)
    return value if type_.low <= value <= type_.high else None


def fold(expr: Expr) -> int | None:
    """The value of a constant integer expression, or None where it is not constant or not defined."""
    match expr:
        case Const(value=value):
            return value
        case Cast(operand=FloatConst(value=real), type=IntType() as type_):
            whole = int(real)
            return whole if type_.low <= whole <= type_.high else None
        case Cast(operand=operand, type=IntType() | PointerType() as type_):
            inner = fold(operand)
            return None if inner is None else convert(inner, type_)
        case Unary(op=op, operand=operand, type=type_):
            inner = fold(operand)
            return None if inner is None else apply_unary(op, inner, type_)
        case Binary(op=op, left=left, right=right, type=type_):
            a = fold(left)
            b = fold(right)
            return None if a is None or b is None else apply_constant(op, a, b, type_)
    return None
