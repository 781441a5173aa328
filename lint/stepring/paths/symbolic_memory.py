"""Memory as terms: one row of cells for each variable, member and kind of element, and pointers into them.

The one idea (R. M. Burstall, "Some techniques for proving correctness of programs which alter data structures", 1972):
two accesses can meet only if they name the same member of the same structure, so each member has a memory of its own,
from the address of the structure to the value. Addresses are numbers of the target's width; objects with a name have
fixed ones, far from each other, and pointers that come from outside can be any. Whether two pointers lead to one
object or to two is therefore left to the solver: both cases are in every term.

A memory is a chain that only grows: stores, joins where ways meet, and a start of which nothing is known but that equal
addresses hold equal values. An epoch is such a start for all memories at once.
"""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any, TypeAlias

import z3

from stepring.meaning.types import CType, FloatType, IntType, PointerType
from stepring.paths.symbolic_terms import Number, Term, Terms, Truth, as_truth, bits, both, chosen, either, equal
from stepring.places import Position
from stepring.shapes.ring_keys import Key

GAP = 64
"""Bytes between objects."""
UNKNOWN_SIZE = 1 << 16


@dataclass(frozen=True, slots=True)
class Pointer:
    """A pointer: ``steps`` elements of ``unit`` bytes (None: not known) from the address ``at``.

    ``key`` names the cells that it leads to, None where that is not known. ``array`` is the array that it walks, with
    the number of its elements; ``source`` the lasting pointer that it was loaded from: its key and its object's address
    and whether it was loaded unchanged since the function began. ``made`` is where it was stepped last.
    """

    at: Number
    steps: Number
    unit: int | None
    key: Key | None = None
    array: tuple[Key, int | None] | None = None
    source: tuple[Key, Number] | None = None
    made: Position | None = None


@dataclass(frozen=True, slots=True)
class Target:
    """A function as a value."""

    name: str


Value: TypeAlias = Pointer | Target | Any | None
"""None for what is not followed: reals, structures."""


@dataclass(frozen=True, slots=True, eq=False)
class Epoch:
    """A start of all memories: by its number nothing is known of it; with ``parts`` it is one of several."""

    number: int
    parts: tuple[tuple[Truth, "Epoch"], ...] = ()


@dataclass(frozen=True, slots=True, eq=False)
class Start:
    """What a memory holds in an epoch."""

    key: Key
    number: int


@dataclass(frozen=True, slots=True, eq=False)
class Stored:
    """A memory after a store."""

    before: "Node"
    at: Number
    value: Value


@dataclass(frozen=True, slots=True, eq=False)
class Joined:
    """A memory where ways meet: the first whose truth holds, else the last."""

    parts: tuple[tuple[Truth, "Node"], ...]


Node: TypeAlias = Start | Stored | Joined


@dataclass(slots=True, eq=False)
class Memories:
    """What reading needs: the widths, the terms of starts, and the addresses met so far by key.

    ``address`` is the width of an address, ``step`` of a number of elements.
    """

    terms: Terms
    address: int
    step: int
    met: dict[Key, list[Number]] = field(default_factory=dict)
    types: dict[Key, CType] = field(default_factory=dict)
    starts: dict[tuple[Key, int], Node] = field(default_factory=dict)
    rows: dict[str, list[tuple[Number, Term]]] = field(default_factory=dict)
    homes: dict[Key, int] = field(default_factory=dict)
    next_home: int = 4096
    epochs: int = 0
    read_before: dict[tuple[int, object], tuple[Node, Number, Value]] = field(default_factory=dict)


def new_epoch(memories: Memories) -> Epoch:
    """A start of which nothing is known."""
    memories.epochs += 1
    return Epoch(memories.epochs)


def node_in(memories: Memories, epoch: Epoch, key: Key) -> Node:
    """The memory of a key as an epoch begins."""
    known = memories.starts.get((key, epoch.number))
    if known is None:
        if epoch.parts:
            parts = tuple((when, node_in(memories, part, key)) for when, part in epoch.parts)
            known = parts[0][1] if all(node is parts[0][1] for _, node in parts) else Joined(parts)
        else:
            known = Start(key, epoch.number)
        memories.starts[key, epoch.number] = known
    return known


def home_of(memories: Memories, key: Key, size: int | None) -> int:
    """The fixed address of a named object of ``size`` bytes."""
    known = memories.homes.get(key)
    if known is None:
        known = memories.homes[key] = memories.next_home
        memories.next_home += ((UNKNOWN_SIZE if size is None else min(size, 1 << 24)) + GAP + 15) // 16 * 16
    return known


