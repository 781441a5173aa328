"""Rings with what the solver proves of them: accesses, ranges and advances, for all runs.

The one idea: what a ring's code relies on (``head < size``, ``count <= size``) is never written down, but every
operation keeps it. So all functions that can be entered and touch the ring's integers become traces
(``paths.symbolic``), the relations that all of them keep are found (``paths.induction``), and under these each access,
each index and each advance is asked about. Nothing is a guess: what is not modelled, and whatever may store into the
ring unseen, leaves the ring's obligations open with a reason.

What the code does not settle is assumed and said with each proof: that a buffer has as many elements as the capacity
says, that a capacity given by a caller is not zero, that nothing else runs in the middle of a function.
"""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import replace
from typing import cast

import z3

from stepring.meaning.types import (
    DataModel,
    Function,
    IntType,
    Object,
    StructLayout,
)
from stepring.paths.induction import (
    Body,
    basis,
    kept_by,
    look_at,
    proved,
)
from stepring.paths.symbolic_memory import Node, Pointer, Start, State, Stored, added, address_mark, row_of
from stepring.paths.symbolic_terms import Number, Truth, bits, both, compared, either, equal, negated, stretch
from stepring.paths.symbolic_types import CUT, FLAG, Accessed, Limits, Point, Trace
from stepring.places import Origin, Position
from stepring.shapes.ring_apart import defined_often, told_apart
from stepring.shapes.ring_case import Case, prepare
from stepring.shapes.ring_keys import Key, key_text, short_text
from stepring.shapes.ring_program import ring_program
from stepring.shapes.ring_relations import Slots, slots_of
from stepring.shapes.ring_types import CheckedStep, OpenReason, Proof
from stepring.shapes.ring_writers import Outside
from stepring.shapes.types import Access, Ring

__all__ = ["prove_rings"]

EVERYTHING = Outside()


def prove_rings(
    rings: Sequence[Ring],
    functions: Sequence[Function],
    objects: Sequence[Object],
    structs: Mapping[str, StructLayout],
    model: DataModel,
    origin: Callable[[Position], Origin],
    *,
    outside: Outside = EVERYTHING,
    called: Sequence[Function] = (),
    defined: frozenset[str] | None = None,
    limits: Limits | None = None,
) -> tuple[Ring, ...]:
    """The rings with their proofs.

    ``functions``, ``objects``, ``structs``, ``model``, ``origin`` and ``outside`` are those that the rings were found
    with. ``called`` are further bodies, to be laid out where these functions call them; ``defined`` the names of all
    functions that the program defines (None: not known, so that a function without body is code from elsewhere).
    """
    if not rings:
        return ()
    limits = limits or Limits()
    often = defined_often(objects)
    functions, objects = told_apart(functions, objects)
    program = ring_program(functions, called, objects, structs, model, outside, defined, limits)
    found = []
    for ring in rings:
        case = Case(ring, program, slots_of(ring), None)
        prepare(case, outside, often, limits)
        found.append(replace(ring, proofs=tuple(_proofs(case, origin))))
    return tuple(found)


def _proofs(case: Case, origin: Callable[[Position], Origin]) -> Iterator[Proof]:
    ring = case.ring
    places: dict[Origin, list[tuple[Body, Accessed]]] = {}
    if case.induction is not None and case.open_as is None:
        for body in case.induction.bodies:
            for access in body.trace.accesses:
                for position in {access.position, access.also}:
                    if position is not None:
                        places.setdefault(origin(position), []).append((body, access))
    always = [*case.assumed, *_context(case)]
    asked: set[tuple[Origin, str]] = set()
    inside = True
    for item in ring.accesses:
        if (item.where, item.function) in asked:
            continue
        asked.add((item.where, item.function))
        found = _access_proof(case, item, places.get(item.where, []), always)
        inside = inside and found.holds
        yield found
    for item in _copies(case, origin, {where for where, _ in asked}):
        found = _access_proof(case, item, places.get(item.where, []), always)
        inside = inside and found.holds
        yield found
    for index in ring.indices:
        yield _range_proof(case, index.name, index.key, index.role, index.where, always, inside)
    for index in ring.indices:
        for step in index.steps:
            if isinstance(step, CheckedStep) and index.role != "count":
                yield _advance_proof(case, index.name, index.key, step, inside, always)


