"""Formulas over bit-vectors as formulas over whole numbers, for what rests on sums and orders alone.

The one idea: a sum of ``n``-bit numbers is the sum of whole numbers less a multiple of ``2**n``, and that multiple is a
small whole number of its own. Whatever has no such reading (products, shifts) becomes a number of which only its range
and what is written below is known: an abstraction that is only good for refuting, as in R. E. Bryant and others,
"Deciding bit-vector arithmetic with abstraction", 2007. What cannot hold of the whole numbers cannot hold of the bits,
but not the other way round.
"""

from dataclasses import dataclass, field
from typing import Any

import z3

Term = Any


@dataclass(slots=True, eq=False)
class Sums:
    """A translation in progress; ``rules`` say what is known of the numbers that it made up."""

    rules: list[Term] = field(default_factory=list)
    numbers: dict[int, Term] = field(default_factory=dict)
    truths: dict[int, Term] = field(default_factory=dict)
    kept: list[Term] = field(default_factory=list)
    count: int = 0


def whole(sums: Sums, term: Term) -> Term:
    """A truth over bits as a truth over whole numbers that holds wherever it does.

    Raises RecursionError for a term that is nested too deeply.
    """
    known = sums.truths.get(term.get_id())
    if known is None:
        known = sums.truths[term.get_id()] = _truth(sums, term)
        sums.kept.append(term)  # so that no other term is given its number
    return known


def _truth(sums: Sums, term: Term) -> Term:
    kind = term.decl().kind()
    if term.num_args() == 0:
        return term
    args = term.children()
    match kind:
        case z3.Z3_OP_AND:
            return z3.And(*(whole(sums, arg) for arg in args))
        case z3.Z3_OP_OR:
            return z3.Or(*(whole(sums, arg) for arg in args))
        case z3.Z3_OP_NOT:
            return z3.Not(whole(sums, args[0]))
        case z3.Z3_OP_IMPLIES:
            return z3.Implies(whole(sums, args[0]), whole(sums, args[1]))
        case z3.Z3_OP_ITE:
            return z3.If(*(whole(sums, arg) for arg in args))
        case z3.Z3_OP_EQ if z3.is_bool(args[0]):
            return whole(sums, args[0]) == whole(sums, args[1])
        case z3.Z3_OP_EQ if z3.is_bv(args[0]):
            return number(sums, args[0]) == number(sums, args[1])
        case z3.Z3_OP_ULEQ:
            return number(sums, args[0]) <= number(sums, args[1])
        case z3.Z3_OP_ULT:
            return number(sums, args[0]) < number(sums, args[1])
        case z3.Z3_OP_UGEQ:
            return number(sums, args[0]) >= number(sums, args[1])
        case z3.Z3_OP_UGT:
            return number(sums, args[0]) > number(sums, args[1])
        case z3.Z3_OP_SLEQ:
            return _signed(sums, args[0]) <= _signed(sums, args[1])
        case z3.Z3_OP_SLT:
            return _signed(sums, args[0]) < _signed(sums, args[1])
        case z3.Z3_OP_SGEQ:
            return _signed(sums, args[0]) >= _signed(sums, args[1])
        case z3.Z3_OP_SGT:
            return _signed(sums, args[0]) > _signed(sums, args[1])
    sums.count += 1
    return z3.Bool(f"some truth {sums.count}")


def number(sums: Sums, term: Term) -> Term:
    """A bit-vector as the whole number that its bits are, without sign."""
    known = sums.numbers.get(term.get_id())
    if known is None:
        known = sums.numbers[term.get_id()] = _number(sums, term)
        sums.kept.append(term)
    return known


def _fresh(sums: Sums, width: int) -> Term:
    sums.count += 1
    made = z3.Int(f"number {sums.count}")
    sums.rules += [made >= 0, made < (1 << width)]
    return made


def _signed(sums: Sums, term: Term) -> Term:
    width = term.size()
    value = number(sums, term)
    return z3.If(value >= 1 << (width - 1), value - (1 << width), value)


def _rest(sums: Sums, total: Term, width: int) -> Term:
    """A whole number's lower bits."""
    made = _fresh(sums, width)
    sums.count += 1
    times = z3.Int(f"times {sums.count}")
    sums.rules.append(made == total - times * (1 << width))
    return made


def _number(sums: Sums, term: Term) -> Term:
    width = term.size()
    if z3.is_bv_value(term):
        return z3.IntVal(term.as_long())
    args = term.children()
    match term.decl().kind():
        case z3.Z3_OP_ITE:
            return z3.If(whole(sums, args[0]), number(sums, args[1]), number(sums, args[2]))
        case z3.Z3_OP_BADD:
            return _rest(sums, z3.Sum(*(number(sums, arg) for arg in args)), width)
        case z3.Z3_OP_BSUB:
            return _rest(sums, number(sums, args[0]) - z3.Sum(*(number(sums, arg) for arg in args[1:])), width)
        case z3.Z3_OP_BNEG:
            return _rest(sums, -number(sums, args[0]), width)
        case z3.Z3_OP_BNOT:
            return (1 << width) - 1 - number(sums, args[0])
        case z3.Z3_OP_BMUL if len(args) == 2 and (z3.is_bv_value(args[0]) or z3.is_bv_value(args[1])):
            factor, other = (args[0], args[1]) if z3.is_bv_value(args[0]) else (args[1], args[0])
            return _rest(sums, factor.as_signed_long() * number(sums, other), width)
        case z3.Z3_OP_ZERO_EXT:
            return number(sums, args[0])
        case z3.Z3_OP_CONCAT:
            value = number(sums, args[0])
            for arg in args[1:]:
                value = value * (1 << arg.size()) + number(sums, arg)
            return value
        case z3.Z3_OP_SIGN_EXT:
            inner = args[0].size()
            value = number(sums, args[0])
            return z3.If(value >= 1 << (inner - 1), value + (1 << width) - (1 << inner), value)
        case z3.Z3_OP_EXTRACT:
            low = term.decl().params()[1]
            value = number(sums, args[0])
            if low == 0:
                return _rest(sums, value, width)
            upper, below = _fresh(sums, args[0].size() - low), _fresh(sums, low)
            sums.rules.append(value == upper * (1 << low) + below)
            return _rest(sums, upper, width)
        case z3.Z3_OP_BAND if len(args) == 2:
            return _masked(sums, args, width)
        case z3.Z3_OP_BUREM | z3.Z3_OP_BUREM_I:
            return _remainder(sums, args, width)
    return _fresh(sums, width)


def _masked(sums: Sums, args: list[Term], width: int) -> Term:
    for mask, other in (args, reversed(args)):
        if z3.is_bv_value(mask) and (mask.as_long() & (mask.as_long() + 1)) == 0:
            return _rest(sums, number(sums, other), mask.as_long().bit_length())
    made = _fresh(sums, width)
    sums.rules += [made <= number(sums, arg) for arg in args]
    return made


def _remainder(sums: Sums, args: list[Term], width: int) -> Term:
    """``a % b``: what is needed to see an index come round once (``a % 0`` is ``a``, as SMT-LIB has it)."""
    above, below = (number(sums, arg) for arg in args)
    made = _fresh(sums, width)
    sums.rules += [
        made <= above,
        z3.Implies(below > 0, made < below),
        z3.Implies(z3.Or(above < below, below == 0), made == above),
        z3.Implies(z3.And(above >= below, above < 2 * below), made == above - below),
    ]
    return made
