"""What is asked about one ring: its operations as traces, the relations that all of them keep, what is assumed.

The one idea: everything that makes proofs about a ring impossible (stores that were not seen, addresses that are given
away, functions that are not modelled) is looked for before anything is proved, so that a proof never rests on half a
view. What the code does not settle about a ring's beginning is put down as a clause that is said with each proof.
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import cast

import z3

from stepring.meaning.fold import fold
from stepring.meaning.types import (
    Assign,
    Binary,
    Cast,
    Load,
)
from stepring.paths.induction import (
    Body,
    Family,
    Induction,
    Relation,
    View,
    induct,
    objects_of,
    proved,
)
from stepring.paths.symbolic_memory import address_mark
from stepring.paths.symbolic_terms import both, equal
from stepring.paths.symbolic_types import FLAG, SET_FRAME, Limits, Trace
from stepring.paths.symbolic_writes import own_writes
from stepring.shapes.ring_keys import Key, inner_structs, place_keys, short_text, struct_name
from stepring.shapes.ring_program import RingProgram, comparisons, touching
from stepring.shapes.ring_relations import Slots, family_of, holds_for, relations_of
from stepring.shapes.ring_types import OpenReason
from stepring.shapes.ring_writers import Outside, Writer, writers_of
from stepring.shapes.types import Ring
from stepring.values.scan import walk_deep

MOST_COMPANIONS = 4
MOST_BOUNDS = 2


@dataclass(slots=True, eq=False)
class Case:
    """What is asked about one ring: its capacity and integers, the traces of its operations, what they keep.

    ``open_as`` with ``detail`` says why nothing can be proved, if so. ``assumed`` are the clauses on which all proofs
    rest.
    """

    ring: Ring
    program: RingProgram
    slots: Slots | None
    family: Family | None
    setting: frozenset[Key] = frozenset()
    operations: list[Trace] = field(default_factory=list)
    setups: list[Trace] = field(default_factory=list)
    induction: Induction | None = None
    assumed: list[str] = field(default_factory=list)
    open_as: OpenReason | None = None
    detail: str = ""


def _leave_open(case: Case, reason: OpenReason, detail: str) -> None:
    if case.open_as is None:
        case.open_as, case.detail = reason, detail


def prepare(case: Case, outside: Outside, often: Mapping[str, frozenset[str]], limits: Limits) -> None:
    ring, program = case.ring, case.program
    if case.slots is not None and case.slots.plus == 1 and case.slots.key is not None:
        if not _stands_for_mask(program, case.slots.key):
            _leave_open(
                case, "capacity not known", f"{short_text(case.slots.key)} is used as a mask and not stored as one"
            )
            return
    case.family = family_of(ring, case.slots, program.structs, program.variables, _companions(case))
    if case.family is None:
        _leave_open(case, "not modelled", "its integers do not live in one structure, nor all in variables")
        return
    family = case.family
    moved_storage = _storage_pointer(ring)
    bound = case.slots.key if case.slots is not None else None
    setting = case.setting = frozenset(key for key in (bound, moved_storage) if key is not None)
    storage = _storage_keys(ring)
    pending = [
        function
        for function in touching(program, family.keys | storage, family.struct)
        # One that only reads, or stores by way of others that can be entered, keeps what these keep.
        if program.sets(function, family.keys) or program.speaks_of(function, storage)
    ]
    opaque = frozenset(
        function.identity for function in pending if setting and program.sets(function, setting, clears=False)
    )
    done: set[str] = set()
    while pending:
        function = pending.pop(0)
        if function.identity in done:
            continue
        done.add(function.identity)
        sets = bool(setting) and program.sets(function, setting, clears=False)
        trace = program.trace(function, sets, opaque)
        (case.setups if sets else case.operations).append(trace)
        for name in trace.calls:
            # A body that was not laid out works on the ring by itself: what it keeps must be shown of it too.
            body = program.around.resolve(function, name)
            if body is not None and program.mentions(body) & family.keys:
                pending.append(body)
    _look_for_trouble(case, outside, often)
    if case.open_as is not None:
        return
    _find_kept(case, outside, often, limits)


def _stands_for_mask(program: RingProgram, key: Key) -> bool:
    """Whether what is used as a mask is stored as one less than something, or as a constant of low bits.

    A number of slots that is used as a mask by mistake is not: the buffer does not have one slot more than that.
    """
    some = False
    for function in program.functions:
        for block in function.blocks:
            for statement in block.statements:
                if not isinstance(statement, Assign) or key not in place_keys(statement.place, "", {}):
                    continue
                value = statement.value
                while isinstance(value, Cast):
                    value = value.operand
                known = fold(value)
                less = isinstance(value, Binary) and value.op == "-" and fold(value.right) == 1
                if not less and (known is None or known <= 0 or (known & (known + 1)) != 0):
                    return False
                some = True
    return some


def _companions(case: Case) -> tuple[Key, ...]:
    """Further integers that the ring's functions store into beside its indices: a second index that no access shows."""
    ring, program = case.ring, case.program
    keys = {index.key for index in ring.indices}
    structs = {key[1] for key in keys if key[0] == "member"}
    found: set[Key] = set()
    for function in program.functions:
        for key in own_writes(program.around, function).keys:
            if (key[0] == "member" and key[1] in structs and len(key) == 3) or (
                key[0] == "var" and len(key) == 2 and not structs and function.identity in ring.functions
            ):
                found.add(key)
    bound = case.slots.key if case.slots is not None else None
    chosen = [key for key in sorted(found - keys) if key != bound]
    return tuple(chosen)[:MOST_COMPANIONS]