def _copies(case: Case, origin: Callable[[Position], Origin], known: set[Origin]) -> Iterator[Access]:
    """The accesses to the storage by whole ranges (``memcpy`` to its start) that no subscript shows."""
    found: dict[Origin, Access] = {}
    for body in case.induction.bodies if case.induction is not None else ():
        for access in body.trace.accesses:
            if access.bytes_ is None or access.also is None or not _is_storage(case, access):
                continue
            places = {origin(access.position), origin(access.also)}
            if known.isdisjoint(places):
                where = origin(access.also)
                found.setdefault(where, Access(access.function, where, "", access.kind, None, None, "none", None))
    for where in sorted(found):
        yield found[where]


def _context(case: Case) -> Iterator[str]:
    family = case.family
    if family is None:
        return
    shared = sorted(
        {short_text(key) for trace in (*case.operations, *case.setups) for key in trace.volatile if key in family.keys}
    )
    if shared:
        yield f"nothing else changes {' or '.join(shared)} while one of these functions runs"


def _open(case: Case, about: str, where: Origin, function: str, index: str, reason: OpenReason, detail: str) -> Proof:
    return Proof(about, where, function, index, False, reason=reason, detail=detail)  # type: ignore[arg-type]


def _access_proof(case: Case, item: Access, found: Sequence[tuple[Body, Accessed]], assumed: Sequence[str]) -> Proof:
    def left(reason: OpenReason, detail: str) -> Proof:
        return _open(case, "access", item.where, item.function, item.index, reason, detail)

    if case.open_as is not None or case.induction is None:
        return left(case.open_as or "not modelled", case.detail)
    for trace in (*case.operations, *case.setups):
        if trace.troubles and (trace.function.name == item.function or _lays_out(case, trace, item.function)):
            reason, detail = next(iter(trace.troubles))
            return left(cast(OpenReason, reason), f"{trace.function.name}: {detail}")
    mine = [(body, access) for body, access in found if _is_storage(case, access)]
    strange = [access for _, access in found if not _is_storage(case, access)]
    if not mine:
        if strange:
            return left("pointer not resolved", "the pointer that is accessed here could not be followed")
        return left("not modelled", "no run that was followed comes to this access")
    if any(access.array is None and access.pointer is not None and _is_argument(access.pointer) for access in strange):
        return left("argument not bounded", "it accesses what a caller gives")
    more: list[str] = []
    cores: list[str] = []
    for body, access in mine:
        goal = _inside(case, body, access, item, more)
        if goal is None:
            return left("capacity not known", "the code does not show the number of slots")
        verdict = proved(case.induction, body, access.state, goal)
        cores += basis(case.induction)
        if verdict != "holds":
            reason = _why(case, body, verdict)
            return left(reason, _detail(case, body, access))
    kept = tuple(dict.fromkeys(cores))
    return Proof("access", item.where, item.function, item.index, True, kept, tuple(dict.fromkeys((*assumed, *more))))


def _lays_out(case: Case, trace: Trace, name: str) -> bool:
    return any(identity == name or identity.endswith(f":{name}") for identity in trace.laid_out)


def _is_argument(pointer: Pointer) -> bool:
    return pointer.source is not None and pointer.source[0][0] == "argument"


def _is_storage(case: Case, access: Accessed) -> bool:
    key = case.ring.storage_key
    if access.array is not None:
        return access.array[0] == key
    pointer = access.pointer
    return pointer is not None and pointer.source is not None and (*pointer.source[0], "*") == key


