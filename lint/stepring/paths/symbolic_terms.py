"""C's integer arithmetic on terms of a solver: every value is a number of the target's width, known or symbolic.

The one idea: a number that is known stays a Python integer, so that a solver sees only what really depends on inputs.
Widths and signs are those of the IR's types, so a conversion is a cut or an extension of bits (N1570 6.3.1.3). A signed
result that does not fit wraps round, as the trade's compilers let it where they cannot use that it is undefined. What
C gives no value at all (a division by zero, a shift by too much) is a fresh term, which can be anything.
"""

from dataclasses import dataclass, field
from typing import Any, TypeAlias

import z3

from stepring.meaning.fold import apply_binary, apply_unary, convert
from stepring.meaning.types import Binary, IntType

Term: TypeAlias = Any  # the solver's library has no types
Number: TypeAlias = int | Any
Truth: TypeAlias = bool | Any

COMPARISONS = ("<", "<=", ">", ">=", "==", "!=")


def bits(number: Number, width: int) -> Term:
    """A number as a term of ``width`` bits; a term must have them already."""
    return z3.BitVecVal(number, width) if isinstance(number, int) else number


def stretch(number: Number, type_: IntType, width: int) -> Number:
    """A value of a type, as a signed number of ``width`` bits (at least one more than an unsigned type has)."""
    if isinstance(number, int):
        return number
    more = width - type_.width
    if more < 0:
        return z3.Extract(width - 1, 0, number)
    if more == 0:
        return number
    return z3.SignExt(more, number) if type_.signed else z3.ZeroExt(more, number)


def converted(number: Number, source: IntType, target: IntType) -> Number:
    """A value converted to another integer type."""
    if isinstance(number, int):
        return convert(number, target)
    if target.name == "_Bool":
        return chosen(equal(number, 0, source.width), 1, 0, target.width)
    if target.width == source.width:
        return number
    if target.width < source.width:
        return z3.Extract(target.width - 1, 0, number)
    more = target.width - source.width
    return z3.SignExt(more, number) if source.signed else z3.ZeroExt(more, number)


def equal(left: Number, right: Number, width: int) -> Truth:
    """Whether two numbers of one width are the same."""
    if isinstance(left, int) and isinstance(right, int):
        return (left - right) % (1 << width) == 0
    if not isinstance(left, int) and not isinstance(right, int) and left.eq(right):
        return True
    return bits(left, width) == bits(right, width)


def chosen(condition: Truth, yes: Number, no: Number, width: int) -> Number:
    """One of two numbers of one width."""
    if isinstance(condition, bool):
        return yes if condition else no
    if isinstance(yes, int) and isinstance(no, int) and yes == no:
        return yes
    if not isinstance(yes, int) and not isinstance(no, int) and yes.eq(no):
        return yes
    return z3.If(condition, bits(yes, width), bits(no, width))


def both(*parts: Truth) -> Truth:
    """The conjunction."""
    kept = [part for part in parts if part is not True]
    if any(part is False for part in kept):
        return False
    if not kept:
        return True
    return kept[0] if len(kept) == 1 else z3.And(*kept)


def either(*parts: Truth) -> Truth:
    """The disjunction."""
    kept = [part for part in parts if part is not False]
    if any(part is True for part in kept):
        return True
    if not kept:
        return False
    return kept[0] if len(kept) == 1 else z3.Or(*kept)


def negated(part: Truth) -> Truth:
    """The opposite."""
    return not part if isinstance(part, bool) else z3.Not(part)


def as_truth(part: Truth) -> Term:
    """A truth as a term."""
    return z3.BoolVal(part) if isinstance(part, bool) else part


def compared(op: str, left: Number, right: Number, width: int, signed: bool) -> Truth:
    """A comparison of two numbers of one type."""
    if isinstance(left, int) and isinstance(right, int):
        return bool(apply_binary(op, left, right, IntType("int", width, signed, 3)))
    if op == "==":
        return equal(left, right, width)
    if op == "!=":
        return negated(equal(left, right, width))
    a, b = bits(left, width), bits(right, width)
    match op, signed:
        case "<", True:
            return a < b
        case "<=", True:
            return a <= b
        case ">", True:
            return a > b
        case ">=", True:
            return a >= b
        case "<", False:
            return z3.ULT(a, b)
        case "<=", False:
            return z3.ULE(a, b)
        case ">", False:
            return z3.UGT(a, b)
    return z3.UGE(a, b)


