"""The facts of all flat functions put together: which integers are indices, of which storage, and what is no ring.

The one idea: a ring is storage that an index stores into, where the index advances and is brought back. Look-alikes
fail one of these: a cyclic counter over channels stores nothing through the index, a playback of a table has constant
storage, a line buffer gives its index back to 0 wherever a message ends, a stack moves its index both ways without
ever wrapping it.
"""

from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Call,
    Cast,
    Expr,
    Function,
    FunctionName,
    IntType,
    Object,
    PointerType,
    StructLayout,
    StructType,
)
from stepring.places import Position
from stepring.shapes.ring_elsewhere import given, pairs, walked_together, writer_of
from stepring.shapes.ring_facts import Advance, FlatFacts, Reset, Wrap, complete, facts_of
from stepring.shapes.ring_flat import Flat, Outside, Spoil, Touch, flatten
from stepring.shapes.ring_keys import Key, inner_structs, is_scalar, targets
from stepring.shapes.ring_sources import Comparison, Use


@dataclass(slots=True)
class Moves:
    """All that happens to one integer in the program, each place once."""

    advances: dict[Position, Advance] = field(default_factory=dict)
    wraps: dict[tuple[Position, str], Wrap] = field(default_factory=dict)
    resets: dict[Position, Reset] = field(default_factory=dict)
    copies: set[Position] = field(default_factory=set)
    handed: set[Key] = field(default_factory=set)
    filled: set[Key] = field(default_factory=set)

    @property
    def both_ways(self) -> bool:
        """Whether it is counted up and down."""
        signs = {item.by > 0 for item in self.advances.values() if item.by}
        return len(signs) == 2


@dataclass(slots=True, eq=False)
class Catalogue:
    """The program's facts."""

    facts: list[FlatFacts]
    moves: dict[Key, Moves]
    uses: dict[Key, list[Use]]
    lengths: dict[Key, int | None]
    elements: dict[Key, Touch]
    types: dict[Key, IntType]
    comparisons: list[Comparison]
    copied: set[tuple[Key, Key]]
    constant: set[Key]
    objects: Mapping[Key, Object]
    entered: list[FlatFacts]
    writers: dict[str, frozenset[Key]]
    structs: Mapping[str, StructLayout]
    written: set[Key] = field(default_factory=set)
    together: dict[Key, frozenset[Key]] = field(default_factory=dict)
    cursors: set[Key] = field(default_factory=set)
    inlined: set[str] = field(default_factory=set)


@dataclass(frozen=True, slots=True)
class Candidate:
    """A ring before its indices were run: storage, capacity, indices in the order of their first use, counts.

    ``elsewhere``: the storage is the caller's; ``writer`` is then the index that stores, if the code tells.
    """

    storage: Key
    capacity: int | None
    indices: tuple[Key, ...]
    counts: tuple[Key, ...]
    elsewhere: bool = False
    writer: Key | None = None


def catalogue(
    functions: Sequence[Function], objects: Sequence[Object], structs: Mapping[str, StructLayout]
) -> Catalogue:
    """Lay out all functions and collect their facts."""
    by_name: dict[str, list[Function]] = defaultdict(list)
    for function in functions:
        by_name[function.name].append(function)

    def resolve(caller: Function, name: str) -> Function | None:
        found = by_name.get(name, [])
        for item in found:
            if item.static and item.position.file == caller.position.file:
                return item
        plain = [item for item in found if not item.static] or found
        near = [item for item in plain if item.position.file == caller.position.file] or plain
        return near[0] if len(near) == 1 else None

    inner: dict[str, frozenset[str]] = {}

    def contained(identity: str) -> frozenset[str]:
        if identity not in inner:
            inner[identity] = inner_structs(identity, structs)
        return inner[identity]

    known: dict[Key, Object] = {("var", item.variable.identity): item for item in objects}
    pointers = _pointers(objects)
    facts = [facts_of(flatten(function, resolve, contained, pointers)) for function in functions]
    used = {key for item in facts for use in item.uses for key in use.cells}
    walked = {use.touch.storage for item in facts for use in item.uses}
    for item in facts:
        item.given = list(given(item))
    together = walked_together(facts)
    used |= {key for keys in together.values() for key in keys}
    for item in facts:
        touched = {touch.storage for touch in item.plain} | {use.touch.storage for use in item.uses}
        if item.stored & used or touched & walked:
            complete(item)
    merged = Catalogue(
        facts, defaultdict(Moves), defaultdict(list), {}, {}, {}, [], set(), set(), known, [], {}, structs
    )
    merged.constant = {key for key, item in known.items() if item.variable.const}
    seen: set[tuple[Position, str, Key]] = set()
    for item in facts:
        _merge(merged, item, seen)
    _cross(merged)
    taken = _taken(functions, objects)
    inlined = merged.inlined = {name for item in facts for name in item.flat.inlined}
    merged.entered = [
        item
        for item in facts
        if not item.flat.function.static
        or item.flat.function.identity not in inlined
        or item.flat.function.name in taken
    ]
    merged.writers = _writers(facts, structs)
    merged.together = together
    return merged


