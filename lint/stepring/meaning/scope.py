"""Names and types: from pycparser's declarations to ``CType``s, on demand.

A unit's file scope is an index from names to declarations; a type is built when it is first asked for, because a unit
declares far more than its functions use. Two structures are the same where they were declared at the same place, so
an identity is the tag (or the typedef's name) with the place. Layouts follow the common System V rule: members in
order, each at the next multiple of its alignment; bit-fields packed into units of their declared type (common
practice; a data model's ``max_align`` caps alignments).
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, TypeAlias

from pycparser import c_ast

from stepring.meaning.fold import fold
from stepring.meaning.models import integer
from stepring.meaning.types import (
    ArrayType,
    CType,
    DataModel,
    Enumeration,
    Enumerator,
    Expr,
    Field,
    FloatType,
    FunctionType,
    IntType,
    PointerType,
    StructLayout,
    StructType,
    UnknownType,
    Variable,
    VoidType,
)
from stepring.places import Position
from stepring.read.types import Declaration


@dataclass(frozen=True, slots=True)
class EnumConstant:
    """An enumerator as a name in scope."""

    value: int
    type: IntType


@dataclass(frozen=True, slots=True)
class FunctionSymbol:
    """A function as a name in scope."""

    name: str
    type: FunctionType
    static: bool


@dataclass(frozen=True, slots=True)
class TypeName:
    """A typedef as a name in scope; qualifiers that the typedef carries count for what is declared with it."""

    type: CType
    volatile: bool


Symbol: TypeAlias = Variable | EnumConstant | FunctionSymbol | TypeName


@dataclass(slots=True)
class DeclarationIndex:
    """The names that one declaration brings: ordinary ones, tags with a body, enumerators."""

    ordinary: dict[str, Any] = field(default_factory=dict)
    tags: dict[str, Any] = field(default_factory=dict)
    enumerators: dict[str, Any] = field(default_factory=dict)
    packed: set[int] = field(default_factory=set)


@dataclass(slots=True)
class FileScope:
    """A unit's file scope: where each name is declared, and what has been built so far."""

    model: DataModel
    ordinary: dict[str, list[tuple[Any, Declaration]]]
    tags: dict[str, Any]
    enumerators: dict[str, Any]
    attributes: dict[str, frozenset[str]]
    symbols: dict[str, Symbol | None] = field(default_factory=dict)
    structs: dict[str, StructLayout] = field(default_factory=dict)
    enums: dict[str, Enumeration] = field(default_factory=dict)
    built: dict[int, str] = field(default_factory=dict)
    enum_types: dict[int, IntType] = field(default_factory=dict)
    building: set[int] = field(default_factory=set)
    # The nodes of structures whose members stand side by side without padding.
    packed: set[int] = field(default_factory=set)


@dataclass(slots=True)
class Scope:
    """A block scope in a function, or the file scope itself (``parent`` None)."""

    file: FileScope
    parent: "Scope | None" = None
    symbols: dict[str, Symbol] = field(default_factory=dict)
    tags: dict[str, Any] = field(default_factory=dict)
    typeofs: Mapping[str, Any] = field(default_factory=dict)
    # Set by lowering: the type of an expression (for typeof and sizeof) and its lowered constant form.
    evaluator: Any = None

    def inner(self) -> "Scope":
        """A block scope inside this one."""
        return Scope(self.file, self, {}, {}, self.typeofs, self.evaluator)

    def lookup(self, name: str) -> Symbol | None:
        """What an ordinary identifier names here."""
        scope: Scope | None = self
        while scope is not None:
            found = scope.symbols.get(name)
            if found is not None:
                return found
            scope = scope.parent
        return file_symbol(self, name)

    def tag(self, name: str) -> Any:
        """The node with the body of a tag, or None."""
        scope: Scope | None = self
        while scope is not None:
            if name in scope.tags:
                return scope.tags[name]
            scope = scope.parent
        return self.file.tags.get(name)


