"""What cannot hold of whole numbers cannot hold of the bits: each solution over bits is one of the translation."""

import random
from typing import Any

import pytest
import z3

from stepring.paths.symbolic_sums import Sums, whole


def word(draw: random.Random, names: list[Any], depth: int) -> Any:
    """A random term of as many bits as the names have."""
    size = names[0].size()
    if depth == 0 or draw.random() < 0.15:
        return draw.choice(names) if draw.random() < 0.7 else z3.BitVecVal(draw.randrange(1 << size), size)
    one, other = word(draw, names, depth - 1), word(draw, names, depth - 1)
    low = z3.Extract(size // 2 - 1, 0, one)
    made = (
        one + other, one - other, -one, ~one, one & other, one & 7, z3.URem(one, other), one * 3, one * other,
        z3.ZeroExt(size - size // 2, low), z3.SignExt(size - size // 2, low), one | other, z3.LShR(one, 1),
        z3.Concat(low, z3.Extract(size - 1, size // 2, other)), z3.If(truth(draw, names, depth - 1), one, other),
    )  # fmt: skip
    return draw.choice(made)


def truth(draw: random.Random, names: list[Any], depth: int) -> Any:
    """A random truth about random terms."""
    one, other = word(draw, names, depth), word(draw, names, depth)
    made = draw.choice((z3.ULT(one, other), z3.ULE(one, other), one < other, one <= other, one == other, one != other))
    if depth == 0:
        return made
    also = truth(draw, names, depth - 1)
    return draw.choice((made, z3.Not(made), z3.And(made, also), z3.Or(made, also), z3.Implies(made, also)))


@pytest.mark.parametrize("seed", range(6))
def test_what_holds_of_bits_holds_of_whole_numbers(seed: int) -> None:
    draw = random.Random(seed)
    names = [z3.BitVec(name, 8) for name in "abc"]
    tried = 0
    for _ in range(25):
        asked = truth(draw, names, 3)
        values = {name: draw.randrange(256) for name in names}
        fixed = [name == value for name, value in values.items()]
        held = z3.is_true(z3.simplify(z3.substitute(asked, *((n, z3.BitVecVal(v, 8)) for n, v in values.items()))))
        if not held:
            asked = z3.Not(asked)
        sums = Sums()
        solver = z3.SimpleSolver()
        solver.set("rlimit", 2_000_000)
        solver.add(*(whole(sums, term) for term in (asked, *fixed)), *sums.rules)
        assert solver.check() != z3.unsat, (asked, values)
        tried += 1
    assert tried == 25


def refuted(*terms: Any) -> bool:
    sums = Sums()
    solver = z3.SimpleSolver()
    solver.set("rlimit", 500_000)
    solver.add(*(whole(sums, term) for term in terms), *sums.rules)
    return bool(solver.check() == z3.unsat)


def test_an_index_that_comes_round_is_inside() -> None:
    at, by, size = (z3.BitVec(name, 64) for name in ("at", "by", "size"))
    known = [z3.ULT(at, size), z3.ULE(by, size), z3.ULE(size, (1 << 63) - 1)]
    moved = at + by
    after = z3.If(z3.UGE(moved, size), moved - size, moved)
    assert refuted(*known, z3.UGE(after, size))
    assert refuted(*known, z3.UGE(z3.URem(at + 1, size), size))
    # A longer way may pass the end twice, and one that starts at the end need not come back.
    assert not refuted(known[0], known[2], z3.UGE(after, size))
    assert not refuted(z3.ULE(at, size), known[1], known[2], z3.UGE(after, size))
