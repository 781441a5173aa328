"""What a flat function does to indices: where it advances one, where it wraps it, where it subscripts with it.

The one idea: an index is a lasting integer whose new value is made from its old one by adding a constant, with a wrap
somewhere on the way: a remainder, a mask, or a comparison that decides on another value. The way may lead through
local copies, so the sources of every local variable are computed first (which lasting integers its value is made of
by copying, adding, reducing), then the locals that lead back into the index (its *chain*). A store of a constant is a
wrap only if a comparison of the same index decides on it (control dependence in the sense of Ferrante, Ottenstein
and Warren, 1987); any other constant is a reset.
"""

from collections import defaultdict
from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Literal

from stepring.meaning.fold import fold
from stepring.meaning.types import (
    Binary,
    Cast,
    Const,
    Expr,
    IntType,
    Load,
    PointerStep,
    PointerType,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.ring_flat import Flat, FlatOp, Outside, Set, Spoil, Touch, whole_arrays
from stepring.shapes.ring_keys import NOTHING, Key, is_local, place_keys
from stepring.shapes.ring_near import near, unchecked, use_of
from stepring.shapes.ring_sources import (
    Comparison,
    Order,
    Sight,
    Term,
    Use,
    compared,
    control_order,
    guards_of,
    locals_of,
    mask_term,
    sources,
    spread,
    term_of,
)
from stepring.shapes.types import WrapForm

Role = Literal["advance", "wrap", "before", "instead", "reset", "copy", "other"]
"""What an operation is to an index; a wrap comes after the advance, ``before`` it (as counting down needs it), or
``instead`` of it (``i = i == N - 1 ? 0 : i + 1``)."""


@dataclass(frozen=True, slots=True)
class Wrap:
    """A wrap: its form, the constant it speaks of (None at run time), the operator, its place.

    ``limit`` is N of ``% N`` or ``>= N``, the mask plus one, or the value that a decrement comes back from. ``inner``:
    it is done to a copy of the index. ``term`` is the limit where that is set at run time.
    """

    form: WrapForm
    limit: int | None
    operator: str
    position: Position
    function: str
    inner: bool = False
    term: Term | None = None


@dataclass(frozen=True, slots=True)
class Advance:
    """A change of an index by ``by`` (None: not a constant)."""

    by: int | None
    position: Position
    function: str


@dataclass(frozen=True, slots=True)
class Reset:
    """A store of a constant that no comparison of the index decides on."""

    value: int
    position: Position
    function: str


@dataclass(slots=True)
class CellFacts:
    """What one flat function does to one lasting integer; ``roles`` says it of every operation.

    ``handed`` are arrays that are given away whole where a comparison of the integer decides on its wrap, ``filled``
    those that are where any comparison of the integer alone decides on that.
    """

    roles: dict[int, Role] = field(default_factory=dict)
    moves: dict[int, int] = field(default_factory=dict)
    advances: list[Advance] = field(default_factory=list)
    wraps: list[Wrap] = field(default_factory=list)
    resets: list[Reset] = field(default_factory=list)
    handed: set[Key] = field(default_factory=set)
    filled: set[Key] = field(default_factory=set)
    copies: list[Position] = field(default_factory=list)


@dataclass(slots=True, eq=False)
class Table:
    """A flat function's operations, each with the number of its block: stores by what they store into, and the rest."""

    stores: dict[Key, list[tuple[int, FlatOp]]] = field(default_factory=lambda: defaultdict(list))
    touches: list[tuple[int, Touch]] = field(default_factory=list)
    spoils: list[tuple[int, FlatOp]] = field(default_factory=list)
    calls: list[tuple[int, FlatOp]] = field(default_factory=list)


@dataclass(slots=True, eq=False)
class FlatFacts:
    """The facts of a flat function."""

    sight: Sight
    flat: Flat
    uses: list[Use]
    plain: list[Touch]
    sources: dict[Key, frozenset[Key]]
    types: dict[Key, IntType]
    stored: frozenset[Key]
    cursors: frozenset[Key] = frozenset()
    unchecked: frozenset[Key] = frozenset()
    cells: dict[Key, CellFacts] = field(default_factory=dict)
    comparisons: list[Comparison] = field(default_factory=list)
    cross: dict[tuple[Key, Key], CellFacts] = field(default_factory=dict)
    copied: set[tuple[Key, Key]] = field(default_factory=set)
    listed: Table | None = None
    given: list[Use] = field(default_factory=list)
    loaded: frozenset[Key] | None = None

    def table(self) -> Table:
        """The operations by what they do, worked out once."""
        if self.listed is None:
            self.listed = Table()
            for number, block in enumerate(self.flat.blocks):
                for op in block.ops:
                    match op:
                        case Set():
                            for key in place_keys(op.place, op.place_frame, self.flat.points):
                                self.listed.stores[key].append((number, op))
                        case Touch():
                            self.listed.touches.append((number, op))
                        case Spoil():
                            self.listed.spoils.append((number, op))
                        case Outside():
                            self.listed.calls.append((number, op))
                            if op.result is not None:
                                for key in place_keys(op.result, op.frame, self.flat.points):
                                    self.listed.stores[key].append((number, op))
        return self.listed

    def control_order(self) -> Order:
        """The post-dominators of the blocks, and the branches that each block depends on; worked out once."""
        return control_order(self.sight)


def facts_of(flat: Flat) -> FlatFacts:
    """Collect the first facts of a flat function: sources and subscripts. ``complete`` adds the rest."""
    sight = Sight(flat)
    spread(sight)
    uses: list[Use] = []
    plain: list[Touch] = []
    for block in flat.blocks:
        for op in block.ops:
            if isinstance(op, Touch):
                use = use_of(sight, op)
                if use is None:
                    plain.append(op)
                else:
                    op.indexed = True
                    uses.append(use)
    return FlatFacts(
        sight,
        flat,
        uses,
        plain,
        sight.sources,
        sight.types,
        frozenset(sight.stored),
        _cursors(flat),
        unchecked(sight) if flat.function.parameters else NOTHING,
    )


def _cursors(flat: Flat) -> frozenset[Key]:
    """The lasting pointers that are moved on from where they stand: what is counted from them is no ring's slot."""
    found: set[Key] = set()
    for block in flat.blocks:
        for op in block.ops:
            if isinstance(op, Set) and isinstance(op.place.type, PointerType):
                inner = op.value
                while isinstance(inner, Cast):
                    inner = inner.operand
                if not isinstance(inner, PointerStep):
                    continue
                base = inner.pointer
                while isinstance(base, Cast):
                    base = base.operand
                if isinstance(base, Load):
                    keys = place_keys(op.place, op.place_frame, flat.points)
                    found |= {key for key in keys & place_keys(base.place, op.frame, flat.points) if not is_local(key)}
    return frozenset(found)


def complete(facts: FlatFacts) -> None:
    """Add what happens to the integers that the function stores into, and the comparisons of any."""
    sight = facts.sight
    for key in sight.stored:
        found = _cell(sight, key)
        if found is not None:
            facts.cells[key] = found
        for _, op in sight.sets[key]:
            for other in (sources(sight, op.value, op.frame) & near(sight, op.value, op.frame, True)) - {key}:
                facts.copied.add((key, other))
                if (key, other) not in facts.cross:
                    crossing = _cell(sight, key, other)
                    if crossing is not None and crossing.advances:
                        facts.cross[key, other] = crossing
    facts.comparisons = list(compared(sight).values())


# ---------------------------------------------------------------------------------------------------------- cells


def _cell(sight: Sight, target: Key, base: Key | None = None) -> CellFacts | None:
    """What the function does to a lasting integer, None where it is only filled from elsewhere with data.

    With ``base``: how ``target`` is made from the integer ``base``, as in ``next = (head + 1) % N`` where both last.
    """
    cell = base or target
    chain = _chain(sight, target, cell)
    facts = CellFacts()
    nodes = [(number, op, key == target) for key in (target, *chain) for number, op in sight.sets.get(key, ())]
    guards = guards_of(sight, cell, nodes)
    if not any(any(True for _ in _steps(sight, op.value, op.frame, cell)) for _, op, _ in nodes):
        guards = {}  # what is never stepped is never wrapped
    moved = {
        at
        for number, op, _ in nodes
        if any(_steps(sight, op.value, op.frame, cell))
        for _, at in guards.get(number, ())
    }
    signs: set[int] = set()
    bare: list[tuple[int, Set, int, bool, bool]] = []
    for number, op, direct in nodes:
        steps = list(_steps(sight, op.value, op.frame, cell))
        for form, limit, operator, at, term in reductions(sight, op.value, op.frame, cell):
            facts.wraps.append(Wrap(form, limit, operator, at or op.position, op.function, not direct, term))
            facts.roles[id(op)] = "wrap"
        value = written(op.value)
        if steps:
            total = None if None in steps else sum(step for step in steps if step is not None)
            if total is not None and not guards.get(number):
                signs.add(1 if total > 0 else -1)
            bare.append((number, op, 0 if total is None else total, total is None, direct))
        elif value is not None:
            _constant_store(facts, op, value, guards.get(number, ()), direct, moved, cell)
        elif direct and cell not in sources(sight, op.value, op.frame):
            facts.copies.append(op.position)
            facts.roles[id(op)] = "copy"
    for number, op, total, unknown, direct in bare:
        guard = guards.get(number, ())
        sign = 1 if total > 0 else -1
        if guard and not unknown and abs(total) > 1 and (-sign in signs or not signs):
            for comparison, at in guard:
                facts.wraps.append(
                    Wrap(
                        "decrement" if sign > 0 else "subtract",
                        abs(total) if sign > 0 else comparison.constant,
                        comparison.operator,
                        at,
                        op.function,
                        not direct,
                        comparison.limit_of(cell),
                    )
                )
            facts.roles[id(op)] = "wrap"
        elif unknown and (same := [item for item in guard if _by_limit(sight, op, item[0], cell)]):
            # head += n; if (head >= size) head -= size;
            for comparison, at in same:
                limit_term = comparison.limit_of(cell)
                facts.wraps.append(
                    Wrap("subtract", comparison.constant, comparison.operator, at, op.function, not direct, limit_term)
                )
            facts.roles[id(op)] = "wrap"
        else:
            facts.advances.append(Advance(None if unknown else total, op.position, op.function))
            facts.roles[id(op)] = "advance"
            facts.moves[id(op)] = total
    if not (facts.advances or facts.wraps or facts.resets or facts.copies):
        return None
    turned = {at for number, op, _ in nodes if facts.roles.get(id(op)) == "wrap" for _, at in guards.get(number, ())}
    if turned:
        facts.handed = _handed(sight, turned)
    if facts.advances and base is None:
        alone = {item.position for item in compared(sight).values() if item.left | item.right == {cell}}
        facts.filled = _handed(sight, alone) if alone else set()
    stepping = {
        at for number, op, _ in nodes if facts.roles.get(id(op)) == "advance" for _, at in guards.get(number, ())
    }
    for number, op, _ in nodes:
        later = [item.position for item in facts.advances if item.function == op.function]
        apart = any(at in stepping for _, at in guards.get(number, ()))  # either wrap or advance, never both
        if facts.roles.get(id(op)) != "wrap" or not later:
            continue
        if apart:
            facts.roles[id(op)] = "instead"
        elif all(op.position < item for item in later):
            facts.roles[id(op)] = "before"
    return facts


def _handed(sight: Sight, turned: set[Position]) -> set[Key]:
    """The arrays that are passed whole to a function in blocks that some comparisons decide on."""
    found: set[Key] = set()
    branches = {number for number, comparison in compared(sight).items() if comparison.position in turned}
    for number, block in enumerate(sight.flat.blocks):
        if branches.isdisjoint(control_order(sight)[1].get(number, ())):
            continue
        for op in block.ops:
            if isinstance(op, Outside):
                found |= op.wholes
            elif isinstance(op, Set) and op.frame != op.place_frame:
                found |= whole_arrays(op.value, op.frame, sight.flat.points)
    return found


def _by_limit(sight: Sight, op: Set, comparison: Comparison, cell: Key) -> bool:
    """Whether what is subtracted is what the cell was compared with."""
    limit = comparison.right if cell in comparison.left else comparison.left
    expr = op.value
    while isinstance(expr, Cast):
        expr = expr.operand
    return isinstance(expr, Binary) and expr.op == "-" and bool(limit) and sources(sight, expr.right, op.frame) == limit


def _constant_store(
    facts: CellFacts,
    op: Set,
    value: int,
    guard: "tuple[tuple[Comparison, Position], ...]",
    direct: bool,
    moved: set[Position],
    cell: Key,
) -> None:
    """A constant is a wrap where a comparison of the index decides on it and it is no clamp.

    ``moved`` are the comparisons that decide whether the index steps at all: ``if (i == 0) i = N - 1; else i--;``
    """
    for comparison, at in guard:
        limit = comparison.constant
        if limit is not None and value not in (0, 1) and limit > 1 and abs(limit - value) <= 1:
            facts.roles[id(op)] = "other"  # a clamp: the index stays at its end
            return
        if value < -1 and isinstance(op.place.type, IntType):
            value += 1 << op.place.type.width  # as it was written, before the type cut it off
        low = limit is not None and limit in (0, 1, -1) and value > 1
        form: WrapForm = "decrement" if low else "choice" if _temporary(op) else "reset"
        if low:
            limit = value + 1 if at in moved or comparison.operator in ("<", ">=") else value
        facts.wraps.append(
            Wrap(form, limit, comparison.operator, at, op.function, not direct, comparison.limit_of(cell))
        )
        facts.roles[id(op)] = "wrap"
    if not guard and direct:
        facts.resets.append(Reset(value, op.position, op.function))
        facts.roles[id(op)] = "reset"


def written(expr: Expr) -> int | None:
    """A constant as it was written: ``at = 200`` is 200 even where the type of ``at`` cannot hold it."""
    inner = expr
    while isinstance(inner, Cast):
        inner = inner.operand
    return inner.value if isinstance(inner, Const) else fold(expr)


def _temporary(op: Set) -> bool:
    return isinstance(op.place, VariablePlace) and op.place.variable.identity.startswith("%")


def _chain(sight: Sight, target: Key, cell: Key) -> list[Key]:
    """The locals that are made from the cell and lead into the target (usually the cell itself)."""
    found: dict[Key, None] = {}
    pending = [(op.value, op.frame) for _, op in sight.sets.get(target, ())]
    while pending:
        expr, frame = pending.pop()
        for key in locals_of(sight, expr, frame):
            if key not in found and cell in sight.sources.get(key, NOTHING):
                found[key] = None
                pending.extend((op.value, op.frame) for _, op in sight.sets.get(key, ()))
    return list(found)


def _steps(sight: Sight, expr: Expr, frame: str, cell: Key) -> Iterator[int | None]:
    """What is added to the cell's value in an expression; ``(i + N - 1) % N`` counts as -1."""
    match expr:
        case Cast(operand=operand):
            yield from _steps(sight, operand, frame, cell)
        case Binary(op="%" | "&" as op, left=left, right=right):
            steps = list(_steps(sight, left, frame, cell))
            limit = fold(right)
            if limit is not None and op == "&":
                limit += 1
            if steps and None not in steps:
                total = sum(step for step in steps if step is not None)
                if limit is not None and 1 < limit - 1 <= total <= limit - 1:
                    total -= limit
                yield total
            else:
                yield from steps[:1]
        case Binary(op="+" | "-" as op, left=left, right=right):
            in_left = cell in sources(sight, left, frame)
            in_right = cell in sources(sight, right, frame)
            if in_left:
                yield from _steps(sight, left, frame, cell)
                by = fold(right)
                yield by if by is None or op == "+" else -by
            elif in_right and op == "+":
                yield from _steps(sight, right, frame, cell)
                yield fold(left)


def reductions(
    sight: Sight, expr: Expr, frame: str, cell: Key
) -> Iterator[tuple[WrapForm, int | None, str, Position | None, Term | None]]:
    match expr:
        case Cast(operand=operand):
            yield from reductions(sight, operand, frame, cell)
        case Binary(op="%", left=left, right=right, position=position):
            if cell in sources(sight, left, frame):
                yield "modulo", fold(right), "%", position, term_of(sight, right, frame)
        case Binary(op="&", left=left, right=right, position=position):
            inner, mask = (left, right) if cell in sources(sight, left, frame) else (right, left)
            if cell in sources(sight, inner, frame):
                known = fold(mask)
                yield "mask", None if known is None else known + 1, "&", position, mask_term(sight, inner, mask, frame)
        case Binary(op="+" | "-", left=left, right=right):
            yield from reductions(sight, left, frame, cell)
            yield from reductions(sight, right, frame, cell)