def index_declaration(declaration: Declaration) -> DeclarationIndex:
    """The names that a declaration brings into file scope."""
    index = DeclarationIndex()
    for node in declaration.nodes:
        if isinstance(node, c_ast.FuncDef):
            index.ordinary[node.decl.name] = node
            index_tags(node.decl.type, index.tags, index.enumerators)
        elif isinstance(node, c_ast.Typedef | c_ast.Decl):
            if node.name:
                known = index.ordinary.get(node.name)
                if known is None or getattr(node, "init", None) is not None:
                    index.ordinary[node.name] = node
            index_tags(node.type, index.tags, index.enumerators, node.name or "")
            if "packed" in declaration.attributes:
                index.packed.update(_outermost_structs(node.type))
    return index


def _outermost_structs(node: Any) -> Iterator[int]:
    """The structure that a declaration declares; the attribute does not reach those inside it."""
    while isinstance(node, c_ast.TypeDecl | c_ast.PtrDecl | c_ast.ArrayDecl):
        node = node.type
    if isinstance(node, c_ast.Struct | c_ast.Union):
        yield id(node)


def index_tags(node: Any, tags: dict[str, Any], enumerators: dict[str, Any], hint: str = "") -> None:
    """Collect the tags with a body and the enumerators (with a name for their enumeration) inside a type node."""
    stack = [node]
    while stack:
        node = stack.pop()
        if isinstance(node, c_ast.Struct | c_ast.Union):
            if node.decls is not None:
                if node.name:
                    tags[node.name] = node
                stack.extend(member.type for member in node.decls if isinstance(member, c_ast.Decl))
        elif isinstance(node, c_ast.Enum):
            if node.values is not None:
                if node.name:
                    tags[node.name] = node
                for item in node.values.enumerators:
                    if isinstance(item, c_ast.Enumerator):
                        enumerators[item.name] = (node, hint)
        elif isinstance(node, c_ast.FuncDecl):
            stack.append(node.type)
            if node.args is not None:
                stack.extend(getattr(parameter, "type", None) for parameter in node.args.params)
        elif isinstance(node, c_ast.PtrDecl | c_ast.ArrayDecl | c_ast.TypeDecl | c_ast.Typename):
            stack.append(node.type)


def position(node: Any, fallback: Position | None = None) -> Position:
    """A node's place in the parsed text."""
    coord = node.coord
    if coord is None:
        return fallback or Position("", 0, 0)
    return Position(coord.file or "", coord.line or 0, coord.column or 0)


def find_position(node: Any) -> Position | None:
    """The first place known in a node or below it, looking through declarators."""
    while node is not None:
        if node.coord is not None:
            return position(node)
        node = getattr(node, "type", None)
    return None


# ------------------------------------------------------------------------------------------------------ file scope


def file_symbol(scope: Scope, name: str) -> Symbol | None:
    """What an ordinary identifier names at file scope, built on first use."""
    file = scope.file
    if name in file.symbols:
        return file.symbols[name]
    top = Scope(file, None, {}, {}, {}, scope.evaluator)
    symbol: Symbol | None = None
    if name in file.ordinary:
        file.symbols[name] = None  # stops a cycle such as ``typedef struct x x;`` looking itself up
        symbol = _declared(top, name, file.ordinary[name])
    elif name in file.enumerators:
        node, hint = file.enumerators[name]
        declare_enum(top, node, hint)
        return file.symbols.get(name)
    file.symbols[name] = symbol
    return symbol