@dataclass(slots=True)
class Terms:
    """Fresh terms, and the facts that hold of them whatever the program does.

    ``exact``: divisions and products are the solver's own; otherwise a division by what is not a power of two is a
    fresh term with the facts that proofs need, which spares the solver a divider.
    """

    exact: bool = True
    facts: list[Term] = field(default_factory=list)
    count: int = 0
    unknowns: int = 0
    divided: dict[tuple[int, int, str, int], Term] = field(default_factory=dict)
    kept: list[Term] = field(default_factory=list)

    def fresh(self, width: int, name: str = "v") -> Term:
        """A number that can be anything."""
        self.count += 1
        return z3.BitVec(f"{name}!{self.count}", width)

    def unknown(self, width: int, name: str = "u") -> Term:
        """A number that the text does not settle: what rests on it is no longer exact."""
        self.unknowns += 1
        return self.fresh(width, name)

    def unary(self, op: str, operand: Number, type_: IntType) -> Number:
        """``-`` or ``~`` (``!`` is a truth)."""
        if isinstance(operand, int):
            known = apply_unary(op, operand, type_)
            return known if known is not None else convert(-operand, type_)
        return -operand if op == "-" else ~operand

    def binary(self, op: str, left: Number, right: Number, type_: IntType, right_type: IntType | None = None) -> Number:
        """An arithmetic operator; the operands have the result's type, but a shift's count its own."""
        if isinstance(left, int) and isinstance(right, int):
            known = apply_binary(op, left, right, type_)
            if known is not None:
                return known
            if op in "+-*":
                exact = left + right if op == "+" else left - right if op == "-" else left * right
                return convert(exact, type_)
            if op not in ("<<",) or not 0 <= right < type_.width:
                return self.unknown(type_.width)
            return convert(left << right, type_)
        width = type_.width
        match op:
            case "+":
                return (
                    bits(left, width)
                    if right == 0 and isinstance(right, int)
                    else bits(left, width) + bits(right, width)
                )
            case "-":
                return (
                    bits(left, width)
                    if right == 0 and isinstance(right, int)
                    else bits(left, width) - bits(right, width)
                )
            case "*":
                return self._product(left, right, type_)
            case "/" | "%":
                return self._division(op, left, right, type_)
            case "&":
                return bits(left, width) & bits(right, width)
            case "|":
                return bits(left, width) | bits(right, width)
            case "^":
                return bits(left, width) ^ bits(right, width)
        return self._shift(op, left, right, type_, right_type or type_)

    def _product(self, left: Number, right: Number, type_: IntType) -> Number:
        for one, other in ((left, right), (right, left)):
            if isinstance(one, int) and one in (0, 1):
                return other if one == 1 else 0
        if not self.exact and not isinstance(left, int) and not isinstance(right, int):
            return self.unknown(type_.width, "product")
        return bits(left, type_.width) * bits(right, type_.width)

    def _shift(self, op: str, left: Number, right: Number, type_: IntType, right_type: IntType) -> Number:
        width = type_.width
        a = bits(left, width)
        if isinstance(right, int):
            if not 0 <= right < width:
                return self.unknown(width)
            b = z3.BitVecVal(right, width)
        else:
            wide = max(width, right_type.width) + 1
            count = stretch(right, right_type, wide)
            inside = both(compared("<", count, width, wide, True), compared(">=", count, 0, wide, True))
            b = z3.Extract(width - 1, 0, count) if wide > width else count
            made = a << b if op == "<<" else (a >> b if type_.signed else z3.LShR(a, b))
            return chosen(inside, made, self.fresh(width, "shift"), width)
        return a << b if op == "<<" else (a >> b if type_.signed else z3.LShR(a, b))

    def _division(self, op: str, left: Number, right: Number, type_: IntType) -> Number:
        width = type_.width
        if isinstance(right, int) and right == 0:
            return self.unknown(width)
        a, b = bits(left, width), bits(right, width)
        if self.exact:
            if type_.signed:
                made = a / b if op == "/" else z3.SRem(a, b)
            else:
                made = z3.UDiv(a, b) if op == "/" else z3.URem(a, b)
            if isinstance(right, int):
                return made
            return chosen(equal(b, 0, width), self.fresh(width, "division"), made, width)
        if isinstance(right, int) and not type_.signed and right & (right - 1) == 0:
            return z3.LShR(a, z3.BitVecVal(right.bit_length() - 1, width)) if op == "/" else a & (right - 1)
        mark = (a.get_id(), b.get_id(), op, int(type_.signed))
        known = self.divided.get(mark)
        if known is None:
            known = self.divided[mark] = self._abstract(op, a, b, type_)
            self.kept += (a, b)  # the ids of terms that are gone are given again
        return known

    def _abstract(self, op: str, a: Term, b: Term, type_: IntType) -> Term:
        """A quotient or remainder by what is known of it: its range, and its value where the quotient is 0 or 1."""
        width = type_.width
        made = self.fresh(width, "remainder" if op == "%" else "quotient")
        self.unknowns += 1
        zero = z3.BitVecVal(0, width)
        if type_.signed:
            usual = z3.And(a >= 0, b > 0)
            less, next_ = a < b, a - b < b
            inside = z3.And(made >= 0, made < b, made <= a)
            whole = z3.And(made >= 0, made <= a)
            if op == "%":  # the sign is the dividend's, the size below the divisor's (6.5.5p6)
                self.facts.append(z3.Implies(z3.And(a < 0, b > 0), z3.And(made <= 0, made > -b, made >= a)))
        else:
            usual = b != 0
            less, next_ = z3.ULT(a, b), z3.ULT(a - b, b)
            inside = z3.And(z3.ULT(made, b), z3.ULE(made, a))
            whole = z3.ULE(made, a)
        if op == "%":
            self.facts.append(z3.Implies(usual, inside))
            self.facts.append(z3.Implies(z3.And(usual, less), made == a))
            self.facts.append(z3.Implies(z3.And(usual, z3.Not(less), next_), made == a - b))
            # A power of two leaves the low bits.
            power = (b & (b - 1)) == zero
            self.facts.append(z3.Implies(z3.And(usual, power), made == (a & (b - 1))))
        else:
            self.facts.append(z3.Implies(usual, whole))
            self.facts.append(z3.Implies(z3.And(usual, less), made == zero))
            self.facts.append(z3.Implies(z3.And(usual, z3.Not(less), next_), made == z3.BitVecVal(1, width)))
        return made


def is_comparison(binary: Binary) -> bool:
    """Whether a binary operator gives a truth."""
    return binary.op in COMPARISONS