def _inside(case: Case, body: Body, access: Accessed, item: Access, more: list[str]) -> Truth | None:
    """That an access stays inside the storage."""
    trace, family = body.trace, case.family
    assert family is not None
    width = trace.memories.step + 12
    steps = IntType("steps", trace.memories.step, True, 9)

    def wide(number: Number) -> Number:
        return stretch(number, steps, width)

    first: Number = wide(access.first)
    if access.array is not None:
        length: Number | None = access.array[1]
        if length is None or (length < 2 and case.ring.capacity is None):
            return None
    else:
        pointer = access.pointer
        assert pointer is not None and pointer.source is not None
        view = look_at(family, trace, access.state, _base_of(case, trace, pointer))
        key = pointer.source[0]
        whole = view.pointer(key) if key in family.pointers else None
        if whole is None or case.slots is None or (case.slots.key is None and case.ring.capacity is None):
            return None
        if address_mark(whole.at) != address_mark(pointer.at) or _changed(trace, access.state, key):
            return None
        if case.slots.key is not None and _changed(trace, access.state, case.slots.key):
            return None
        slots = case.slots.number(view)
        length = slots if isinstance(slots, int) else stretch(slots, IntType("slots", family.width, True, 9), width)
        # At the pointers' own width: what they have in common falls out, wherever the buffer begins.
        first = wide(bits(access.first, trace.memories.step) - bits(whole.steps, trace.memories.step))
        more.append(f"{key_text(key)} has {case.slots.text} elements")
    if access.bytes_ is None:
        top = "<=" if access.kind == "address" and not item.index else "<"
        return both(compared(">=", first, 0, width, True), compared(top, first, length, width, True))
    unit = access.unit or 1
    size = bits(wide(access.bytes_), width)
    end, limit = bits(first, width) + size, bits(length, width)
    if unit != 1:
        end = bits(first, width) * z3.BitVecVal(unit, width) + size
        limit = limit * z3.BitVecVal(unit, width)
    inside = both(compared(">=", first, 0, width, True), compared("<=", end, limit, width, True))
    return either(equal(size, 0, width), both(compared(">=", size, 0, width, True), inside))


def _base_of(case: Case, trace: Trace, pointer: Pointer) -> Number | None:
    family = case.family
    assert family is not None and pointer.source is not None
    key, at = pointer.source
    return added(trace.memories, at, -family.offsets[key]) if key in family.offsets else None


def _changed(trace: Trace, state: State, key: Key) -> bool:
    """Whether a function stored into a key's memory since it began, or since the last call that it made."""
    pending: list[Node] = [row_of(trace.memories, state, key)]
    seen: set[int] = set()
    while pending:
        node = pending.pop()
        if id(node) in seen:
            continue
        seen.add(id(node))
        if isinstance(node, Stored):
            return True
        if not isinstance(node, Start):
            pending.extend(part for _, part in node.parts)
    return False


def _why(case: Case, body: Body, verdict: str) -> OpenReason:
    induction = case.induction
    assert induction is not None
    if induction.exhausted:
        return cast(OpenReason, induction.exhausted)
    if verdict == "unknown" or any(
        found == "unknown" and "[loop" not in text for text, (_, _, found) in induction.dropped.items()
    ):
        return "query limit"
    if body.trace.calls and any(point.kind == "after call" for point in body.trace.points):
        return "call to unknown code"
    if body.trace.arguments and any(isinstance(value, Pointer) is False for value in body.trace.arguments.values()):
        return "argument not bounded"
    return "start value not known" if not kept_by(induction) else "not modelled"


def _detail(case: Case, body: Body, access: Accessed) -> str:
    induction = case.induction
    assert induction is not None
    for text, (name, _, _) in induction.dropped.items():
        if "[loop" not in text and "<" in text and name:
            return f"{body.trace.function.name} does not show it, and {name} does not keep {text}"
    return f"{body.trace.function.name} does not show it"


def _range_proof(
    case: Case, name: str, key: Key, role: str, where: Origin, assumed: Sequence[str], inside: bool
) -> Proof:
    if case.open_as is not None or case.induction is None:
        return _open(case, "range", where, "", name, case.open_as or "not modelled", case.detail)
    if case.slots is None:
        return _open(case, "range", where, "", name, "capacity not known", "the code does not show the number of slots")
    active = case.induction.active
    short, text = short_text(key), case.slots.text
    wanted = [f"{short} {'<=' if role == 'count' else '<'} {text}"]
    family = case.family
    assert family is not None
    if key in family.types and family.types[key].signed:
        wanted.append(f"{short} >= 0")
    missing = [relation for relation in wanted if relation not in active]
    resting = f"{short} <= {text}"
    if missing == wanted[:1] and role != "count" and resting in active and inside:
        # It may rest at the end: every access brings it back before.
        wanted[0], missing = resting, []
    if not missing:
        return Proof("range", where, "", name, True, tuple(wanted), tuple(assumed))
    function, point, verdict = case.induction.dropped.get(missing[0], ("", None, ""))
    reason: OpenReason = "start value not known" if not function else "not modelled"
    if case.induction.exhausted:
        reason = cast(OpenReason, case.induction.exhausted)
    elif verdict == "unknown":
        reason = "query limit"
    elif point is not None and point.kind in ("call", "after call"):
        reason = "call to unknown code"
    return _open(case, "range", where, "", name, reason, f"{function or 'the start'} does not show {missing[0]}")