def _declared(scope: Scope, name: str, entries: Sequence[tuple[Any, Declaration]]) -> Symbol | None:
    defined = next((entry for entry in entries if isinstance(entry[0], c_ast.FuncDef)), None)
    if defined is not None:
        node, declaration = defined
        top = _with_typeofs(scope, declaration)
        static = any(
            "static" in (entry[0].decl if isinstance(entry[0], c_ast.FuncDef) else entry[0]).storage
            for entry in entries
            if isinstance(entry[0], c_ast.FuncDef | c_ast.Decl)
        )
        return FunctionSymbol(name, function_type_of_definition(top, node), static)
    # Prefer the entry with an initialiser, then one that is no mere extern; an array's length may stand in either.
    node, declaration = max(entries, key=lambda entry: _weight(entry[0]))
    top = _with_typeofs(scope, declaration)
    type_: CType = build(top, node.type, name)
    if isinstance(node, c_ast.Typedef):
        return TypeName(type_, "volatile" in node.quals or _quals_of(node.type, "volatile"))
    if isinstance(type_, FunctionType):
        return FunctionSymbol(name, type_, any("static" in entry[0].storage for entry in entries))
    if isinstance(type_, ArrayType) and type_.length is None:
        for other, other_declaration in entries:
            again = build(_with_typeofs(scope, other_declaration), other.type, name)
            if isinstance(again, ArrayType) and again.length is not None:
                type_ = again
        if isinstance(type_, ArrayType) and type_.length is None and node.init is not None and scope.evaluator:
            type_ = ArrayType(type_.element, scope.evaluator.initial_length(top, type_, node.init))
    static = any("static" in entry[0].storage for entry in entries)
    external = all("extern" in entry[0].storage and entry[0].init is None for entry in entries)
    place = position(node)
    return Variable(
        name,
        f"{place.file}:{name}" if static else name,
        type_,
        "static" if static else "extern" if external else "global",
        **qualifiers(top, node),
        position=place,
    )


def _with_typeofs(scope: Scope, declaration: Declaration) -> Scope:
    return Scope(scope.file, None, {}, {}, declaration.typeofs, scope.evaluator) if declaration.typeofs else scope


def _weight(node: Any) -> int:
    if isinstance(node, c_ast.Typedef):
        return 1
    return 4 * (node.init is not None) + 2 * ("extern" not in node.storage) + isinstance(node.type, c_ast.ArrayDecl)


def qualifiers(scope: Scope, node: Any) -> dict[str, bool]:
    """Whether the object that a declaration declares is volatile, atomic or const (its elements' qualifiers count)."""
    type_ = node.type
    while isinstance(type_, c_ast.ArrayDecl):
        type_ = type_.type
    quals = list(type_.quals or []) if isinstance(type_, c_ast.PtrDecl | c_ast.TypeDecl) else []
    if isinstance(type_, c_ast.TypeDecl):
        quals += node.quals or []
    volatile = "volatile" in quals
    if isinstance(type_, c_ast.TypeDecl) and isinstance(type_.type, c_ast.IdentifierType) and not volatile:
        symbol = scope.lookup(type_.type.names[0]) if len(type_.type.names) == 1 else None
        volatile = isinstance(symbol, TypeName) and symbol.volatile
    # An atomic object is there to be changed by others at any moment, as a volatile one is.
    atomic = "_Atomic" in quals
    return {"volatile": volatile or atomic, "atomic": atomic, "const": "const" in quals}


def _quals_of(node: Any, word: str) -> bool:
    return isinstance(node, c_ast.TypeDecl | c_ast.PtrDecl) and word in (node.quals or [])


# ------------------------------------------------------------------------------------------------------ types


def build(scope: Scope, node: Any, hint: str = "") -> CType:
    """The type that a declarator node describes; ``hint`` names a structure that has no tag."""
    match node:
        case c_ast.TypeDecl() | c_ast.Typename():
            return build(scope, node.type, hint)
        case c_ast.PtrDecl():
            return PointerType(build(scope, node.type, hint), scope.file.model.pointer)
        case c_ast.ArrayDecl():
            length = constant(scope, node.dim) if node.dim is not None else None
            return ArrayType(build(scope, node.type, hint), length if length is None or length >= 0 else None)
        case c_ast.FuncDecl():
            return function_type(scope, node, hint)
        case c_ast.IdentifierType():
            return _named(scope, node.names)
        case c_ast.Struct() | c_ast.Union():
            return declare_struct(scope, node, hint)
        case c_ast.Enum():
            return declare_enum(scope, node, hint)
        case c_ast.TypeOf():
            return typeof(scope, node.expr)
    return UnknownType(type(node).__name__)