def _pointers(objects: Sequence[Object]) -> dict[Key, frozenset[Key]]:
    """Lasting pointer variables that start at a known array."""
    found: dict[Key, frozenset[Key]] = {}
    for item in objects:
        if isinstance(item.variable.type, PointerType):
            for initial in item.initial:
                to = targets(initial.value, "", {})
                if not initial.path and len(to) == 1:
                    found[("var", item.variable.identity)] = to
    return found


def _merge(merged: Catalogue, facts: FlatFacts, seen: set[tuple[Position, str, Key]]) -> None:
    merged.types.update(facts.types)
    merged.comparisons.extend(facts.comparisons)
    merged.copied |= facts.copied
    merged.cursors |= {(*key, "*") for key in facts.cursors}
    for key, length in facts.flat.lengths.items():
        merged.lengths.setdefault(key, length)
    for key, found in facts.cells.items():
        moves = merged.moves[key]
        for advance in found.advances:
            moves.advances.setdefault(advance.position, advance)
        for wrap in found.wraps:
            if is_solid(wrap):
                moves.wraps.setdefault((wrap.position, wrap.form), wrap)
        for reset in found.resets:
            moves.resets.setdefault(reset.position, reset)
        moves.copies.update(found.copies)
        moves.handed |= found.handed
        moves.filled |= found.filled
    merged.written.update(touch.storage for touch in facts.plain if touch.kind == "store")
    merged.written.update(use.touch.storage for use in facts.uses if use.touch.kind == "store")
    for use in facts.uses:
        touch = use.touch
        merged.elements.setdefault(touch.storage, touch)
        mark = (touch.position, touch.kind, touch.storage)
        if mark not in seen:
            seen.add(mark)
            merged.uses[touch.storage].append(use)


def _cross(merged: Catalogue) -> None:
    """An index that is stepped by way of another lasting integer: ``next = head + 1; ... head = next``."""
    for facts in merged.facts:
        for (target, base), found in facts.cross.items():
            if (base, target) in merged.copied:
                moves = merged.moves[base]
                for advance in found.advances:
                    moves.advances.setdefault(advance.position, advance)
                for wrap in found.wraps:
                    if is_solid(wrap):
                        moves.wraps.setdefault((wrap.position, wrap.form), wrap)


def _taken(functions: Sequence[Function], objects: Sequence[Object]) -> set[str]:
    """The functions whose address is taken."""
    found: set[str] = set()

    def look(expr: Expr) -> None:
        while isinstance(expr, Cast):
            expr = expr.operand
        if isinstance(expr, FunctionName):
            found.add(expr.name)
        elif isinstance(expr, AddressOf):
            name = getattr(expr.place, "name", None)
            if isinstance(name, str):
                found.add(name)

    for item in objects:
        for initial in item.initial:
            look(initial.value)
    for function in functions:
        for block in function.blocks:
            for statement in block.statements:
                if isinstance(statement, Assign):
                    look(statement.value)
                elif isinstance(statement, Call):
                    for argument in statement.arguments:
                        look(argument)
    return found


def _writers(facts: Sequence[FlatFacts], structs: Mapping[str, StructLayout]) -> dict[str, frozenset[Key]]:
    """What each function stores into, by its name, whole structures member by member."""
    found: dict[str, set[Key]] = defaultdict(set)
    for item in facts:
        keys = found[item.flat.function.name]
        keys.update(item.stored)
        for block in item.flat.blocks:
            for op in block.ops:
                if isinstance(op, Spoil):
                    keys.update(op.keys)
                    for name in op.structs:
                        layout = structs.get(name)
                        for member in layout.fields if layout is not None else ():
                            keys.add(("member", name, member.name))
    return {name: frozenset(keys) for name, keys in found.items()}


