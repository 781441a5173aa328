"""Where a ring's number of slots stands in the code, and which functions work on the ring.

The one idea: the code says the capacity where it wraps. Every wrap and every reduction at an access names an integer
(``size``, ``mask``); the one that is named most often is the capacity. A mask is one less than the number of slots. A
comparison may be off by one, by mistake or because it is made before the advance, so only whether the integer serves
as a mask tells what must be added to it.
"""

from collections import Counter, defaultdict
from collections.abc import Iterator, Sequence

from stepring.meaning.types import (
    AddressOf,
    Binary,
    Branch,
    Cast,
    DerefPlace,
    ElementPlace,
    Expr,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    Return,
    Switch,
    Unary,
)
from stepring.shapes.ring_catalogue import Candidate, Catalogue
from stepring.shapes.ring_facts import FlatFacts
from stepring.shapes.ring_flat import Flat, Set, Spoil, Touch
from stepring.shapes.ring_keys import Key, key_text, place_keys
from stepring.shapes.types import Bound, BoundForm

_FORMS: dict[str, BoundForm] = {"member": "member", "var": "variable", "local": "argument"}


def bound_of(merged: Catalogue, candidate: Candidate) -> Bound | None:
    """Where the number of slots stands; None where the code does not say it as one integer plus a constant."""
    if candidate.capacity is not None:
        return Bound("constant", str(candidate.capacity), (), candidate.capacity)
    votes: Counter[Key] = Counter()
    masks: dict[Key, set[int]] = defaultdict(set)
    indices = {*candidate.indices, *candidate.counts}
    for key in candidate.indices:
        for wrap in merged.moves[key].wraps.values():
            if wrap.term is not None and wrap.term.key not in indices:
                votes[_told(wrap.term.key)] += 1
                if wrap.form == "mask":
                    masks[_told(wrap.term.key)].add(wrap.term.plus)
    for use in merged.uses[candidate.storage]:
        if use.term is not None and use.term.key not in indices and use.cells & indices:
            votes[_told(use.term.key)] += 1
            if use.reduction == "mask":
                masks[_told(use.term.key)].add(use.term.plus)
    if not votes:
        return None
    owners = {key[1] for key in indices if key[0] == "member"}
    best = min(votes, key=lambda key: (-votes[key], not (key[0] == "member" and key[1] in owners), key))
    plus = 1 if 1 in masks[best] else 0
    return Bound(_FORMS[best[0]], key_text(best) + (" + 1" if plus else ""), best, plus)


def _told(key: Key) -> Key:
    """A key under which the same parameter of several calls counts as one: its frame says nothing."""
    return ("local", "", key[2].split("@", 1)[0]) if key[0] == "local" else key


def workers(merged: Catalogue, candidate: Candidate) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """The functions that work on a ring: those that can be entered, and those that are only called by them."""
    keys = {*candidate.indices, *candidate.counts}
    bound = bound_of(merged, candidate)
    if bound is not None and bound.form == "member":
        keys.add(bound.key)
    structs = {key[1] for key in keys if key[0] == "member"}
    entered = {id(facts) for facts in merged.entered}
    doors: dict[str, None] = {}
    helpers: dict[str, None] = {}
    for facts in merged.facts:
        if works_on(facts, candidate.storage, keys, structs):
            (doors if id(facts) in entered else helpers)[facts.flat.function.identity] = None
    return tuple(doors), tuple(helpers)


def works_on(facts: FlatFacts, storage: Key, keys: set[Key], structs: set[str]) -> bool:
    """Whether a flat function accesses some storage, or reads or stores one of some integers."""
    for block in facts.flat.blocks:
        for op in block.ops:
            match op:
                case Touch():
                    if op.storage == storage:
                        return True
                case Spoil():
                    if op.keys & keys or op.structs & structs:
                        return True
                case Set():
                    if place_keys(op.place, op.place_frame, facts.flat.points) & keys:
                        return True
    if facts.loaded is None:
        facts.loaded = frozenset(_loaded(facts.flat))
    return not facts.loaded.isdisjoint(keys)


def _loaded(flat: Flat) -> Iterator[Key]:
    """The memory that a flat function loads."""
    for block in flat.blocks:
        pending: list[tuple[Expr, str]] = []
        for op in block.ops:
            if isinstance(op, Set):
                pending.append((op.value, op.frame))
                pending.extend((expr, op.place_frame) for expr in _inside(op.place))
        match block.end:
            case Branch(condition=value) | Switch(value=value):
                pending.append((value, block.frame))
            case Return(value=value) if value is not None:
                pending.append((value, block.frame))
        while pending:
            expr, frame = pending.pop()
            if isinstance(expr, Load):
                yield from place_keys(expr.place, frame, flat.points)
            pending.extend((part, frame) for part in _parts(expr))


def _parts(expr: Expr) -> Sequence[Expr]:
    match expr:
        case Unary(operand=operand) | Cast(operand=operand):
            return (operand,)
        case Binary(left=left, right=right) | PointerDistance(left=left, right=right):
            return (left, right)
        case PointerStep(pointer=pointer, steps=steps):
            return (pointer, steps)
        case Load(place=place) | AddressOf(place=place):
            return tuple(_inside(place))
    return ()


def _inside(place: PlaceExpr) -> Iterator[Expr]:
    """The expressions that tell where a place is."""
    while isinstance(place, ElementPlace | MemberPlace):
        if isinstance(place, ElementPlace):
            yield place.index
        place = place.base
    if isinstance(place, DerefPlace):
        yield place.pointer