def typeof(scope: Scope, operand: Any) -> CType:
    """The type that ``typeof`` names: of a type name, or of an expression (not evaluated)."""
    if isinstance(operand, c_ast.Typename):
        return build(scope, operand)
    result: CType = scope.evaluator.type_of(scope, operand) if scope.evaluator else UnknownType("typeof")
    return result


def _named(scope: Scope, names: Sequence[str]) -> CType:
    model = scope.file.model
    if len(names) == 1 and names[0] not in _PLAIN:
        name = names[0]
        if name in scope.typeofs:
            return typeof(scope, scope.typeofs[name])
        symbol = scope.lookup(name)
        if isinstance(symbol, TypeName):
            return symbol.type
        return _library_types(model).get(name) or UnknownType(name)
    words = [word for word in names if word not in ("_Complex", "_Imaginary")]
    if "void" in words:
        return VoidType()
    if "float" in words:
        return FloatType("float", 32)
    if "double" in words:
        if "long" in words:
            return FloatType("long double", model.long_double)
        return FloatType("double", model.double)
    if "_Bool" in words or "bool" in words:
        return integer(model, "_Bool")
    unsigned = "unsigned" in words
    if "char" in words:
        return integer(model, "unsigned char" if unsigned else "signed char" if "signed" in words else "char")
    base = "short" if "short" in words else ["int", "long", "long long"][min(words.count("long"), 2)]
    if "__int128" in words:
        base = "__int128"
    return integer(model, f"unsigned {base}" if unsigned else base)


_PLAIN = frozenset(
    {
        *("void", "char", "short", "int", "long", "float", "double", "signed", "unsigned"),
        *("_Bool", "bool", "_Complex", "_Imaginary", "__int128"),
    }
)


def _library_types(model: DataModel) -> dict[str, CType]:
    """Types of ``<stdint.h>`` and ``<stddef.h>`` for units whose headers are missing; exact widths decide."""
    found: dict[str, CType] = {
        "size_t": integer(model, model.size_type),
        "ssize_t": integer(model, model.ptrdiff_type),
        "ptrdiff_t": integer(model, model.ptrdiff_type),
        "uintptr_t": integer(model, model.size_type),
        "intptr_t": integer(model, model.ptrdiff_type),
        "__builtin_va_list": PointerType(VoidType(), model.pointer),
        "va_list": PointerType(VoidType(), model.pointer),
    }
    for width in (8, 16, 32, 64):
        for base in ("char", "int", "short", "long", "long long"):
            type_ = integer(model, f"unsigned {base}")
            if type_.width == width:
                signed = integer(model, "signed char" if base == "char" else base)
                for prefix, chosen in (("uint", type_), ("int", signed)):
                    found.setdefault(f"{prefix}{width}_t", chosen)
                break
    return found


def function_type(scope: Scope, node: Any, hint: str = "") -> FunctionType:
    """The type of a function declarator; parameters of array and function type are adjusted (6.7.6.3p7, p8)."""
    returns = build(scope, node.type, hint)
    if node.args is None:
        return FunctionType(returns, None)
    parameters: list[CType] = []
    variadic = False
    for parameter in node.args.params:
        if isinstance(parameter, c_ast.EllipsisParam):
            variadic = True
        elif isinstance(parameter, c_ast.ID):
            return FunctionType(returns, None)
        else:
            parameters.append(adjusted(scope.file.model, build(scope, parameter.type)))
    if len(parameters) == 1 and isinstance(parameters[0], VoidType):
        parameters = []
    return FunctionType(returns, tuple(parameters), variadic)