# ---------------------------------------------------------------------------------------------------------- judging


def candidates(merged: Catalogue) -> Iterator[Candidate]:
    """The rings of the program, in the order of their storage; then those whose storage is their callers'."""
    owned: set[Key] = set()
    for storage, uses in sorted(merged.uses.items(), key=lambda item: item[1][0].touch.position):
        if storage in merged.constant or not uses:
            continue
        capacity = merged.lengths.get(storage) if storage[-1] != "*" else None
        if capacity is not None and capacity < 2 and _open_ended(merged, storage):
            capacity = None
        found = _candidate(merged, storage, uses, capacity)
        if found is not None:
            owned.update(found.indices)
            yield found
    yield from _without_storage(merged, owned)


def _without_storage(merged: Catalogue, owned: set[Key]) -> Iterator[Candidate]:
    """The rings that keep indices only and give their callers the slot; ``owned`` are indices of known storage."""
    moving = frozenset(key for key, moves in merged.moves.items() if moves.advances)
    for home, indices in pairs(merged.together, moving, merged.comparisons):
        if owned.isdisjoint(indices):
            uses = [use for item in merged.facts for use in item.given if use.touch.storage == home]
            merged.uses[home] = sorted(uses, key=lambda use: use.touch.position)
            merged.elements[home] = merged.uses[home][0].touch
            yield Candidate(home, None, indices, (), True, writer_of(merged.facts, indices))


def _candidate(merged: Catalogue, storage: Key, uses: Sequence[Use], capacity: int | None) -> Candidate | None:
    used = list(dict.fromkeys(key for use in uses for key in sorted(use.cells)))
    indices = [key for key in used if is_index(merged, key, uses)]
    followers = [
        key
        for key in used
        if key not in indices
        and not merged.moves[key].advances
        and any((key, other) in merged.copied for other in _masters(merged, key, uses))
    ]
    if not indices and not followers:
        return None
    if storage[-1] == "*" and not any(_far(merged, key) for key in indices):
        return None
    stores = {key for use in uses if use.touch.kind != "load" for key in use.cells}
    if not any(key in stores for key in (*indices, *followers)) and not _from_hardware(merged, storage):
        return None
    if all(_linear(merged, key, uses) for key in indices) and not followers:
        return None
    if indices and all(storage in merged.moves[key].handed for key in indices):
        return None  # a block that is worked on when it is full
    if storage in merged.cursors:
        return None  # what is left of a message, counted from where its reader stands
    if len(indices) == 1 and not followers and storage in merged.moves[indices[0]].filled:
        return None
    if len(indices) + len(followers) == 1 and _borrowed(merged, storage, uses):
        return None
    counts = _counts(merged, storage, uses, {*indices, *followers})
    indices = [key for key in indices if key not in counts]
    if not indices and not followers:
        return None
    return Candidate(storage, capacity, (*indices, *followers), tuple(counts))


def _far(merged: Catalogue, key: Key) -> bool:
    """Whether an index has a wrap with a limit set at run time, or one larger than what lengths are compared with."""
    wraps = merged.moves[key].wraps.values()
    return not wraps or any(wrap.limit is None or wrap.limit > 3 for wrap in wraps)


def _open_ended(merged: Catalogue, storage: Key) -> bool:
    """Whether a member array of one element stands for as many as the allocation has room for: it comes last."""
    layout = merged.structs.get(storage[1]) if storage[0] == "member" else None
    return layout is not None and bool(layout.fields) and layout.fields[-1].name == storage[2]


def _from_hardware(merged: Catalogue, storage: Key) -> bool:
    """Whether an array of one file is never stored into by code, nor given a value: hardware fills it."""
    item = merged.objects.get(storage[:2])
    return not (item is None or item.initial or item.variable.storage == "global" or storage in merged.written)


def is_index(merged: Catalogue, key: Key, uses: Sequence[Use]) -> bool:
    """Whether an integer advances and is brought back, at its update or where it is used."""
    moves = merged.moves.get(key)
    if moves is None or not moves.advances:
        return False
    movers = {advance.function for advance in moves.advances.values()}
    if any(wrap.inner or wrap.function in movers for wrap in moves.wraps.values()):
        return True
    if moves.both_ways or moves.wraps:
        return False
    return any(key in use.cells and use.reduction != "none" for use in uses)


