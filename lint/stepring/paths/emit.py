"""IR expressions as Python text: a few lines on local variables for each, with the checks that C's rules ask for.

A call for each node would cost five times as much as text does. The text is made of nothing but numbers and of names
that ``keep`` and ``local`` give; ``translate`` explains the frame ``f`` that it works on. Places and values need each
other (a subscript is a value, a load reads a place), which is why they share this module.
"""

import struct
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from stepring.meaning.scope import size_of
from stepring.meaning.show import expr_text, place_text
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Binary,
    Cast,
    Const,
    CType,
    DerefPlace,
    ElementPlace,
    Expr,
    Field,
    FloatConst,
    FloatType,
    FunctionName,
    FunctionType,
    IntType,
    Load,
    MemberPlace,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    PointerType,
    StructLayout,
    StructType,
    TextConst,
    Unary,
    Unknown,
    UnknownType,
    Variable,
    VariablePlace,
    VoidType,
)
from stepring.paths import arithmetic
from stepring.paths.types import Undefined, Unsettled
from stepring.places import Position


@dataclass(slots=True)
class Writer:
    """The text of a function under construction."""

    program: Any
    unit: int
    function: str
    structs: Mapping[str, StructLayout]
    watched: bool
    names: dict[str, Any]
    slots: dict[str, int] = field(default_factory=dict)
    cells: set[str] = field(default_factory=set)
    lines: list[str] = field(default_factory=list)
    counter: int = 0
    # What a slot holds as far as this block has set or read it: later reads need no check.
    held: dict[int, str] = field(default_factory=dict)
    # What a store under way goes through: the one access of a statement that is no load.
    stored: PlaceExpr | None = None
    at: Position = field(default_factory=lambda: Position("", 0))
    # Nothing of the program goes into the function: what its inline assembly gives comes from outside.
    sealed: bool = False


@dataclass(slots=True)
class Where:
    """A place as text: the name of its ``Cells``, a fixed and a computed part of its offset, and its bounds.

    ``checked`` says that an access must be compared with the bounds. ``array`` are the bounds of the array that the
    place is an element of. A scalar in the frame has only ``slot``.
    """

    cells: str = ""
    fixed: int = 0
    moving: str = ""
    low: str = "0"
    high: str = "0"
    checked: bool = False
    array: tuple[str, str] | None = None
    slot: int | None = None
    bits: int | None = None
    shift: int = 0
    last: bool = False

    @property
    def offset(self) -> str:
        """The offset in bytes."""
        if not self.moving:
            return str(self.fixed)
        return f"{self.moving} + {self.fixed}" if self.fixed else self.moving


# ---------------------------------------------------------------------------------------------------------- writing


def line(writer: Writer, text: str) -> None:
    writer.lines.append(f" {text}")


def local(writer: Writer, text: str) -> str:
    writer.counter += 1
    name = f"t{writer.counter}"
    writer.lines.append(f" {name} = {text}")
    return name


def keep(writer: Writer, thing: Any) -> str:
    """A name for something that the text refers to."""
    name = f"k{len(writer.names)}"
    writer.names[name] = thing
    return name


def fail(writer: Writer, error: Exception) -> str:
    """Code that fails; the operand it returns is never used."""
    line(writer, f"raise {keep(writer, type(error))}(*{keep(writer, error_parts(error))})")
    return "0"


def error_parts(error: Exception) -> tuple[Any, ...]:
    """What an error is made of, so that each failure raises a new one."""
    if isinstance(error, Undefined):
        return (error.fault, error.reason, error.position)
    if isinstance(error, Unsettled):
        return (error.reason, error.position)
    return error.args


def _literal(number: int) -> str:
    return str(number) if number >= 0 else f"({number})"


def size_of_type(writer: Writer, type_: CType) -> int | None:
    return size_of(writer.structs, type_)


# ------------------------------------------------------------------------------------------------------------ places


