"""What the values of a flat function are made of: sources, nearness, comparisons, and what decides on what.

The one idea: follow copies, sums and reductions back to lasting integers, without regard to order; and know of every
block which branches decide on it (control dependence in the sense of Ferrante, Ottenstein and Warren, 1987).
"""

from collections import defaultdict
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import NamedTuple, TypeAlias

import networkx

from stepring.meaning.fold import fold
from stepring.meaning.types import (
    Binary,
    Branch,
    Cast,
    Expr,
    IntType,
    Load,
    Unary,
    UnknownType,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.ring_flat import Flat, FlatBlock, Set, Touch
from stepring.shapes.ring_keys import NOTHING, Key, is_local, is_scalar, place_keys
from stepring.shapes.types import WrapForm

Order: TypeAlias = tuple[dict[int, int], dict[int, tuple[int, ...]]]
"""Post-dominators of blocks, and the branches that blocks depend on."""
COMPARISONS = ("<", "<=", ">", ">=", "==", "!=")


class Term(NamedTuple):
    """An integer's value plus a constant; the integer lasts, or is a parameter."""

    key: Key
    plus: int


@dataclass(frozen=True, slots=True)
class Use:
    """A subscript that is made from lasting integers; ``scaled``: multiplied on the way; ``term`` is the modulus
    where that is set at run time."""

    touch: Touch
    cells: frozenset[Key]
    reduction: WrapForm
    modulus: int | None
    reduced_at: Position | None
    scaled: bool
    term: Term | None = None


@dataclass(frozen=True, slots=True)
class Comparison:
    """A branch on lasting integers: those of the left and of the right side, and whether either is advanced."""

    left: frozenset[Key]
    right: frozenset[Key]
    operator: str
    constant: int | None
    position: Position
    moved: bool
    terms: tuple[Term | None, Term | None] = (None, None)

    def limit_of(self, cell: Key) -> Term | None:
        """What an integer is compared with, if that is one integer plus a constant."""
        return self.terms[1] if cell in self.left else self.terms[0]


@dataclass(slots=True)
class Sight:
    """A flat function with what was found of it so far."""

    flat: Flat
    sources: dict[Key, frozenset[Key]] = field(default_factory=dict)
    types: dict[Key, IntType] = field(default_factory=dict)
    sets: dict[Key, list[tuple[int, Set]]] = field(default_factory=lambda: defaultdict(list))
    stored: list[Key] = field(default_factory=list)
    order: Order | None = None
    close: dict[bool, dict[Key, frozenset[Key]]] = field(default_factory=dict)
    compared: dict[int, Comparison] | None = None


# ---------------------------------------------------------------------------------------------------------- sources


def spread(sight: Sight) -> None:
    """Fill ``sets`` and ``sources``."""
    flat = sight.flat
    stored: dict[Key, None] = {}
    for number, block in enumerate(flat.blocks):
        for op in block.ops:
            if isinstance(op, Set) and isinstance(op.place.type, IntType | UnknownType):
                for key in place_keys(op.place, op.place_frame, flat.points):
                    sight.sets[key].append((number, op))
                    if not is_local(key):
                        stored[key] = None
                        if isinstance(op.place.type, IntType):
                            sight.types[key] = op.place.type
    sight.stored = list(stored)
    pending = True
    while pending:
        pending = False
        for key, sets in sight.sets.items():
            if not is_local(key):
                continue
            found = sight.sources.get(key, NOTHING)
            for _, op in sets:
                found |= sources(sight, op.value, op.frame)
            if found != sight.sources.get(key, NOTHING):
                sight.sources[key] = found
                pending = True


def sources(sight: Sight, expr: Expr, frame: str) -> frozenset[Key]:
    """The lasting integers that a value is made of by copying, adding or reducing."""
    match expr:
        case Load(place=place, type=IntType() | UnknownType() as type_):
            found: frozenset[Key] = NOTHING
            for key in place_keys(place, frame, sight.flat.points):
                if not is_local(key) and isinstance(type_, IntType):
                    sight.types.setdefault(key, type_)
                found |= sight.sources.get(key, NOTHING) if is_local(key) else frozenset((key,))
            return found
        case Cast(operand=operand):
            return sources(sight, operand, frame)
        case Binary(op="+" | "-" | "&", left=left, right=right):
            return sources(sight, left, frame) | sources(sight, right, frame)
        case Binary(op="%", left=left):
            return sources(sight, left, frame)
    return NOTHING


def locals_of(sight: Sight, expr: Expr, frame: str) -> Iterator[Key]:
    """The local variables that an expression's value is made of by copying, adding or reducing."""
    match expr:
        case Load(place=place):
            yield from (key for key in place_keys(place, frame, sight.flat.points) if is_local(key))
        case Cast(operand=operand):
            yield from locals_of(sight, operand, frame)
        case Binary(op="+" | "-" | "%" | "&", left=left, right=right):
            yield from locals_of(sight, left, frame)
            yield from locals_of(sight, right, frame)


# ---------------------------------------------------------------------------------------------------------- uses


def reduction_of(
    sight: Sight, expr: Expr, frame: str, depth: int
) -> tuple[WrapForm, int | None, Position | None, Term | None]:
    """How a subscript is brought into range at the access: the remainder or mask that is outermost in it."""
    match expr:
        case Cast(operand=operand):
            return reduction_of(sight, operand, frame, depth)
        case Binary(op="%", right=right, position=position):
            return "modulo", fold(right), position, term_of(sight, right, frame)
        case Binary(op="&", left=left, right=right, position=position):
            mask = fold(right) if fold(right) is not None else fold(left)
            return "mask", None if mask is None else mask + 1, position, mask_term(sight, left, right, frame)
        case Load(place=VariablePlace() as place) if depth < 4:
            for key in place_keys(place, frame, sight.flat.points):
                sets = sight.sets.get(key, ())
                made = [op for _, op in sets if fold(op.value) is None]  # besides a constant that says "none"
                if is_local(key) and len(made) == 1:
                    op = made[0]
                    form, modulus, at, term = reduction_of(sight, op.value, op.frame, depth + 1)
                    return form, modulus, at or op.position, term
    return "none", None, None, None


def term_of(sight: Sight, expr: Expr, frame: str, depth: int = 0) -> Term | None:
    """An expression as one lasting integer, or one parameter, plus a constant."""
    match expr:
        case Cast(operand=operand):
            return term_of(sight, operand, frame, depth)
        case Binary(op="+" | "-" as op, left=left, right=right):
            by = fold(right)
            inner = term_of(sight, left, frame, depth)
            if by is None or inner is None:
                return None
            return Term(inner.key, inner.plus + (by if op == "+" else -by))
        case Load(place=place, type=IntType() | UnknownType()):
            keys = place_keys(place, frame, sight.flat.points)
            key = next(iter(keys)) if len(keys) == 1 else None
            if key is None or not is_local(key):
                return Term(key, 0) if key is not None and is_scalar(key) else None
            sets = sight.sets.get(key, ())
            if len(sets) == 1 and depth < 6:
                return term_of(sight, sets[0][1].value, sets[0][1].frame, depth + 1)
            parameter = isinstance(place, VariablePlace) and place.variable.storage == "parameter"
            return Term(key, 0) if parameter and not sets else None
    return None


def mask_term(sight: Sight, left: Expr, right: Expr, frame: str) -> Term | None:
    """The number of slots that a mask stands for, as a term: the mask plus one."""
    if fold(right) is not None or fold(left) is not None:
        return None
    mask = term_of(sight, right, frame) or term_of(sight, left, frame)
    return Term(mask.key, mask.plus + 1) if mask is not None else None


# ---------------------------------------------------------------------------------------------------------- guards


def guards_of(
    sight: Sight, cell: Key, nodes: list[tuple[int, Set, bool]]
) -> dict[int, tuple[tuple[Comparison, Position], ...]]:
    """For the blocks of some operations: the comparisons of the cell with a limit that decide on them."""
    found: dict[int, tuple[tuple[Comparison, Position], ...]] = {}
    blocks = {number for number, _, _ in nodes}
    if len(sight.flat.blocks) == 1:
        return found
    mine = {
        number: comparison
        for number, comparison in compared(sight).items()
        if (cell in comparison.left) != (cell in comparison.right)
    }
    if not mine:
        return found
    decides = control_order(sight)[1]
    for number in blocks:
        entries = tuple(
            (mine[branch], mine[branch].position) for branch in decides.get(number, ()) if branch in mine
        )
        if entries:
            found[number] = entries
    return found


def compared(sight: Sight) -> dict[int, Comparison]:
    """The comparisons of lasting integers, by the block that they end."""
    if sight.compared is None:
        sight.compared = {
            number: comparison
            for number, block in enumerate(sight.flat.blocks)
            for comparison in (_comparison(sight, block),)
            if comparison is not None
        }
    return sight.compared


def control_order(sight: Sight) -> Order:
    """The post-dominators of the blocks, and the branches that each block depends on; worked out once."""
    if sight.order is None:
        up = post_dominators(sight.flat.blocks)
        sight.order = up, control(sight.flat.blocks, up)
    return sight.order


def _comparison(sight: Sight, block: FlatBlock) -> Comparison | None:
    if not isinstance(block.end, Branch):
        return None
    condition, frame = told(sight, block.end.condition, block.frame, 0)
    if isinstance(condition, Binary) and condition.op in COMPARISONS:
        left = sources(sight, condition.left, frame)
        right = sources(sight, condition.right, frame)
        if not left and not right:
            return None
        constant = fold(condition.right) if left else fold(condition.left)
        moved = _moved(sight, condition.left, frame) or _moved(sight, condition.right, frame)
        terms = (term_of(sight, condition.left, frame), term_of(sight, condition.right, frame))
        return Comparison(left, right, condition.op, constant, block.end.position, moved, terms)
    left = sources(sight, condition, frame)
    return Comparison(left, NOTHING, "!=", 0, block.end.position, False) if left else None


def told(sight: Sight, condition: Expr, frame: str, depth: int) -> tuple[Expr, str]:
    """A condition without negations, taken from the helper that gives it (``if (is_full(q))``) where that is one."""
    while isinstance(condition, Cast) or (isinstance(condition, Unary) and condition.op == "!"):
        condition = condition.operand
    if isinstance(condition, Binary) and condition.op in ("==", "!=") and fold(condition.right) == 0:
        inner, where = told(sight, condition.left, frame, depth)
        if isinstance(inner, Binary) and inner.op in COMPARISONS:
            return inner, where
    if isinstance(condition, Load) and isinstance(condition.place, VariablePlace) and depth < 4:
        for key in place_keys(condition.place, frame, sight.flat.points):
            sets = sight.sets.get(key, ()) if is_local(key) else ()
            if len(sets) == 1:
                inner, where = told(sight, sets[0][1].value, sets[0][1].frame, depth + 1)
                if isinstance(inner, Binary) and inner.op in COMPARISONS:
                    return inner, where
    return condition, frame


def _moved(sight: Sight, expr: Expr, frame: str, depth: int = 0) -> bool:
    match expr:
        case Cast(operand=operand):
            return _moved(sight, operand, frame, depth)
        case Binary(op="+" | "-" | "%" | "&"):
            return True
        case Load(place=VariablePlace() as place) if depth < 4:
            return any(
                _moved(sight, op.value, op.frame, depth + 1)
                for key in place_keys(place, frame, sight.flat.points)
                if is_local(key)
                for _, op in sight.sets.get(key, ())
            )
    return False


def post_dominators(blocks: list[FlatBlock]) -> dict[int, int]:
    """The next block that every way from a block meets; -1 stands for leaving the function."""
    graph: networkx.DiGraph[int] = networkx.DiGraph()
    graph.add_node(-1)
    for number, block in enumerate(blocks):
        graph.add_node(number)
        following = block.targets()
        for target in following:
            graph.add_edge(target, number)
        if not following:
            graph.add_edge(-1, number)
    # A loop that is never left still has an order: its last block counts as a way out.
    reached: set[int] = set()
    pending = [int(number) for number in graph.successors(-1)]
    left = list(range(len(blocks)))
    while True:
        while pending:
            number = pending.pop()
            if number not in reached:
                reached.add(number)
                pending.extend(graph.successors(number))
        while left and left[-1] in reached:
            left.pop()
        if not left:
            break
        graph.add_edge(-1, left[-1])
        pending.append(left[-1])
    found = networkx.immediate_dominators(graph, -1)
    return {node: up for node, up in found.items() if node != up}


def control(blocks: list[FlatBlock], up: Mapping[int, int]) -> dict[int, tuple[int, ...]]:
    """For each block the branches that it directly depends on; ``up`` are the post-dominators."""
    found: dict[int, list[int]] = defaultdict(list)
    for number, block in enumerate(blocks):
        following = block.targets()
        if len(following) < 2:
            continue
        stop = up.get(number)
        for target in dict.fromkeys(following):
            current: int | None = target
            while current is not None and current != stop and current != -1:
                if number not in found[current]:
                    found[current].append(number)
                current = up.get(current)
    return {number: tuple(branches) for number, branches in found.items()}