def _storage_pointer(ring: Ring) -> Key | None:
    return ring.storage_key[:-1] if ring.storage_key and ring.storage_key[-1] == "*" else None


def _storage_keys(ring: Ring) -> frozenset[Key]:
    key = ring.storage_key
    if not key:
        return frozenset()
    return frozenset((key[:-1] if key[-1] == "*" else key, (*key, "[]")))


def _article(struct: str) -> str:
    name = struct_name(struct)
    return f"every {name}" if name.startswith(("struct ", "union ")) else f"every object of type {name}"


def _look_for_trouble(case: Case, outside: Outside, often: Mapping[str, frozenset[str]]) -> None:
    """What makes all proofs about the ring impossible."""
    family, program = case.family, case.program
    assert family is not None
    for trace in (*case.operations, *case.setups):
        writes = program.writes(trace.function)
        if trace.troubles and (writes.everything or writes.keys & family.keys):
            reason, detail = next(iter(trace.troubles))
            _leave_open(case, cast(OpenReason, reason), f"{trace.function.name}: {detail}")
        for key, name in trace.given.items():
            if key in family.keys:
                _leave_open(case, "pointer not resolved", f"{name} is given the address of {short_text(key)}")
            elif key[0] == "struct" and family.struct in inner_structs(key[1], program.structs):
                _leave_open(case, "pointer not resolved", f"{name} takes {struct_name(key[1])} as bytes")
    given_away = sorted({trace.function.name for trace in (*case.operations, *case.setups) if _gives_away(case, trace)})
    if given_away:
        calls = "calls" if len(given_away) == 1 else "call"
        what = f"what {', '.join(given_away)} {calls} changes {struct_name(family.struct)}"
        case.assumed.append(f"{what} through its own functions only")
    for name in sorted(program.structs):
        layout = program.structs[name]
        if layout.union and family.struct and family.struct in inner_structs(name, program.structs):
            if len(layout.fields) > 1:
                _leave_open(case, "not modelled", f"it shares memory in the union {struct_name(name)}")
    for file, what in outside.unread.items():
        if any(_reached_from(program, key, file) for key in family.keys):
            _leave_open(case, "code not read", f"{what} was not read and may store into it")
    if not outside.whole and any(_reached_from(program, key, "") for key in family.keys):
        _leave_open(case, "code not read", "only some files of the program were named, and others may store into it")
    for key in sorted(family.keys):
        for writer in writers_of(outside, key, often):
            if writer.value is None and (writer.gives or not program.has(writer.name)):
                _leave_open(case, "stored into elsewhere", f"{writer.name} may store into {short_text(key)}")