def function_type_of_definition(scope: Scope, node: Any) -> FunctionType:
    """The type of a function definition; an old-style one takes its parameters from the declaration list."""
    type_ = build(scope, node.decl.type)
    if not isinstance(type_, FunctionType):
        return FunctionType(type_, None)
    if type_.parameters is None and node.param_decls:
        by_name = {item.name: item for item in node.param_decls}
        names = [parameter.name for parameter in node.decl.type.args.params]
        kinds = tuple(
            adjusted(scope.file.model, build(scope, by_name[name].type))
            if name in by_name
            else integer(scope.file.model, "int")
            for name in names
        )
        return FunctionType(type_.returns, kinds)
    return type_


def adjusted(model: DataModel, type_: CType) -> CType:
    """A parameter's type: arrays and functions become pointers."""
    if isinstance(type_, ArrayType):
        return PointerType(type_.element, model.pointer)
    if isinstance(type_, FunctionType):
        return PointerType(type_, model.pointer)
    return type_


def constant(scope: Scope, node: Any) -> int | None:
    """The value of an integer constant expression, or None."""
    if scope.evaluator is None:
        return None
    expr: Expr | None = scope.evaluator.constant(scope, node)
    return None if expr is None else fold(expr)


def identity(kind: str, name: str | None, hint: str, where: Position | None) -> str:
    """A structure's or enumeration's identity: its name as people say it, then ``@`` and the place of its body."""
    shown = f"{kind} {name}" if name else hint or f"unnamed {kind}"
    return f"{shown}@{where.file}:{where.line}:{where.column}" if where else f"{shown}@"


def declare_struct(scope: Scope, node: Any, hint: str) -> StructType:
    """The type of a structure or union node; its layout is built once and kept in the file scope."""
    file = scope.file
    union = isinstance(node, c_ast.Union)
    kind = "union" if union else "struct"
    body = node if node.decls is not None else scope.tag(node.name) if node.name else None
    if body is None or not isinstance(body, c_ast.Struct | c_ast.Union):
        return StructType(identity(kind, node.name, hint, None), union)
    if body is node and node.name and scope.parent is not None:
        scope.tags[node.name] = node
    known = file.built.get(id(body))
    if known is not None:
        return StructType(known, union)
    name = identity(kind, body.name, hint, find_position(body))
    file.built[id(body)] = name
    file.structs[name] = StructLayout(name, union, (), None, 1)
    file.structs[name] = lay_out(scope, body, name, union)
    return StructType(name, union)


