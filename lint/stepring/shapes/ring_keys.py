"""Names for memory that lasts: one key for every scalar or array that ring code can share between calls.

The one idea: what makes two accesses speak of the same ring is not the text but the identity of what they reach. A
variable is known by its identity; a member by its structure and its name, whatever object it is in, because the
functions of a ring take the object as a parameter. Elements of an array share one key. Local variables have keys of
their own, told apart by the frame (the inlined call) they live in.

A key is a tuple of words: ``("var", identity)``, ``("member", structure, name)``, ``("local", frame, identity)``; a
final ``"[]"`` stands for an element, ``"*"`` for what a lasting pointer points to.
"""

from collections.abc import Mapping
from typing import TypeAlias

from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Cast,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    FloatType,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerStep,
    PointerType,
    StructLayout,
    StructType,
    UnknownType,
    VariablePlace,
    VoidType,
)

Key: TypeAlias = tuple[str, ...]
Points: TypeAlias = Mapping[Key, frozenset[Key]]

NOTHING: frozenset[Key] = frozenset()


def is_local(key: Key) -> bool:
    """Whether the key's memory ends with the call."""
    return key[0] == "local"


def is_scalar(key: Key) -> bool:
    """Whether the key names one lasting object, not all elements of an array."""
    return key[0] != "local" and key[-1] not in ("[]", "*")


def place_keys(place: PlaceExpr, frame: str, points: Points) -> frozenset[Key]:
    """The keys that a place may have: one, unless a pointer may lead to several; none where nothing is known."""
    match place:
        case VariablePlace(variable=variable):
            if variable.lasting:
                return frozenset((("var", variable.identity),))
            return frozenset((("local", frame, variable.identity),))
        case MemberPlace(base=base, struct=struct, name=name):
            if in_local(base):
                return frozenset((*key, "." + name) for key in place_keys(base, frame, points))
            return frozenset((("member", struct, name),))
        case ElementPlace(base=base):
            return frozenset((*key, "[]") for key in place_keys(base, frame, points))
        case DerefPlace(pointer=pointer):
            return targets(pointer, frame, points)


def targets(pointer: Expr, frame: str, points: Points) -> frozenset[Key]:
    """The keys of what a pointer may point to; an array that decayed gives its element's key."""
    match pointer:
        case AddressOf(place=place):
            keys = place_keys(place, frame, points)
            return frozenset((*key, "[]") for key in keys) if isinstance(place.type, ArrayType) else keys
        case PointerStep(pointer=inner):
            return targets(inner, frame, points)
        case Cast(operand=operand, type=type_) if _same_step(operand.type, type_):
            return targets(operand, frame, points)
        case Load(place=place, type=PointerType() | UnknownType()):
            found: set[Key] = set()
            for key in place_keys(place, frame, points):
                known = points.get(key)
                if known is not None:
                    found |= known
                elif not is_local(key):
                    found.add((*key, "*"))
            return frozenset(found)
    return NOTHING


def _same_step(source: CType, target: CType) -> bool:
    """Whether a pointer that is converted still steps by the same number of bytes."""
    if not (isinstance(source, PointerType) and isinstance(target, PointerType)):
        return False
    one, other = source.to, target.to
    if isinstance(one, VoidType) or isinstance(other, VoidType) or one == other:
        return True
    return isinstance(one, IntType) and isinstance(other, IntType) and one.width == other.width


def in_local(place: PlaceExpr) -> bool:
    """Whether the place is (part of) a variable of the function itself."""
    while isinstance(place, MemberPlace | ElementPlace):
        place = place.base
    return isinstance(place, VariablePlace) and not place.variable.lasting


def struct_name(identity: str) -> str:
    """A structure's identity as people say it."""
    return identity.split("@", 1)[0]


def key_text(key: Key) -> str:
    """A key as a person would name it: ``weight_head``, ``struct commands.tail``."""
    if key[0] == "member":
        base = f"{struct_name(key[1])}.{key[2]}"
        rest = key[3:]
    else:
        name = key[1] if key[0] == "var" else key[2]
        base = name.rsplit(":", 1)[-1].split("@", 1)[0]
        rest = key[2:] if key[0] == "var" else key[3:]
    return base + "".join("[]" if word == "[]" else word for word in rest if word != "*")


def short_text(key: Key) -> str:
    """A key's last name: ``tail``."""
    return key_text(key).removesuffix("[]").rsplit(".", 1)[-1]


def byte_size(type_: CType, structs: Mapping[str, StructLayout]) -> int | None:
    """A type's size in bytes, None where it is not known. A bit-field's type counts as its own width rounded up."""
    match type_:
        case IntType(width=width) | PointerType(width=width):
            return (width + 7) // 8
        case ArrayType(element=element, length=length):
            inner = byte_size(element, structs)
            return None if inner is None or length is None else inner * length
        case StructType(identity=identity):
            layout = structs.get(identity)
            return layout.size if layout is not None else None
        case FloatType(width=width):
            return (width + 7) // 8
    return None


def inner_structs(identity: str, structs: Mapping[str, StructLayout]) -> frozenset[str]:
    """The structure itself and all that are embedded in it, directly or as elements."""
    found: set[str] = set()
    pending = [identity]
    while pending:
        name = pending.pop()
        if name in found:
            continue
        found.add(name)
        layout = structs.get(name)
        for field in layout.fields if layout is not None else ():
            type_ = field.type
            while isinstance(type_, ArrayType):
                type_ = type_.element
            if isinstance(type_, StructType):
                pending.append(type_.identity)
    return frozenset(found)