def address_mark(at: Number) -> object:
    """What tells two addresses apart at first sight."""
    return at if isinstance(at, int) else ("term", at.get_id())


def meet(memories: Memories, key: Key, at: Number) -> None:
    """Note that a key's cell at an address takes part."""
    known = memories.met.setdefault(key, [])
    mark = address_mark(at)
    if all(address_mark(other) != mark for other in known):
        known.append(at)


def read(memories: Memories, node: Node, at: Number, type_: CType) -> Value:
    """What a memory holds at an address."""
    mark = (id(node), address_mark(at))
    known = memories.read_before.get(mark)
    if known is not None:
        return known[2]
    # A chain of stores is walked without recursion: functions with hundreds of stores are common.
    chain: list[Stored] = []
    here = node
    found: Value
    while isinstance(here, Stored):
        same = equal(here.at, at, memories.address)
        if same is True:
            found = here.value
            break
        if same is not False:
            chain.append(here)
        here = here.before
    else:
        if isinstance(here, Joined):
            values = [(when, read(memories, part, at, type_)) for when, part in here.parts]
            found = values[-1][1]
            for when, value in reversed(values[:-1]):
                found = merged(memories, when, value, found, type_)
        else:
            found = at_start(memories, here, at, type_)
    for store in reversed(chain):
        found = merged(memories, equal(store.at, at, memories.address), store.value, found, type_)
    memories.read_before[mark] = (node, at, found)
    return found


def at_start(memories: Memories, start: Start, at: Number, type_: CType) -> Value:
    """What a memory holds as an epoch begins: equal addresses, equal values."""
    name = f"{'/'.join(start.key)}@{start.number}"
    memories.types.setdefault(start.key, type_)
    if isinstance(type_, IntType):
        return _row(memories, name, at, type_.width)
    if isinstance(type_, PointerType):
        return Pointer(
            _row(memories, name, at, memories.address),
            _row(memories, name + "+", at, memories.step),
            None,
            source=(start.key, at),
        )
    return None


def _row(memories: Memories, name: str, at: Number, width: int) -> Term:
    known = memories.rows.setdefault(name, [])
    mark = address_mark(at)
    for other, value in known:
        if address_mark(other) == mark:
            return value
    made = z3.BitVec(f"{name}#{at if isinstance(at, int) else len(known)}", width)
    for other, value in known:
        same = equal(other, at, memories.address)
        if same is not False:
            memories.terms.facts.append(z3.Implies(as_truth(same), value == made))
    known.append((at, made))
    return made


def merged(memories: Memories, when: Truth, yes: Value, no: Value, type_: CType) -> Value:
    """One of two values of a type."""
    if when is True:
        return yes
    if when is False:
        return no
    if isinstance(type_, IntType):
        width = type_.width
        one = yes if _is_number(yes) else memories.terms.unknown(width)
        other = no if _is_number(no) else memories.terms.unknown(width)
        return chosen(when, one, other, width)
    if yes is no:
        return yes
    if isinstance(yes, Pointer) and isinstance(no, Pointer):
        return _one_pointer(memories, when, yes, no)
    if isinstance(type_, PointerType):
        return Pointer(memories.terms.unknown(memories.address), 0, None)
    return None


def _is_number(value: Value) -> bool:
    return value is not None and not isinstance(value, Pointer | Target)


def _one_pointer(memories: Memories, when: Truth, yes: Pointer, no: Pointer) -> Pointer:
    unit = yes.unit if yes.unit is not None else no.unit
    if yes.unit is not None and no.unit is not None and yes.unit != no.unit:
        yes, no, unit = flat(memories, yes), flat(memories, no), None
    source = yes.source if same_source(yes, no) else None
    # A null pointer leads nowhere: what the other one leads to is still what can be accessed.
    key = yes.key if yes.key == no.key or _null(no) else no.key if _null(yes) else None
    array = yes.array if yes.array == no.array or _null(no) else no.array if _null(yes) else None
    if array is not None and not (_null(yes) or _null(no)) and equal(yes.at, no.at, memories.address) is not True:
        array = None
    return Pointer(
        chosen(when, yes.at, no.at, memories.address),
        chosen(when, yes.steps, no.steps, memories.step),
        unit,
        key,
        array,
        source,
        yes.made or no.made,
    )


def _null(pointer: Pointer) -> bool:
    return isinstance(pointer.at, int) and pointer.at == 0 and isinstance(pointer.steps, int) and pointer.steps == 0


def same_source(one: Pointer, other: Pointer) -> bool:
    """Whether two pointers were loaded from one place."""
    if one.source is None or other.source is None:
        return False
    return one.source[0] == other.source[0] and address_mark(one.source[1]) == address_mark(other.source[1])