def where_of(writer: Writer, place: PlaceExpr, *, access: bool) -> Where:
    """Write what leads to a place. With ``access`` False a subscript may be one past the end (6.5.3.2p3, 6.5.6p8)."""
    match place:
        case VariablePlace(variable=variable):
            return _variable(writer, variable)
        case MemberPlace(base=base):
            where = where_of(writer, base, access=True)
            found = _field(writer, place)
            if found is None:
                fail(writer, Unsettled(f"the member {place.name} is not known", writer.at))
                return where
            where.fixed += found.offset // 8
            where.shift = found.offset % 8
            where.bits = found.bits
            where.array = None
            where.last = _is_last(writer, place, found) and _through_pointer(base)
            return where
        case ElementPlace():
            return _element(writer, place, access)
        case DerefPlace(pointer=pointer, position=position):
            at = position or writer.at
            given = value(writer, pointer)
            text, at_ = keep(writer, place_text(place)), keep(writer, at)
            held = local(writer, given)
            way = f"{size_of_type(writer, place.type) or 0}, {'store' if place is writer.stored else 'load'!r}"
            line(writer, f"if {held}.__class__ is not tuple: {held} = target(f[1], {held}, {text}, {at_}, {way})")
            writer.counter += 1
            name = f"c{writer.counter}"
            line(writer, f"{name}, o{name}, l{name}, h{name} = {held}")
            line(writer, f"if not {name}.alive: raise ended({name}, {text}, {at_})")
            return Where(name, 0, f"o{name}", f"l{name}", f"h{name}", checked=True, array=(f"l{name}", f"h{name}"))


def _variable(writer: Writer, variable: Variable) -> Where:
    if not variable.lasting:
        slot = writer.slots[variable.identity]
        if variable.identity not in writer.cells:
            return Where(slot=slot)
        size = size_of_type(writer, variable.type)
        cells = local(writer, f"f[{slot}]")
        if size is None:
            return Where(cells, 0, "", "0", f"{cells}.size", checked=True)
        return Where(cells, 0, "", "0", str(size))
    number = writer.program.static_number(writer.unit, variable)
    size = writer.program.statics[number].size
    own = size_of_type(writer, variable.type)
    cells = local(writer, f"f[0][{number}]")
    if size is None or own is None or own > size:
        return Where(cells, 0, "", "0", f"{cells}.size", checked=True)
    return Where(cells, 0, "", "0", str(size))


def _field(writer: Writer, place: MemberPlace) -> Field | None:
    layout = writer.structs.get(place.struct)
    if layout is None:
        return None
    if place.name:
        return layout.field(place.name)
    return next((member for member in layout.fields if member.name == "" and member.type == place.type), None)


def _is_last(writer: Writer, place: MemberPlace, found: Field) -> bool:
    layout = writer.structs[place.struct]
    return not layout.union and layout.fields[-1] == found


def _through_pointer(place: PlaceExpr) -> bool:
    while isinstance(place, MemberPlace):
        place = place.base
    return isinstance(place, DerefPlace)


def _element(writer: Writer, place: ElementPlace, access: bool) -> Where:
    where = where_of(writer, place.base, access=True)
    size = size_of_type(writer, place.type)
    array = place.base.type
    if size is None or not isinstance(array, ArrayType):
        fail(writer, Unsettled(f"the size of {place_text(place)} is not known", writer.at))
        return where
    at = keep(writer, place.position or writer.at)
    index = value(writer, place.index)
    length = array.length
    if length is None or (where.last and length <= 1):
        # A flexible member, also in its old spellings, reaches to the end of its object.
        where.array = (where.offset, where.high)
        where.checked = True
    else:
        most = length - 1 if access else length
        text = keep(writer, place_text(place))
        if not index.isdigit() or int(index) > most:
            test = f"not 0 <= {index} < {length}" if access else f"not 0 <= {index} <= {length}"
            line(writer, f"if {test}: raise bad_index({index}, {length}, {text}, {at})")
        if where.array is None or not isinstance(place.base, ElementPlace):
            low = where.offset
            where.array = (low, f"{low} + {length * size}" if where.moving else str(where.fixed + length * size))
    if index.lstrip("(-").rstrip(")").isdigit():
        where.fixed += size * int(index.strip("()"))
    else:
        step = index if size == 1 else f"{index} * {size}"
        where.moving = local(writer, f"{where.moving} + {step}" if where.moving else step)
    where.bits, where.shift, where.last = None, 0, False
    return where


def _guard(writer: Writer, where: Where, size: int, place: PlaceExpr) -> None:
    """Write the comparison of an access with its bounds, where it is needed."""
    if not where.checked:
        return
    o = where.offset
    text, at = keep(writer, place_text(place)), keep(writer, _place_position(writer, place))
    arguments = f"{where.cells}, {o}, {size}, {where.low}, {where.high}, {text}, {at}"
    line(writer, f"if {o} < {where.low} or {o} + {size} > {where.high}: raise outside({arguments})")


