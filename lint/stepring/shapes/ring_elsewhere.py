"""Rings that keep their indices only: the caller owns the storage, and gets the number of a slot.

The one idea: without storage, what tells a ring from cyclic counters over channels is that two members of one
structure walk round the same run-time capacity, that they are compared with each other, and that the code gives its
caller a slot made from them. The index that the occupancy is counted from (the left side of their difference) writes.
"""

from collections import defaultdict
from collections.abc import Iterator, Sequence

from stepring.meaning.types import Binary, Expr, IntType, Return
from stepring.places import Position
from stepring.shapes.ring_facts import FlatFacts, reductions
from stepring.shapes.ring_flat import Set, Touch
from stepring.shapes.ring_keys import Key
from stepring.shapes.ring_sources import Comparison, Use, reduction_of, sources


def given(facts: FlatFacts) -> Iterator[Use]:
    """The slots that a function gives its caller: values reduced by a run-time number of slots."""
    for block in facts.flat.blocks:
        match block.end:
            case Return(value=value, position=position) if value is not None:
                use = _given(facts, value, position)
                if use is not None:
                    yield use


def _given(facts: FlatFacts, value: Expr, position: Position) -> Use | None:
    form, modulus, at, term = reduction_of(facts.sight, value, "", 0)
    if form not in ("mask", "modulo") or term is None:
        return None
    cells = frozenset(key for key in sources(facts.sight, value, "") if key != term.key and _same(key, term.key))
    if not cells:
        return None
    element = IntType("unsigned char", 8, False, 1)
    touch = Touch(_home(term.key[1]), element, None, value, "", "address", position, facts.flat.function.name)
    return Use(touch, cells, form, modulus, at, False, term)


def _same(key: Key, other: Key) -> bool:
    """Whether two integers are members of one structure."""
    return key[0] == other[0] == "member" and key[1] == other[1] and len(key) == len(other) == 3


def _home(struct: str) -> Key:
    """The key that stands for the storage that a structure's indices speak of."""
    return ("member", struct, "")


def walked_together(facts: Sequence[FlatFacts]) -> dict[Key, frozenset[Key]]:
    """The capacities that several members of the same structure are reduced by, with those members; only where some
    code gives its caller such a slot."""
    found: dict[Key, set[Key]] = defaultdict(set)
    gives: set[Key] = set()
    for item in facts:
        for use in item.given:
            if use.term is not None:
                found[use.term.key] |= use.cells
                gives.add(use.term.key)
        for key in item.sight.stored:
            if key[0] != "member":
                continue
            for _, op in item.sight.sets[key]:
                for _, _, _, _, term in reductions(item.sight, op.value, op.frame, key):
                    if term is not None and _same(key, term.key) and key != term.key:
                        found[term.key].add(key)
    return {term: frozenset(keys) for term, keys in found.items() if len(keys) > 1 and term in gives}


def pairs(
    together: dict[Key, frozenset[Key]], moving: frozenset[Key], comparisons: Sequence[Comparison]
) -> Iterator[tuple[Key, tuple[Key, ...]]]:
    """The rings without storage: the key that stands for it, and the indices. ``moving`` are the integers that
    advance."""
    for term, keys in together.items():
        walkers = sorted(keys & moving)
        compared = {
            key
            for comparison in comparisons
            for both in (comparison.left | comparison.right,)
            for key in walkers
            if key in both and len(both & set(walkers)) > 1
        }
        if len(compared) > 1:
            yield _home(term[1]), tuple(sorted(compared))


def writer_of(facts: Sequence[FlatFacts], indices: Sequence[Key]) -> Key | None:
    """The index that the others are taken away from: it counts what was put in."""
    mine = frozenset(indices)
    for item in facts:
        for block in item.flat.blocks:
            for op in block.ops:
                if isinstance(op, Set):
                    found = _minuend(item, op.value, op.frame, mine)
                    if found is not None:
                        return found
            value = getattr(block.end, "condition", None) or getattr(block.end, "value", None)
            if value is not None:
                found = _minuend(item, value, block.frame, mine)
                if found is not None:
                    return found
    return None


def _minuend(item: FlatFacts, expr: Expr, frame: str, mine: frozenset[Key]) -> Key | None:
    pending = [expr]
    while pending:
        part = pending.pop()
        if isinstance(part, Binary):
            if part.op == "-":
                left = sources(item.sight, part.left, frame) & mine
                right = sources(item.sight, part.right, frame) & mine
                if len(left) == len(right) == 1 and left != right:
                    return next(iter(left))
            pending += (part.left, part.right)
        else:
            operand = getattr(part, "operand", None)
            if operand is not None:
                pending.append(operand)
    return None