def _advance_proof(
    case: Case,
    name: str,
    key: Key,
    step: CheckedStep,
    inside: bool,
    assumed: Sequence[str],
) -> Proof:
    """That wherever the step is made, the index is then at the next slot, round the end, or where it was."""
    where, function = step.where, step.function

    def left(reason: OpenReason, detail: str) -> Proof:
        return _open(case, "advance", where, function, name, reason, detail)

    if case.open_as is not None or case.induction is None:
        return left(case.open_as or "not modelled", case.detail)
    family, slots = case.family, case.slots
    assert family is not None
    if slots is None:
        return left("capacity not known", "the code does not show the number of slots")
    if step.by not in (1, -1) or key not in family.types or step.wrap == "free-running":
        return left("not modelled", "it does not go one slot at a time")
    some = False
    cores: list[str] = []
    for body in case.induction.bodies:
        if not body.assumes:
            continue
        mine = body.trace.function.name == function or _lays_out(case, body.trace, function)
        stores = [store for store in body.trace.stores if store.key == key]
        if not mine or not stores:
            continue
        if body.trace.troubles:
            reason, detail = next(iter(body.trace.troubles))
            return left(cast(OpenReason, reason), detail)
        some = True
        for began, ended, way in _stretches(body):
            for base in body.objects:
                goal = either(negated(way), _one_on(case, body, began, ended, base, key, slots, step.by, inside))
                verdict = proved(case.induction, body, ended.state, goal)
                cores += basis(case.induction)
                if verdict != "holds":
                    reason_: OpenReason = "query limit" if verdict == "unknown" else "not modelled"
                    return left(reason_, f"{body.trace.function.name} may move it by more than one slot")
    if not some:
        return left("not modelled", "no run that was followed makes this step")
    return Proof("advance", where, function, name, True, tuple(dict.fromkeys(cores)), tuple(assumed))


def _stretches(body: Body) -> Iterator[tuple[Point, Point, Truth]]:
    """Pieces of runs without loops in them: from where a function or loop begins, or a call came back, to what ends it.

    Each with the truth that the latest beginning before the end is that one.
    """
    began = [point for point in body.trace.points if point.kind in ("entry", "after call", "loop")]
    ended = [point for point in body.trace.points if point.kind in ("return", "call", "before loop", "round")]
    for end in ended:
        latest = end.state.local.get(CUT)
        for begin in began:
            number = begin.state.local.get(CUT)
            way = equal(latest, number, FLAG.width)
            if way is not False:
                yield begin, end, way


def _one_on(
    case: Case,
    body: Body,
    began: Point,
    ended: Point,
    base: Number | None,
    key: Key,
    slots: Slots,
    by: int,
    inside: bool,
) -> Truth:
    family = case.family
    assert family is not None
    first, last = (look_at(family, body.trace, point.state, base) for point in (began, ended))
    before, after = bits(first.number(key), family.width), bits(last.number(key), family.width)
    limit = bits(slots.number(last), family.width)
    one = z3.BitVecVal(1, family.width)
    zero = z3.BitVecVal(0, family.width)
    # An index may rest at the end and be brought back before it is used, as all accesses show: that is slot 0.
    if inside:
        before = z3.If(before == limit, zero, before)
        after = z3.If(after == limit, zero, after)
    if by < 0:
        before, after = after, before
    below = compared("<", after, limit, family.width, True)
    nexts = either(
        both(equal(after, before + one, family.width), below),
        both(equal(after, 0, family.width), equal(before + one, limit, family.width)),
    )
    return either(equal(after, before, family.width), nexts)