def _place_position(writer: Writer, place: PlaceExpr) -> Position:
    while isinstance(place, MemberPlace):
        place = place.base
    position = getattr(place, "position", None)
    return position if isinstance(position, Position) else writer.at


def _volatile(place: PlaceExpr) -> bool:
    while True:
        match place:
            case VariablePlace(variable=variable):
                return variable.volatile
            case MemberPlace(volatile=True):
                return True
            case MemberPlace(base=base) | ElementPlace(base=base):
                place = base
            case _:
                return False


# ------------------------------------------------------------------------------------------------- loads and stores

_CODES = {(8, False): "B", (8, True): "b", (16, False): "H", (16, True): "h", (32, False): "I", (32, True): "i"} | {
    (64, False): "Q",
    (64, True): "q",
}
PACKERS = {code: struct.Struct("<" + code) for code in "BbHhIiQqfd"}


def _load(writer: Writer, place: PlaceExpr, type_: CType, position: Position | None) -> str:
    at = position or writer.at
    where = where_of(writer, place, access=True)
    if where.slot is not None:
        return _load_slot(writer, place, where.slot, at)
    if _volatile(place):
        line(writer, f"if f[1].volatile is not None: f[1].volatile(f[1].memory, {place_text(place)!r}, 'load')")
    size = size_of_type(writer, type_)
    c, o = where.cells, where.offset
    text, at_ = keep(writer, place_text(place)), keep(writer, at)
    if size is None or isinstance(type_, UnknownType | VoidType):
        return fail(writer, Unsettled(f"the type of {place_text(place)} is not known", at))
    if where.bits is not None and isinstance(type_, IntType):
        _guard(writer, where, (where.shift + where.bits + 7) // 8, place)
        got = local(writer, f"read_bits({c}, {o}, {where.shift}, {where.bits})")
        line(writer, f"if not {got}[1]: raise unset({c}, {text}, {at_})")
        if type_.signed and type_.name != "_Bool":
            sign = 1 << (where.bits - 1)
            return local(writer, f"({got}[0] ^ {sign}) - {sign}")
        return local(writer, f"{got}[0]")
    _guard(writer, where, size, place)
    if isinstance(type_, StructType | ArrayType):
        return local(writer, f"copy_out({c}, {o}, {size})")
    full = b"\xff" * size
    part = f"{c}.known[{o}:{o} + {size}]"
    line(writer, f"if {c}.known is not None and {part} != {full!r}: raise unset({c}, {text}, {at_})")
    if isinstance(type_, PointerType):
        return local(writer, f"load_pointer(f[1].memory, {c}, {o}, {size})")
    if isinstance(type_, FloatType):
        if type_.width > 64:
            return fail(writer, Unsettled(f"{type_.name} is not computed with", at))
        return local(writer, f"unpack_{'f' if type_.width == 32 else 'd'}({c}.data, {o})[0]")
    if not isinstance(type_, IntType):
        return fail(writer, Unsettled(f"{place_text(place)} has no value", at))
    code = _CODES.get((type_.width, type_.signed))
    if code == "B":
        got = local(writer, f"{c}.data[{o}]")
        if type_.name == "_Bool":
            line(writer, f"if {got} > 1: raise not_a_bool({text}, {at_})")
        return got
    if code is None:
        return local(writer, f"int.from_bytes({c}.data[{o}:{o} + {size}], 'little', signed={type_.signed})")
    return local(writer, f"unpack_{code}({c}.data, {o})[0]")


def _load_slot(writer: Writer, place: PlaceExpr, slot: int, at: Position) -> str:
    known = writer.held.get(slot)
    if known is not None:
        return known
    assert isinstance(place, VariablePlace)
    got = local(writer, f"f[{slot}]")
    name, identity = place.variable.name, place.variable.identity
    shown = "a temporary" if name.startswith("%") else name
    parts = f"{shown!r}, {keep(writer, identity)}, {keep(writer, at)}"
    line(writer, f"if {got} is None: raise unset_variable(f[1], {parts})")
    writer.held[slot] = got
    return got


def store(writer: Writer, place: PlaceExpr, given: str, at: Position, *, initial: bool = False) -> None:
    type_ = place.type
    writer.stored = _root(place)
    where = where_of(writer, place, access=True)
    writer.stored = None
    if where.slot is not None:
        # A parameter of the wrong kind never gets here: lowering converted the value.
        line(writer, f"f[{where.slot}] = {given}")
        writer.held[where.slot] = given
    else:
        _store_cells(writer, place, type_, where, given, at)
    if writer.watched and not _is_temporary(place):
        event = keep(writer, ("store", writer.function, at, place_text(place)))
        line(writer, f"f[1].observe(Event(*{event}, {given}))")


def _root(place: PlaceExpr) -> PlaceExpr:
    """The variable or the dereferenced pointer that a place is part of."""
    while isinstance(place, MemberPlace | ElementPlace):
        place = place.base
    return place


def _is_temporary(place: PlaceExpr) -> bool:
    return isinstance(place, VariablePlace) and place.variable.storage == "temporary"


def _store_cells(writer: Writer, place: PlaceExpr, type_: CType, where: Where, given: str, at: Position) -> None:
    if _volatile(place):
        line(writer, f"if f[1].volatile is not None: f[1].volatile(f[1].memory, {place_text(place)!r}, 'store')")
    size = size_of_type(writer, type_)
    c, o = where.cells, where.offset
    if size is None or isinstance(type_, UnknownType | VoidType):
        fail(writer, Unsettled(f"the type of {place_text(place)} is not known", at))
        return
    bits = where.bits is not None and isinstance(type_, IntType)
    _guard(writer, where, (where.shift + (where.bits or 0) + 7) // 8 if bits else size, place)
    line(writer, f"if {c}.frozen: raise read_only({c}, {keep(writer, at)})")
    if bits:
        line(writer, f"write_bits({c}, {o}, {where.shift}, {where.bits}, {given})")
        return
    if isinstance(type_, StructType | ArrayType):
        line(writer, f"copy_in({c}, {o}, {given})")
        return
    if isinstance(type_, PointerType):
        line(writer, f"store_pointer({c}, {o}, {size}, {given})")
    elif isinstance(type_, FloatType):
        if type_.width > 64:
            fail(writer, Unsettled(f"{type_.name} is not computed with", at))
        line(writer, f"pack_{'f' if type_.width == 32 else 'd'}({c}.data, {o}, {given})")
    elif isinstance(type_, IntType):
        code = _CODES.get((type_.width, type_.signed))
        if code == "B":
            line(writer, f"{c}.data[{o}] = {given}")
        elif code is None:
            line(writer, f"{c}.data[{o}:{o} + {size}] = ({given}).to_bytes({size}, 'little', signed={type_.signed})")
        else:
            line(writer, f"pack_{code}({c}.data, {o}, {given})")
    full = b"\xff" * size
    line(writer, f"if {c}.known is not None: {c}.known[{o}:{o} + {size}] = {full!r}")


# -------------------------------------------------------------------------------------------------------- addresses


def _address(writer: Writer, expr: AddressOf) -> str:
    place = expr.place
    if isinstance(place, DerefPlace):
        return value(writer, place.pointer)  # &*p is p (6.5.3.2p3)
    fixed = _fixed_address(writer, place)
    if fixed is not None:
        return _literal(fixed)
    if isinstance(place, VariablePlace) and isinstance(place.type, FunctionType):
        return keep(writer, writer.program.function_pointer(writer.unit, place.variable.name))
    where = where_of(writer, place, access=False)
    low, high = where.low, where.high
    decayed = isinstance(place.type, ArrayType) and isinstance(expr.type, PointerType) and expr.type.to != place.type
    if decayed:
        assert isinstance(place.type, ArrayType)
        size = size_of_type(writer, place.type)
        if isinstance(place, ElementPlace) and where.array is not None:
            low, high = where.array  # a row of a table: walking on into the next row stays in the table
        elif size is not None and not (where.last and (place.type.length or 0) <= 1):
            low, high = where.offset, f"{where.offset} + {size}"
        else:
            low = where.offset
    elif isinstance(place, ElementPlace) and where.array is not None:
        low, high = where.array
    return local(writer, f"({where.cells}, {where.offset}, {low}, {high})")


def _fixed_address(writer: Writer, place: PlaceExpr) -> int | None:
    """The address of a member at a fixed base, as in ``&((struct s *)0)->m``."""
    match place:
        case DerefPlace(pointer=Const(value=base)):
            return base
        case MemberPlace(base=inner):
            base_address = _fixed_address(writer, inner)
            found = _field(writer, place)
            if base_address is None or found is None:
                return None
            return base_address + found.offset // 8
    return None


# ------------------------------------------------------------------------------------------------------- expressions


def value(writer: Writer, expr: Expr) -> str:
    """Write the evaluation of an expression; gives a Python name or number that holds the value."""
    match expr:
        case Const(value=number):
            return _literal(number)
        case FloatConst(value=real, type=type_):
            single = isinstance(type_, FloatType) and type_.width == 32
            return keep(writer, arithmetic.single(real) if single else real)
        case TextConst(text=text, type=type_):
            element = type_.to if isinstance(type_, PointerType) else getattr(type_, "element", None)
            number = writer.program.literal_number(text, element)
            return local(writer, f"(f[0][{number}], 0, 0, {writer.program.statics[number].size})")
        case Load(place=place, type=type_, position=position):
            return _load(writer, place, type_, position)
        case AddressOf():
            return _address(writer, expr)
        case FunctionName(name=name):
            return keep(writer, writer.program.function_pointer(writer.unit, name))
        case Unary():
            return _unary(writer, expr)
        case Binary():
            return _binary(writer, expr)
        case Cast():
            return _cast(writer, expr)
        case PointerStep(pointer=pointer, steps=steps, position=position):
            base, count = value(writer, pointer), value(writer, steps)
            type_ = pointer.type
            size = size_of_type(writer, type_.to) if isinstance(type_, PointerType) else None
            if size is None:
                reason = f"the size of what {expr_text(pointer)} points to is not known"
                return fail(writer, Unsettled(reason, position))
            text, at = keep(writer, expr_text(expr)), keep(writer, position or writer.at)
            return local(writer, f"stepped({base}, {count}, {size}, {text}, {at})")
        case PointerDistance(left=left, right=right):
            a, b = value(writer, left), value(writer, right)
            size = size_of_type(writer, left.type.to) if isinstance(left.type, PointerType) else None
            if not size:
                return fail(writer, Unsettled("the size of what the pointers point to is not known", writer.at))
            return local(writer, f"distance({a}, {b}, {size}, {keep(writer, writer.at)})")
        case Unknown(why=why):
            return fail(writer, Unsettled(f"a value is not known here: {why}", writer.at))


def _unary(writer: Writer, expr: Unary) -> str:
    operand = value(writer, expr.operand)
    if expr.op == "!":
        return local(writer, f"1 if {operand} == 0 else 0")
    type_ = expr.type
    if isinstance(type_, FloatType) and expr.op == "-":
        return local(writer, f"-{operand}")
    if not isinstance(type_, IntType):
        return fail(writer, Unsettled(f"the type of {expr_text(expr)} is not known", writer.at))
    if expr.op == "~":
        return local(writer, f"~{operand}" if type_.signed else f"{operand} ^ {type_.high}")
    if not type_.signed:
        return local(writer, f"-{operand} & {type_.high}")
    result = local(writer, f"-{operand}")
    _check_fits(writer, result, expr, type_, writer.at)
    return result


def _check_fits(writer: Writer, result: str, expr: Expr, type_: IntType, at: Position) -> None:
    arguments = f"{result}, {keep(writer, expr_text(expr))}, {keep(writer, type_)}, {keep(writer, at)}"
    line(writer, f"if not {type_.low} <= {result} <= {type_.high}: raise overflow({arguments})")


COMPARISONS = ("<", "<=", ">", ">=", "==", "!=")


def comparison(writer: Writer, expr: Binary) -> str:
    """A comparison as a Python condition."""
    left, right = value(writer, expr.left), value(writer, expr.right)
    if isinstance(expr.left.type, PointerType):
        if expr.op in ("==", "!="):
            return f"{'not ' if expr.op == '!=' else ''}same_pointer({left}, {right})"
        text, at = keep(writer, expr_text(expr)), keep(writer, expr.position or writer.at)
        return f"pointer_order({left}, {right}, {text}, {at}) {expr.op} 0"
    return f"{left} {expr.op} {right}"


def _binary(writer: Writer, expr: Binary) -> str:
    if expr.op in COMPARISONS:
        return local(writer, f"1 if {comparison(writer, expr)} else 0")
    left, right = value(writer, expr.left), value(writer, expr.right)
    type_ = expr.type
    at = expr.position or writer.at
    if isinstance(type_, FloatType):
        if type_.width > 64 or expr.op not in ("+", "-", "*", "/"):
            return fail(writer, Unsettled(f"{type_.name} is not computed with", at))
        text = f"quotient({left}, {right})" if expr.op == "/" else f"{left} {expr.op} {right}"
        return local(writer, f"single({text})" if type_.width == 32 else text)
    if not isinstance(type_, IntType):
        return fail(writer, Unsettled(f"the type of {expr_text(expr)} is not known", at))
    if expr.op in ("&", "|", "^"):
        return local(writer, f"{left} {expr.op} {right}")
    if expr.op in ("/", "%"):
        return _division(writer, expr, left, right, type_, at)
    if expr.op in ("<<", ">>"):
        return _shift(writer, expr, left, right, type_, at)
    if not type_.signed:
        return local(writer, f"{left} {expr.op} {right} & {type_.high}")
    result = local(writer, f"{left} {expr.op} {right}")
    _check_fits(writer, result, expr, type_, at)
    return result


def _division(writer: Writer, expr: Binary, left: str, right: str, type_: IntType, at: Position) -> str:
    if not (right.isdigit() and int(right)):
        text = f"{keep(writer, expr_text(expr))}, {keep(writer, at)}"
        line(writer, f"if {right} == 0: raise divided_by_zero({text})")
    if not type_.signed:
        return local(writer, f"{left} {'//' if expr.op == '/' else '%'} {right}")
    # Division truncates towards zero, and a % b is what it leaves (6.5.5p6).
    result = local(writer, f"abs({left}) // abs({right})")
    line(writer, f"if ({left} < 0) != ({right} < 0): {result} = -{result}")
    if not right.isdigit():
        _check_fits(writer, result, expr, type_, at)
    return result if expr.op == "/" else local(writer, f"{left} - {result} * {right}")


def _shift(writer: Writer, expr: Binary, left: str, right: str, type_: IntType, at: Position) -> str:
    parts = f"{keep(writer, expr_text(expr))}, {keep(writer, type_)}, {keep(writer, at)}"
    if not (right.isdigit() and int(right) < type_.width):
        line(writer, f"if not 0 <= {right} < {type_.width}: raise bad_shift({left}, {right}, {parts})")
    if expr.op == ">>":
        return local(writer, f"{left} >> {right}")
    if not type_.signed:
        return local(writer, f"{left} << {right} & {type_.high}")
    result = local(writer, f"{left} << {right}")
    line(writer, f"if {left} < 0 or {result} > {type_.high}: raise bad_shift({left}, {right}, {parts})")
    return result


def _cast(writer: Writer, expr: Cast) -> str:
    operand = value(writer, expr.operand)
    have, want = expr.operand.type, expr.type
    match have, want:
        case IntType(), IntType():
            return _to_integer(writer, operand, want, have)
        case ((PointerType() | FunctionType()), IntType(name="_Bool")):
            return local(writer, f"0 if {operand} == 0 else 1")
        case FunctionType(), PointerType():
            return operand
        case ((PointerType() | FunctionType()), IntType()):
            return _to_integer(writer, local(writer, f"address_of({operand})"), want, None)
        case FloatType(), IntType(name="_Bool"):
            return local(writer, f"1 if {operand} != 0.0 else 0")
        case FloatType(), IntType():
            parts = f"{keep(writer, want)}, {keep(writer, expr_text(expr.operand))}, {keep(writer, writer.at)}"
            return local(writer, f"whole({operand}, {parts})")
        case ((IntType() | FloatType()), FloatType(width=width)):
            if width > 64:
                return fail(writer, Unsettled(f"{want.name} is not computed with", writer.at))
            return local(writer, f"{'single' if width == 32 else 'float'}({operand})")
        case IntType(), PointerType(width=width):
            mask = (1 << width) - 1
            if operand.isdigit():
                return _literal(int(operand) & mask)  # an address that the text fixes: no object of the program's
            return local(writer, f"f[1].memory.resolve({operand} & {mask})")
        case PointerType(), PointerType(to=to):
            if expr.written and isinstance(to, IntType) and to.name in ("char", "unsigned char", "signed char"):
                # Bytes of the whole object: this is how one gets from a member to its structure.
                return local(writer, f"whole_object({operand})")
            return operand
    return fail(writer, Unsettled(f"{expr_text(expr.operand)} has a type that is not known", writer.at))


def _to_integer(writer: Writer, operand: str, want: IntType, have: IntType | None) -> str:
    if want.name == "_Bool":
        return operand if have is not None and have.name == "_Bool" else local(writer, f"1 if {operand} != 0 else 0")
    if have is not None and want.low <= have.low and have.high <= want.high:
        return operand
    mask = (1 << want.width) - 1
    if not want.signed:
        return local(writer, f"{operand} & {mask}")
    sign = 1 << (want.width - 1)
    return local(writer, f"({operand} & {mask} ^ {sign}) - {sign}")
