"""What is known of a state variable as such: how it is shown, where it is declared, what it holds at the start."""

from collections.abc import Mapping

from stepring.meaning.types import (
    Const,
    IntType,
    StructLayout,
    StructType,
)
from stepring.places import Origin
from stepring.shapes.facts import (
    Constant,
    Family,
    KeyFact,
)
from stepring.shapes.keys import uncast
from stepring.shapes.names import Names, constant_of, families
from stepring.shapes.state_scan import Work
from stepring.shapes.state_stores import initial_constants

_WIDE = 1 << 63


def key_facts(work: Work, chosen: frozenset[str]) -> None:
    objects = _objects_by_key(work)
    for scan in work.scans:
        for key, seen in scan.keys.items():
            if key not in chosen or key in work.keys:
                continue
            root = seen.key.root
            type_ = seen.type
            where: Origin | None = None
            if seen.key.kind == "variable" and root is not None and root.position is not None:
                where = work.names.origin(root.position)
            if where is None:
                layout = work.unit.types.structs.get(key.rsplit(".", 1)[0]) if seen.key.kind == "member" else None
                if layout is not None and layout.position is not None:
                    where = work.names.origin(layout.position)
            if where is None:
                where = work.names.origin(scan.function.position)
            initials, zero = objects.get(key, ((), False))
            low, high, enum = -_WIDE, _WIDE, None
            if isinstance(type_, IntType):
                low, high, enum = type_.low, type_.high, type_.enum
            work.keys[key] = KeyFact(
                key,
                seen.key.shown,
                seen.key.kind,
                where,
                low,
                high,
                enum,
                seen.key.scope,
                initials,
                zero,
                work.names.origin(scan.function.position).file,
            )


def _objects_by_key(work: Work) -> dict[str, tuple[tuple[Constant, ...], bool]]:
    """The initial values of each key: the constants that initialisers give, and whether some object starts as zero."""
    found: dict[str, tuple[list[Constant], bool]] = {}
    structs = work.unit.types.structs
    for item in work.unit.objects:
        type_ = item.variable.type
        if isinstance(type_, IntType):
            # Several objects can stand for one variable.
            constants, zero = found.setdefault(item.variable.identity, ([], False))
            first = initial_constants(work, item, ())
            found[item.variable.identity] = ([*constants, *first], zero or (not first and not item.initial))
            continue
        given: dict[str, int] = {}
        for initial in item.initial:
            key = _member_key(structs, type_, initial.path, item.variable.identity)
            if key is None:
                continue
            inner = uncast(initial.value)
            given[key] = given.get(key, 0) + 1
            if isinstance(inner, Const):
                where = work.names.origin(initial.position)
                found.setdefault(key, ([], False))[0].append(constant_of(work.names, inner, where))
        for key, count in _member_counts(structs, type_, item.variable.identity, 0).items():
            constants, zero = found.setdefault(key, ([], False))
            found[key] = (constants, zero or count > given.get(key, 0))
    return {key: (tuple(dict.fromkeys(constants)), zero) for key, (constants, zero) in found.items()}


def _member_key(
    structs: Mapping[str, StructLayout], type_: object, path: tuple[str | int, ...], identity: str
) -> str | None:
    key = identity
    for step in path:
        if isinstance(step, int):
            type_ = getattr(type_, "element", None)
            key = f"{key}[]"
        elif isinstance(type_, StructType):
            layout = structs.get(type_.identity)
            member = layout.field(step) if layout is not None else None
            if member is None:
                return None
            key = f"{type_.identity}.{step}"
            type_ = member.type
    return key if isinstance(type_, IntType) else None


def _member_counts(structs: Mapping[str, StructLayout], type_: object, key: str, depth: int) -> dict[str, int]:
    """How many scalars of each key an object of a type holds (elements of an array count once each)."""
    if isinstance(type_, IntType):
        return {key: 1}
    found: dict[str, int] = {}
    if depth > 6:
        return found
    if isinstance(type_, StructType):
        layout = structs.get(type_.identity)
        for member in layout.fields if layout is not None else ():
            inner = _member_counts(structs, member.type, f"{type_.identity}.{member.name}", depth + 1)
            for name, count in inner.items():
                found[name] = found.get(name, 0) + count
    elif hasattr(type_, "element"):
        inner = _member_counts(structs, type_.element, f"{key}[]", depth + 1)
        length = type_.length or 1  # type: ignore[attr-defined]
        found = {name: count * length for name, count in inner.items()}
    return found


def families_by_key(names: Names, work: Work) -> tuple[Family, ...]:
    by_key: dict[str, list[Constant]] = {}
    for dispatch in work.dispatches:
        by_key.setdefault(dispatch.key, []).extend(label.constant for label in dispatch.labels)
    for store, _ in work.stores:
        by_key.setdefault(store.key, []).extend(store.constants)
    found: dict[str, Family] = {}
    for constants in by_key.values():
        for family in families(names, constants):
            found.setdefault(family.identity, family)
    return tuple(found[identity] for identity in sorted(found))