def lay_out(scope: Scope, node: Any, name: str, union: bool) -> StructLayout:
    """Members with their offsets in bits."""
    offset = 0
    largest = 0
    alignment = 1
    packed = id(node) in scope.file.packed
    fields: list[Field] = []
    for member in node.decls or ():
        if not isinstance(member, c_ast.Decl):
            continue
        type_ = build(scope, member.type, member.name or "")
        quals = qualifiers(scope, member)
        size = size_of(scope.file.structs, type_)
        align = 1 if packed else align_of(scope.file.structs, scope.file.model, type_)
        start = 0 if union else offset
        bits = constant(scope, member.bitsize) if member.bitsize is not None else None
        if bits is not None and isinstance(type_, IntType):
            unit = type_.width
            if bits == 0:
                offset = -(-offset // unit) * unit
                continue
            if not packed and start // unit != (start + bits - 1) // unit:
                start = -(-start // unit) * unit
            end = start + bits
            # A bit-field has its own width; its rank stays the declared type's (6.3.1.1p2 reads it by value).
            field_type: CType = IntType(type_.name, bits, type_.signed, type_.rank, type_.enum)
            if type_.name == "_Bool":
                field_type = type_
        else:
            start = -(-start // (8 * align)) * 8 * align
            end = start + 8 * (size or 0)
            field_type = type_
        alignment = max(alignment, align)
        if member.name:
            fields.append(Field(member.name, field_type, start, bits, quals["volatile"], quals["atomic"]))
        elif isinstance(type_, StructType):
            fields.append(Field("", field_type, start))
        largest = max(largest, end)
        offset = end
    total = -(-largest // (8 * alignment)) * alignment
    return StructLayout(name, union, tuple(fields), total, alignment, find_position(node))


def declare_enum(scope: Scope, node: Any, hint: str) -> IntType:
    """The integer type of an enumeration; its enumerators become names in scope (6.7.2.2)."""
    file = scope.file
    body = node if node.values is not None else scope.tag(node.name) if node.name else None
    if body is None or not isinstance(body, c_ast.Enum):
        return integer(file.model, "unsigned int")
    known = file.enum_types.get(id(body))
    if known is not None:
        return known
    if id(body) in file.building:
        return integer(file.model, "int")
    file.building.add(id(body))
    local = scope.parent is not None and body is node
    if local and node.name:
        scope.tags[node.name] = node
    name = identity("enum", body.name, hint, find_position(body))
    int_ = integer(file.model, "int")
    following = 0
    items: list[Enumerator] = []
    pending: list[Any] = [item for item in body.values.enumerators if isinstance(item, c_ast.Enumerator)]
    for item in pending:
        value = constant(scope, item.value) if item.value is not None else following
        if value is None:
            value = following
        following = value + 1
        items.append(Enumerator(item.name, value, position(item)))
        kind = int_ if int_.low <= value <= int_.high else integer(file.model, "long long")
        (scope.symbols if local else file.symbols)[item.name] = EnumConstant(value, kind)
    type_ = _enum_type(file.model, [item.value for item in items], name)
    file.enums[name] = Enumeration(name, tuple(items), find_position(body) or Position("", 0))
    file.enum_types[id(body)] = type_
    return type_


def _enum_type(model: DataModel, values: Sequence[int], name: str) -> IntType:
    names = ["int"]
    if model.short_enums:
        names = ["char", "short", "int"]
    low, high = min(values, default=0), max(values, default=0)
    for base in [*names, "long", "long long"]:
        for text in (f"unsigned {base}", "signed char" if base == "char" else base):
            type_ = integer(model, text)
            if (low < 0) == type_.signed and type_.low <= low and high <= type_.high:
                return IntType(type_.name, type_.width, type_.signed, type_.rank, name)
    return integer(model, "int")


def size_of(structs: Mapping[str, StructLayout], type_: CType) -> int | None:
    """``sizeof`` in bytes, or None where the type is incomplete or unknown."""
    match type_:
        case IntType(width=width) | FloatType(width=width) | PointerType(width=width):
            return max(1, width // 8)
        case ArrayType(element=element, length=length):
            inner = size_of(structs, element)
            return None if inner is None or length is None else inner * length
        case StructType(identity=name):
            return structs[name].size if name in structs else None
        case VoidType() | FunctionType():
            return 1  # GNU C counts both as one byte
    return None


def align_of(structs: Mapping[str, StructLayout], model: DataModel, type_: CType) -> int:
    """``_Alignof`` in bytes, capped by the data model."""
    match type_:
        case ArrayType(element=element):
            return align_of(structs, model, element)
        case StructType(identity=name):
            return structs[name].align if name in structs else 1
    return min(model.max_align, size_of(structs, type_) or 1)


def find_field(structs: Mapping[str, StructLayout], name: str, member: str) -> Iterator[tuple[str, Field]]:
    """The way to a member, through unnamed structures and unions: (structure's identity, field) from outside in."""
    layout = structs.get(name)
    if layout is None:
        return
    direct = layout.field(member)
    if direct is not None:
        yield name, direct
        return
    for unnamed in layout.fields:
        if unnamed.name == "" and isinstance(unnamed.type, StructType):
            inner = list(find_field(structs, unnamed.type.identity, member))
            if inner:
                yield name, unnamed
                yield from inner
                return