def _gives_away(case: Case, trace: Trace) -> bool:
    """Whether code that is not known is called with the ring: it may enter the ring's functions again with it.

    Such a call is a point where the relations are asked for, and after it nothing else is known; what is left to assume
    is that it has no ways of its own into the structure.
    """
    family, program = case.family, case.program
    assert family is not None
    known = program.around.defined
    objects = {address_mark(base) for base in objects_of(family, trace) if base is not None}
    given = {
        name
        for key, name in trace.given.items()
        if key[0] == "argument" and family.struct in inner_structs(key[1], program.structs)
    }
    given |= {name for at, name in trace.handed if address_mark(at) in objects}
    return any((known is None or name not in known) and not program.has(name) for name in given)


def _reached_from(program: RingProgram, key: Key, file: str) -> bool:
    """Whether code in a file (or in any other, if it is empty) can name an integer."""
    if key[0] == "member":
        layout = program.structs.get(key[1])
        own = layout.position.file if layout is not None and layout.position is not None else ""
        return not own.endswith(".c") or own == file
    return ":" not in key[1] or key[1].split(":", 1)[0] == file


def _find_kept(case: Case, outside: Outside, often: Mapping[str, frozenset[str]], limits: Limits) -> None:
    family = case.family
    assert family is not None
    relations = [
        relation
        for relation in relations_of(case.ring, case.slots, family, _constants(case), case.program.around.model.pointer)
        if _survives(case, relation, outside, often)
    ]
    relations = _start(case, relations)
    slots = case.slots
    ends = [slots.number] if slots is not None else []
    given: tuple[str, ...] = ()
    while True:
        spent = case.induction.queries if case.induction is not None else 0
        left = replace(limits, queries=max(limits.queries // 3, limits.queries - spent))
        case.induction = induct(
            family, relations, case.operations, case.setups, ends, left, given=given, setting=case.setting
        )
        # A capacity that a caller chooses cannot be shown to be one; that it is, is the caller's part.
        lost = [text for text in _callers_part(case) if text not in case.induction.active and text not in given]
        if not lost or case.induction.exhausted:
            break
        given = (*given, lost[0])
    for body in case.induction.bodies if given else ():
        if not body.assumes and not _can_set_up(case, body):
            _leave_open(case, "capacity not known", f"{body.trace.function.name} can set up none that fits its use")
    names = ", ".join(sorted({trace.function.name for trace in case.setups}))
    if any(trace.calls for trace in case.setups):
        case.assumed.append(f"nothing uses the ring while {names} runs")
    for text in given:
        if text in case.induction.active:
            case.assumed.append(f"{names} is given a capacity such that {text}")


def _can_set_up(case: Case, body: Body) -> bool:
    """Whether a function can set up an object at all under what is assumed of its callers."""
    assert case.induction is not None
    for point in body.trace.points:
        if point.kind == "return":
            flags = [point.state.local.get((SET_FRAME, "/".join(key)), 0) for key in sorted(case.setting)]
            never = both(*(equal(flag, 0, FLAG.width) for flag in flags))
            if proved(case.induction, body, point.state, never) == "fails":
                return True
    return False


def _callers_part(case: Case) -> Iterator[str]:
    """What must hold of a capacity that is set at run time: it is not 0, and no larger than an object can be."""
    slots = case.slots
    if slots is None or slots.key is None or not case.setups:
        return
    yield f"{slots.text} > 0"
    if case.family is not None and case.family.types[slots.key].width >= case.program.around.model.pointer:
        yield f"{slots.text} <= PTRDIFF_MAX"


def _constants(case: Case) -> frozenset[int]:
    """The constants below the capacity that its functions compare an index with: it may stop short of the end."""
    slots = case.ring.capacity
    keys = {index.key for index in case.ring.indices}
    found: set[int] = set()
    for function in case.program.functions:
        if function.identity not in case.ring.functions:
            continue
        for part in comparisons(function):
            for one, other in ((part.left, part.right), (part.right, part.left)):
                bound = fold(other)
                if bound is None or not any(
                    isinstance(inner, Load) and not keys.isdisjoint(place_keys(inner.place, "", {}))
                    for inner in walk_deep(one)
                ):
                    continue
                found.add(bound + 1 if part.op in ("<=", ">") else bound)
    return frozenset(sorted(bound for bound in found if bound > 1 and (slots is None or bound < slots))[:MOST_BOUNDS])


def _survives(case: Case, relation: Relation, outside: Outside, often: Mapping[str, frozenset[str]]) -> bool:
    """Whether stores of constants by code that is not run leave a relation as it is, whatever else holds."""
    family = case.family
    assert family is not None
    for key in relation.keys:
        for writer in writers_of(outside, key, often):
            if case.program.has(writer.name) and not writer.gives:
                continue
            if writer.value is None or not _harmless(family, relation, key, writer):
                return False
    return True


def _harmless(family: Family, relation: Relation, key: Key, writer: Writer) -> bool:
    """Whether a relation still holds after a constant was stored into one of its integers."""
    solver = z3.SolverFor("QF_BV")
    solver.set("rlimit", 200_000)
    values: dict[Key, object] = {
        each: z3.BitVec(f"value {number}", type_.width) for number, (each, type_) in enumerate(family.types.items())
    }
    for other in family.pointers:
        values[other] = None
    before = relation.formula(View(lambda each: values[each], family.types, family.width))
    changed = {**values, key: writer.value}
    after = relation.formula(View(lambda each: changed[each], family.types, family.width))
    solver.add(before if not isinstance(before, bool) else z3.BoolVal(before))
    solver.add(z3.Not(after if not isinstance(after, bool) else z3.BoolVal(after)))
    return bool(solver.check() == z3.unsat)


# -------------------------------------------------------------------------------------------------------------- start


def _start(case: Case, relations: list[Relation]) -> list[Relation]:
    """The relations that hold when the program starts, for all objects that it defines.

    An object whose capacity is still zero is not yet a ring where some function sets rings up. Objects that others
    make start with zeros, or are given to that function; this is said.
    """
    family, program, slots = case.family, case.program, case.slots
    assert family is not None
    sets_up = bool(case.setups)
    names = ", ".join(sorted({trace.function.name for trace in case.setups}))
    if not family.struct or family.struct == "[]":
        starts = program.starts(family, None)
        where = [values for values in starts if values is not None]
        if len(where) < len(starts):
            _leave_open(case, "start value not known", "its variables are defined in code that was not read")
        elif sets_up:
            case.assumed.append(f"{names} runs before the ring is used")
            where = []
    else:
        found = program.starts(family, family.struct)
        where = [values for values in found if values is not None]
        if sets_up:
            key = slots.key if slots is not None else None
            where = [values for values in where if key is not None and values.get(key, 0) != 0]
            case.assumed.append(f"{_article(family.struct)} is given to {names} before it is used")
        elif not found:
            where = [dict.fromkeys(family.types, 0)]
            case.assumed.append(f"{_article(family.struct)} starts with its indices at 0")
        elif len(where) < len(found):
            _leave_open(case, "start value not known", "its initial value is not a constant")
    plain = [relation for relation in relations if all(key in family.types for key in relation.keys)]
    rest = [relation for relation in relations if relation not in plain]
    if rest and where:
        rest = []
    return [relation for relation in plain if all(holds_for(relation, values, family) for values in where)] + rest
