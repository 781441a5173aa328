"""Who else stores into a ring's indices: what the ring finder did not run, so that no verdict is given on half a view.

The one idea: the ring finder runs the functions that its filter kept, and what it concludes holds only if nobody else
moves an index. So the unit stage notes for all other functions which lasting integers they store into, fill as part
of a structure, or give the address of; and the program stage asks for each ring whether one of these is an index. A
stored constant that the index is known to take changes nothing; neither does a store into an index that was followed
through all values of its type.
"""

from collections import defaultdict
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field

from stepring.meaning.fold import fold
from stepring.meaning.types import (
    AddressOf,
    ArrayType,
    Assign,
    Binary,
    Branch,
    Call,
    Cast,
    Clobber,
    DerefPlace,
    ElementPlace,
    Expr,
    Function,
    FunctionName,
    IntType,
    Load,
    MemberPlace,
    Object,
    PlaceExpr,
    PointerDistance,
    PointerStep,
    PointerType,
    Return,
    StructLayout,
    StructType,
    Switch,
    Unary,
    UnknownType,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.ring_keys import Key, in_local, inner_structs, is_local, key_text, place_keys, short_text

ANY = None
"""In place of a constant: any value may be stored."""
_FILLS = ("memset", "bzero")
_COPIES = ("memcpy", "memmove", "strncpy", "fread", "read")


@dataclass(frozen=True, slots=True)
class Writer:
    """A function (or an object whose initialiser takes an address) and the constant that it stores, None for any.

    ``gives``: it keeps an address, through which code that is not known can store, even if the function itself is run.
    """

    name: str
    position: Position
    value: int | None
    gives: bool = False


Writers = Mapping[Key, tuple[Writer, ...]]
"""By what is stored into: ``("var", identity)``, ``("member", structure, name)``, ``("struct", structure)`` for all of
an object, ``("call", function)`` for a static function that is called by what is not run."""


@dataclass(frozen=True, slots=True)
class Outside:
    """What the program stage knows of code that the ring finder does not run.

    ``unread`` are the files of which something could not be read, with what that was; ``whole`` says that no single
    files were named.
    """

    writers: Writers = field(default_factory=dict)
    unread: Mapping[str, str] = field(default_factory=dict)
    whole: bool = True


# ---------------------------------------------------------------------------------------------------------- a unit


@dataclass(slots=True)
class _Note:
    """What one function does: keys with a constant or ANY, and the functions that it names."""

    stores: dict[Key, int | None] = field(default_factory=dict)
    escapes: set[Key] = field(default_factory=set)
    kept_escapes: set[Key] = field(default_factory=set)
    names: set[str] = field(default_factory=set)


class Noter:
    """Notes of the functions already seen; a header's inline function is in many units."""

    def __init__(self) -> None:
        self.notes: dict[int, tuple[Function, _Note]] = {}

    def writers(
        self,
        functions: Sequence[Function],
        kept: Sequence[Function],
        objects: Sequence[Object],
        structs: Mapping[str, StructLayout],
    ) -> Writers:
        """The writers of a unit besides the functions that are kept; of these, only what they give away."""
        inside = {id(function) for function in kept}
        found: dict[Key, dict[tuple[str, Position], Writer]] = defaultdict(dict)
        called: dict[str, list[Function]] = defaultdict(list)
        laid_out: set[str] = set()
        for function in functions:
            note = self._note(function, structs)
            mark = (function.name, function.position)
            if id(function) in inside:
                laid_out |= note.names
                for key in note.kept_escapes:
                    found[key][mark] = Writer(*mark, ANY, True)
                continue
            for key, value in note.stores.items():
                found[key][mark] = Writer(*mark, value)
            for key in note.escapes:
                found[key][mark] = Writer(*mark, ANY)
            for name in note.names:
                called[name].append(function)
        for item in objects:
            for initial in item.initial:
                given = _Note()
                _expr(given, initial.value, given.escapes)
                for key in given.escapes:
                    found[key][item.variable.name, item.position] = Writer(item.variable.name, item.position, ANY)
        for function in kept:
            # Laid out with the callers that were kept, it is not run by itself; another caller may ask more of it.
            if function.static and function.name in laid_out:
                for caller in called.get(function.name, ()):
                    mark = (caller.name, caller.position)
                    found["call", function.name][mark] = Writer(*mark, ANY)
        return {key: tuple(by_place.values()) for key, by_place in found.items()}

    def _note(self, function: Function, structs: Mapping[str, StructLayout]) -> _Note:
        known = self.notes.get(id(function))
        if known is None:
            known = self.notes[id(function)] = (function, _noted(function, structs))
        return known[1]


def _noted(function: Function, structs: Mapping[str, StructLayout]) -> _Note:
    note = _Note()
    for block in function.blocks:
        for statement in block.statements:
            match statement:
                case Assign(place=place, value=value):
                    _store(note, place, fold(value), structs)
                    _expr(note, value, note.escapes)
                    if not in_local(place):
                        _expr(note, value, note.kept_escapes)
                case Call():
                    _call(note, statement, structs)
                case Clobber(places=places):
                    for place in places:
                        _store(note, place, ANY, structs)
        match block.terminator:
            case Branch(condition=value) | Switch(value=value):
                _expr(note, value, note.escapes)
            case Return(value=result) if result is not None:
                _expr(note, result, note.escapes)
                _expr(note, result, note.kept_escapes)
    return note


def _call(note: _Note, call: Call, structs: Mapping[str, StructLayout]) -> None:
    name = ""
    if isinstance(call.callee, FunctionName):
        name = call.callee.name
        note.names.add(name)
    for argument in call.arguments:
        _expr(note, argument, note.escapes)
    if call.result is not None:
        _store(note, call.result, ANY, structs)
    plain = name.removeprefix("__builtin_").removeprefix("__builtin___").removesuffix("_chk")
    if plain not in (*_FILLS, *_COPIES):
        return
    value = ANY
    if plain in _FILLS:
        filled = fold(call.arguments[1]) if plain == "memset" and len(call.arguments) > 1 else 0
        value = 0 if filled == 0 else ANY
    for argument in call.arguments[: 1 if plain != "read" else 2]:
        struct = _pointed(argument)
        if struct is not None:
            _add_struct(note, struct, value, structs)
        inner = _uncast(argument)
        if isinstance(inner, AddressOf) and value is not ANY:
            for key in _keys(inner.place):  # all of it is filled with 0, no address is kept
                note.escapes.discard(key)
                _add(note, key, value)


def _pointed(argument: Expr) -> str | None:
    """The structure, other than a local one, that an argument points to."""
    inner = _uncast(argument)
    if isinstance(inner, AddressOf):
        type_ = inner.place.type
        while isinstance(type_, ArrayType):
            type_ = type_.element
        return type_.identity if isinstance(type_, StructType) and not in_local(inner.place) else None
    to = inner.type.to if isinstance(inner.type, PointerType) else None
    return to.identity if isinstance(to, StructType) else None


def _store(note: _Note, place: PlaceExpr, value: int | None, structs: Mapping[str, StructLayout]) -> None:
    if isinstance(place, VariablePlace) and not place.variable.lasting:
        return
    if isinstance(place.type, StructType):
        if not in_local(place):
            _add_struct(note, place.type.identity, ANY, structs)
    elif isinstance(place.type, IntType | UnknownType):
        for key in _keys(place):
            _add(note, key, value)
    base = place
    while isinstance(base, MemberPlace | ElementPlace):
        if isinstance(base, MemberPlace) and base.struct in structs and structs[base.struct].union:
            if not in_local(base):
                _add_struct(note, base.struct, ANY, structs)
        base = base.base


def _add(note: _Note, key: Key, value: int | None) -> None:
    note.stores[key] = value if note.stores.get(key, value) == value else ANY


def _add_struct(note: _Note, identity: str, value: int | None, structs: Mapping[str, StructLayout]) -> None:
    """A whole object with all that is embedded in it; the program stage does not know every unit's structures."""
    for inner in inner_structs(identity, structs):
        _add(note, ("struct", inner), value)


def _keys(place: PlaceExpr) -> Iterator[Key]:
    if isinstance(place, DerefPlace) or in_local(place):
        return
    yield from (key for key in place_keys(place, "", {}) if not is_local(key) and key[-1] != "*")


def _uncast(expr: Expr) -> Expr:
    while isinstance(expr, Cast):
        expr = expr.operand
    return expr


def _expr(note: _Note, expr: Expr, escapes: set[Key]) -> None:
    """Note the lasting integers whose address is taken, and the functions that are named."""
    match expr:
        case AddressOf(place=place):
            if isinstance(place.type, IntType | UnknownType):
                escapes.update(_keys(place))
            elif isinstance(place.type, ArrayType) and isinstance(place.type.element, IntType):
                escapes.update((*key, "[]") for key in _keys(place))
        case FunctionName(name=name):
            note.names.add(name)
        case Cast(operand=operand) | Unary(operand=operand):
            _expr(note, operand, escapes)
        case Binary(left=left, right=right) | PointerDistance(left=left, right=right):
            _expr(note, left, escapes)
            _expr(note, right, escapes)
        case PointerStep(pointer=pointer):
            _expr(note, pointer, escapes)
        case Load():
            pass


# ---------------------------------------------------------------------------------------------------------- a program


def outside_of(
    writers: Iterable[Writers], run: frozenset[tuple[str, Position]], unread: Mapping[str, str], whole: bool
) -> Outside:
    """The writers of all units; ``run`` are the (name, position) of functions that a unit kept and so are run."""
    found: dict[Key, dict[Writer, None]] = defaultdict(dict)
    for unit in writers:
        for key, some in unit.items():
            found[key].update(dict.fromkeys(some))
    # A header's inline function that another unit kept is run; the addresses that it keeps still count.
    return Outside(
        {
            key: tuple(one for one in some if one.gives or (one.name, one.position) not in run)
            for key, some in found.items()
        },
        unread,
        whole,
    )


def unseen(
    outside: Outside,
    relied: Mapping[Key, frozenset[int]],
    functions: Iterable[str],
    structs: Mapping[str, StructLayout],
    defined: Mapping[str, frozenset[str]],
) -> tuple[str, ...]:
    """Why stores into a ring's indices may have been missed, one clause each; empty where they were all seen.

    ``relied`` are the integers that the verdicts rest on, each with the constants that may be stored into it without
    changing anything. ``functions`` are the names of those that access the storage, ``defined`` the files that define
    a name which means several variables.
    """
    why: list[str] = []
    for key, harmless in relied.items():
        name = short_text(key)
        for writer in writers_of(outside, key, defined):
            if writer.value is ANY or writer.value not in harmless:
                why.append(f"{writer.name} may store into {name} and was not run")
                break
        reach, file = _reach(key, structs)
        for unread_file, what in outside.unread.items():
            if reach or unread_file == file:
                why.append(f"{what} was not read and may store into {name}")
                break
        if not outside.whole and reach:
            why.append(f"only some files of the program were named, and others may store into {key_text(key)}")
    for function in functions:
        callers = outside.writers.get(("call", function), ())
        if callers and relied:
            why.append(f"{callers[0].name} calls {function} too and was not run")
    return tuple(dict.fromkeys(why))


def writers_of(outside: Outside, key: Key, defined: Mapping[str, frozenset[str]]) -> Iterator[Writer]:
    """Who may store into an integer; ``defined`` as for ``unseen``."""
    yield from outside.writers.get(key, ())
    if key[0] == "member":
        yield from outside.writers.get(("struct", key[1]), ())
    elif key[0] == "var" and ":" in key[1]:
        file, name = key[1].rsplit(":", 1)
        files = defined.get(name, frozenset())
        if file in files:
            for writer in outside.writers.get(("var", name, *key[2:]), ()):
                if writer.position.file == file or writer.position.file not in files:
                    yield writer


def _reach(key: Key, structs: Mapping[str, StructLayout]) -> tuple[bool, str]:
    """Whether other units can name an integer, and the file that it is declared in."""
    if key[0] == "member":
        layout = structs.get(key[1])
        file = layout.position.file if layout is not None and layout.position is not None else ""
        return not file.endswith(".c"), file
    return ":" not in key[1], key[1].split(":", 1)[0]