def is_solid(wrap: Wrap) -> bool:
    """Whether a wrap has an end to come back from: a limit that is no flag, a mask of low bits."""
    if wrap.form == "decrement":
        return wrap.limit is not None and wrap.limit > 1
    if wrap.form == "mask":
        return wrap.limit is None or 1 < wrap.limit <= 1 << 24
    if wrap.limit is None or wrap.form == "modulo":
        return wrap.operator != "!="
    return wrap.limit > (1 if wrap.operator == "!=" else 0)


def stride(merged: Catalogue, key: Key) -> int:
    """What one advance of an index that wraps adds; 0 where that differs or is not known."""
    moves = merged.moves[key]
    steps = {advance.by for advance in moves.advances.values()}
    only = next(iter(steps)) if len(steps) == 1 else None
    return only if moves.wraps and only else 0


def partners(merged: Catalogue, key: Key, candidate: Candidate) -> list[Key]:
    """The lasting integers by way of which an index is stepped: ``next`` where ``next = head + 1; ... head = next``."""
    found = {
        source
        for target, source in merged.copied
        if target == key and source not in candidate.indices and is_scalar(source) and source in merged.moves
    }
    known = [source for source in sorted(found) if (source, key) in merged.copied or merged.moves[source].wraps]
    return known[:2]


def _masters(merged: Catalogue, key: Key, uses: Sequence[Use]) -> Iterator[Key]:
    for target, source in merged.copied:
        same = key[0] == source[0] == "var" or key[:2] == source[:2]
        if target == key and same and source in merged.moves and merged.moves[source].wraps:
            if is_index(merged, source, uses):
                yield source


def _linear(merged: Catalogue, key: Key, uses: Sequence[Use]) -> bool:
    """Whether an index belongs to a buffer that is filled from 0 again and again, and not walked round."""
    moves = merged.moves[key]
    if any(wrap.form in ("modulo", "mask", "subtract", "decrement") for wrap in moves.wraps.values()):
        return False
    if not moves.wraps:
        return False
    if any(key in use.cells and any(_counts_both_ways(merged, other) for other in use.cells - {key}) for use in uses):
        return False  # the place of the next element is told by the index and the number of elements
    movers = {item.function for item in moves.advances.values()}
    return any(reset.function in movers and reset.value == 0 for reset in moves.resets.values())


def _counts_both_ways(merged: Catalogue, key: Key) -> bool:
    moves = merged.moves.get(key)
    return moves is not None and is_scalar(key) and moves.both_ways and not moves.wraps


def _borrowed(merged: Catalogue, storage: Key, uses: Sequence[Use]) -> bool:
    """Whether one index only ever lends out rows of text by their address: a set of scratch strings."""
    touch = merged.elements[storage]
    lent = all(use.touch.kind == "address" and not use.touch.copied for use in uses)
    return isinstance(touch.element, ArrayType) and lent


def _counts(merged: Catalogue, storage: Key, uses: Sequence[Use], indices: set[Key]) -> list[Key]:
    """The integers that count the occupied slots: up where the ring stores, down where it loads."""
    inside = {use.touch.function for use in uses if use.cells & indices}
    inside |= {item.function for key in indices for item in merged.moves[key].advances.values()}
    found = []
    for key, moves in merged.moves.items():
        if not is_scalar(key) or moves.wraps or not moves.both_ways:
            continue
        functions = {item.function for item in moves.advances.values()}
        if functions & inside and len(functions & inside) == len(functions):
            if key[0] != "member" or any(key[1] == index[1] for index in indices if index[0] == "member"):
                found.append(key)
    return found


def struct_of(key: Key) -> str | None:
    """The structure of a member's key."""
    return key[1] if key[0] == "member" else None


def touches_of(flat: Flat, storage: Key) -> Iterator[Touch]:
    """The accesses of a flat function to some storage."""
    for block in flat.blocks:
        for op in block.ops:
            if isinstance(op, Touch) and op.storage == storage:
                yield op


def calls_out(flat: Flat) -> Iterator[Outside]:
    """The calls of a flat function that were not laid out."""
    for block in flat.blocks:
        for op in block.ops:
            if isinstance(op, Outside):
                yield op


def instances(merged: Catalogue, struct: str) -> Iterator[Object]:
    """The objects of the program that are, or hold, objects of a structure."""
    for item in merged.objects.values():
        type_ = item.variable.type
        while isinstance(type_, ArrayType):
            type_ = type_.element
        if isinstance(type_, StructType) and struct in inner_structs(type_.identity, merged.structs):
            yield item
