"""What of a flat function matters for some integers and accesses: a static slice.

The one idea (Weiser 1981): an operation matters if it stores what a later one that matters reads, or if control comes
to such a one through it. Data dependence is over-approximated without regard to order; control dependence is exact on
the graph of blocks.
"""

from collections import defaultdict
from collections.abc import Callable, Sequence

from stepring.meaning.show import expr_text, place_text
from stepring.meaning.types import (
    AddressOf,
    Binary,
    Branch,
    Cast,
    DerefPlace,
    ElementPlace,
    Expr,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    Switch,
    Unary,
    VariablePlace,
)
from stepring.shapes.ring_arith import is_input
from stepring.shapes.ring_facts import FlatFacts
from stepring.shapes.ring_flat import FlatBlock, FlatOp, Outside, Set, Spoil, Touch
from stepring.shapes.ring_keys import NOTHING, Key, is_local, is_scalar, place_keys


class Slice:
    """The part of a flat function that matters.

    ``needed`` are the integers that are read, ``data`` those of them whose values reach a subscript or an index (the
    others only decide on ways), ``relevant`` the operations by ``id``, ``branching`` the blocks whose branch matters,
    ``written`` the tracked integers that the function stores into, ``inputs`` what comes from outside.
    """

    def __init__(
        self,
        facts: FlatFacts,
        tracked: tuple[Key, ...],
        touches: frozenset[int],
        moving: bool,
        writes: Callable[[str], frozenset[Key]],
        types: dict[Key, IntType],
    ) -> None:
        self.facts = facts
        self.tracked = tracked
        self.follow = frozenset(tracked)
        self.touches = touches
        self.moving = moving
        self.writes = writes
        self.types = types
        self.points = facts.flat.points
        self.inputs: set[Key] = set()
        self._slice()
        self.written &= self.follow if moving else set(self.needed)

    def _slice(self) -> None:
        blocks = self.facts.flat.blocks
        decides = self.facts.control_order()[1]
        needed: dict[Key, None] = {}
        data: set[Key] = set()
        relevant: set[int] = set()
        active: set[int] = set()
        branching: set[int] = set()
        table = self.facts.table()
        tracked_ops: dict[Key, list[tuple[int, FlatOp]]] = {
            key: [
                *table.stores.get(key, ()),
                *((number, op) for number, op in table.spoils if key in self.filled(op)),
                *(
                    (number, op)
                    for number, op in table.calls
                    if isinstance(op, Outside) and op.known and key in self.writes(op.name)
                ),
            ]
            for key in self.tracked
        }
        self.written = {key for key, ops in tracked_ops.items() if ops}
        work: list[tuple[int, FlatOp, bool]] = [
            (number, op, True) for number, op in table.touches if id(op) in self.touches
        ]
        if self.moving:
            work.extend((number, op, True) for ops in tracked_ops.values() for number, op in ops)
        wanted: list[tuple[Key, bool]] = []
        while work or wanted:
            while wanted:
                key, as_data = wanted.pop()
                if key in needed and (not as_data or key in data):
                    continue
                needed[key] = None
                if as_data:
                    data.add(key)
                stores = tracked_ops[key] if key in self.follow else table.stores.get(key, ())
                work.extend((number, op, as_data) for number, op in stores)
            if not work:
                break
            number, op, as_data = work.pop()
            if id(op) in relevant and not as_data:
                continue
            relevant.add(id(op))
            match op:
                case Set(value=value, frame=frame):
                    wanted.extend((key, as_data) for key in self.uses(value, frame))
                case Touch(subscript=subscript, pointer=pointer, frame=frame):
                    for part in (subscript, pointer):
                        if part is not None:
                            wanted.extend((key, True) for key in self.uses(part, frame))
            pending = [number]
            while pending:
                current = pending.pop()
                if current in active:
                    continue
                active.add(current)
                for branch in decides.get(current, ()):
                    if branch not in branching:
                        branching.add(branch)
                        condition = condition_of(blocks[branch])
                        if condition is not None:
                            wanted.extend((key, False) for key in self.uses(condition, blocks[branch].frame))
                    pending.append(branch)
        self.needed = needed
        self.data = data
        self.relevant = relevant
        self.branching = branching

    def several_objects(self) -> bool:
        """Whether the function stores into the same members of more than one object."""
        found: dict[str, set[str]] = defaultdict(set)
        stores = self.facts.table().stores
        for key in self.tracked:
            for _, op in stores.get(key, ()) if key[0] == "member" else ():
                if isinstance(op, Set) and isinstance(op.place, MemberPlace):
                    found[key[1]].add(self._object(op.place.base, op.place_frame, 0))
        return any(len(objects) > 1 for objects in found.values())

    def _object(self, place: PlaceExpr, frame: str, depth: int) -> str:
        """A name for the object that a place is in: the same name only for the same object."""
        if not isinstance(place, DerefPlace):
            return place_text(place)
        pointer = place.pointer
        while isinstance(pointer, Cast):
            pointer = pointer.operand
        if isinstance(pointer, AddressOf):
            return self._object(pointer.place, frame, depth)
        if isinstance(pointer, Load) and isinstance(pointer.place, VariablePlace) and depth < 8:
            key = ("local", frame, pointer.place.variable.identity)
            stores = self.facts.table().stores.get(key, ())
            if len(stores) == 1 and isinstance(stores[0][1], Set):
                op = stores[0][1]
                return self._object(DerefPlace(op.value, place.type), op.frame, depth + 1)
        return f"{frame}:{expr_text(pointer)}"

    def filled(self, op: FlatOp) -> frozenset[Key]:
        """The tracked integers that an operation fills."""
        if not isinstance(op, Spoil):
            return NOTHING
        return frozenset(
            key for key in self.tracked if key in op.keys or (key[0] == "member" and key[1] in op.structs)
        )

    def uses(self, expr: Expr, frame: str) -> list[Key]:
        """The locals and lasting scalars that an expression's value depends on."""
        found: list[Key] = []
        pending = [expr]
        while pending:
            item = pending.pop()
            match item:
                case Load(place=place):
                    keys = place_keys(place, frame, self.points)
                    found.extend(key for key in keys if is_local(key) or is_scalar(key))
                    for key in keys:
                        if isinstance(item.type, IntType):
                            self.types.setdefault(key, item.type)
                        if is_input(place):
                            self.inputs.add(key)
                    if isinstance(place, DerefPlace) and len(keys) != 1:
                        pending.append(place.pointer)
                case Unary(operand=operand) | Cast(operand=operand):
                    pending.append(operand)
                case Binary(left=left, right=right) | PointerDistance(left=left, right=right):
                    pending += (left, right)
                case PointerStep(pointer=pointer, steps=steps):
                    pending += (pointer, steps)
                case AddressOf(place=place):
                    while isinstance(place, ElementPlace | MemberPlace):
                        if isinstance(place, ElementPlace):
                            pending.append(place.index)
                        place = place.base
                    if isinstance(place, DerefPlace):
                        pending.append(place.pointer)
        return found

    def live(self, targets: Sequence[tuple[int, ...]]) -> list[set[Key]]:
        """For each block the locals that are still read from it on: the others must not tell paths apart.

        ``targets`` are the blocks that can come after each, what does not matter being passed over.
        """
        before: dict[int, set[int]] = defaultdict(set)
        live: list[set[Key]] = []
        stores: list[set[Key]] = []
        for number, following in enumerate(targets):
            used, given = self._reads_of(number, len(following) > 1)
            live.append(used)
            stores.append(given)
            for target in following:
                before[target].add(number)
        pending = list(range(len(live)))
        while pending:
            number = pending.pop()
            for earlier in before[number]:
                more = live[number] - stores[earlier] - live[earlier]
                if more:
                    live[earlier] |= more
                    pending.append(earlier)
        return live

    def _reads_of(self, number: int, branches: bool) -> tuple[set[Key], set[Key]]:
        """The locals that a block reads before it stores into them, and those that it stores into."""
        block = self.facts.flat.blocks[number]
        used: set[Key] = set()
        given: set[Key] = set()
        for op in block.ops:
            if id(op) not in self.relevant:
                continue
            for expr, frame in _expressions(op):
                used.update(key for key in self.uses(expr, frame) if key not in given)
            if isinstance(op, Set) and isinstance(op.place, VariablePlace):
                given |= place_keys(op.place, op.place_frame, self.points)
        condition = condition_of(block)
        if branches and condition is not None:
            used.update(key for key in self.uses(condition, block.frame) if key not in given)
        return {key for key in used if is_local(key)}, given


def condition_of(block: FlatBlock) -> Expr | None:
    """What decides where control goes after a block."""
    match block.end:
        case Branch(condition=condition):
            return condition
        case Switch(value=value):
            return value
    return None


def _expressions(op: FlatOp) -> list[tuple[Expr, str]]:
    """The expressions that an operation evaluates, each with its frame."""
    match op:
        case Set(value=value, frame=frame):
            found = [(value, frame)]
            if isinstance(op.place, DerefPlace):
                found.append((op.place.pointer, op.place_frame))
            return found
        case Touch(subscript=subscript, pointer=pointer, frame=frame):
            return [(part, frame) for part in (subscript, pointer) if part is not None]
    return []