def flat(memories: Memories, pointer: Pointer) -> Pointer:
    """The same pointer as an address alone."""
    return Pointer(address_of(memories, pointer), 0, None, pointer.key, None, pointer.source, pointer.made)


def address_of(memories: Memories, pointer: Pointer) -> Number:
    """Where a pointer leads, as a number."""
    return added(memories, pointer.at, scaled(memories, pointer.steps, pointer.unit))


def scaled(memories: Memories, steps: Number, unit: int | None) -> Number:
    """A number of elements in bytes, as an address is counted."""
    if isinstance(steps, int):
        return 0 if steps == 0 else steps * unit if unit is not None else memories.terms.unknown(memories.address)
    if unit is None:
        return memories.terms.unknown(memories.address)
    width = memories.address
    if memories.step > width:
        steps = z3.Extract(width - 1, 0, steps)
    elif memories.step < width:
        steps = z3.SignExt(width - memories.step, steps)
    return steps if unit == 1 else steps * z3.BitVecVal(unit, width)


def added(memories: Memories, at: Number, bytes_: Number) -> Number:
    """An address and a number of bytes."""
    if isinstance(at, int) and isinstance(bytes_, int):
        return (at + bytes_) % (1 << memories.address)
    if isinstance(bytes_, int):
        if bytes_ == 0:
            return at
        if (
            not isinstance(at, int)
            and at.decl().kind() == z3.Z3_OP_BADD
            and at.num_args() == 2
            and z3.is_bv_value(at.arg(1))
        ):
            # One constant at most, so that equal addresses look equal.
            return added(memories, at.arg(0), (at.arg(1).as_long() + bytes_) % (1 << memories.address))
        bytes_ %= 1 << memories.address
    return bits(at, memories.address) + bits(bytes_, memories.address)


# ------------------------------------------------------------------------------------------------------------- states


@dataclass(slots=True)
class State:
    """What holds at a point of a run: the conditions of the way to it, the variables, the memories since an epoch."""

    conditions: tuple[Term, ...]
    local: dict[tuple[int, str], Value]
    rows: dict[Key, Node]
    epoch: Epoch

    def copy(self) -> "State":
        """The same, to go on from separately."""
        return State(self.conditions, dict(self.local), dict(self.rows), self.epoch)


def guard_of(state: State) -> Truth:
    """That the run comes here."""
    return both(*state.conditions)


def row_of(memories: Memories, state: State, key: Key) -> Node:
    """A key's memory now."""
    found = state.rows.get(key)
    return found if found is not None else node_in(memories, state.epoch, key)


def joined(memories: Memories, states: Sequence[State], types: dict[tuple[int, str], CType]) -> State:
    """Several states where their ways meet, as one."""
    if len(states) == 1:
        return states[0]
    terms = memories.terms
    terms.count += 1
    here = z3.Bool(f"way!{terms.count}")
    ways = [guard_of(state) for state in states]
    terms.facts.append(here == as_truth(either(*ways)))
    local: dict[tuple[int, str], Value] = {}
    first = states[0]
    for name in dict.fromkeys(name for state in states for name in state.local):
        values = [state.local.get(name) for state in states]
        if all(value is values[0] for value in values):
            local[name] = values[0]
        elif all(name in state.local for state in states):
            found = values[-1]
            for way, value in zip(reversed(ways[:-1]), reversed(values[:-1]), strict=True):
                found = merged(memories, way, value, found, types[name])
            local[name] = found
        elif name[0] == -1:
            found = 0
            for way, value in zip(reversed(ways), reversed(values), strict=True):
                found = chosen(way, value or 0 if isinstance(value, int | None) else value, found, 16)
            local[name] = found
        # One that has no value on some way is left out: reading it gives a fresh one.
    if all(state.epoch is first.epoch for state in states):
        epoch = first.epoch
    else:
        memories.epochs += 1
        epoch = Epoch(memories.epochs, tuple((way, state.epoch) for way, state in zip(ways, states, strict=True)))
    rows: dict[Key, Node] = {}
    for key in dict.fromkeys(key for state in states for key in state.rows):
        nodes = [row_of(memories, state, key) for state in states]
        same = all(node is nodes[0] for node in nodes)
        rows[key] = nodes[0] if same else Joined(tuple(zip(ways, nodes, strict=True)))
    return State((here,), local, rows, epoch)


def is_scalar_type(type_: CType) -> bool:
    """Whether a variable of the type is one value."""
    return isinstance(type_, IntType | PointerType | FloatType)
