"""What meaning gives: C types with their sizes, and every function body as a graph of simple typed statements (the IR).

The IR has one purpose: after it, nobody thinks about C's expression rules again. Its three layers:

- *types* (``CType``): with widths and signs settled by a ``DataModel``.
- *expressions* (``Expr``) are pure: evaluating one changes nothing. Every implicit conversion is a ``Cast``; both
operands of a
  ``Binary`` have the same type (except shifts and pointer steps). Memory is read only by ``Load``, of a ``Place``.
- *statements* do one thing each: ``Assign`` a place, ``Call``, ``Begin`` a variable's life. A ``Block`` is a run of
  statements and one ``Terminator``. ``&&``, ``||``, ``?:``, ``++``, compound assignment, comma and statement
  expressions have become statements, branches and temporaries; values that a later side effect could change were
  saved in temporaries first, operands being evaluated from left to right.

Clause numbers in docstrings are those of ISO/IEC 9899:2011 (N1570).
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Literal, TypeAlias

from stepring.places import Notice, Position

# ---------------------------------------------------------------------------------------------------------- types


@dataclass(frozen=True, slots=True)
class IntType:
    """An integer type. ``name`` is the type's name without typedefs (``unsigned char``, ``_Bool``, ``int``,
    ``enum``-free).

    ``width`` is in bits (value and sign bits, padding excluded; a bit-field's own width), ``rank`` orders the types as
    6.3.1.1 does. ``enum`` is the enumeration's identity where the object was declared with one; it does not count when
    types are compared.
    """

    name: str
    width: int
    signed: bool
    rank: int
    enum: str | None = field(default=None, compare=False)

    @property
    def low(self) -> int:
        return -(1 << (self.width - 1)) if self.signed else 0

    @property
    def high(self) -> int:
        if self.name == "_Bool":
            return 1
        return (1 << (self.width - 1)) - 1 if self.signed else (1 << self.width) - 1


@dataclass(frozen=True, slots=True)
class FloatType:
    """A real floating type; ``width`` in bits."""

    name: str
    width: int


@dataclass(frozen=True, slots=True)
class VoidType:
    """The type ``void``."""


@dataclass(frozen=True, slots=True)
class PointerType:
    """A pointer; ``width`` in bits."""

    to: "CType"
    width: int


@dataclass(frozen=True, slots=True)
class ArrayType:
    """An array; ``length`` is None where it is not a constant (incomplete, flexible member, variable length)."""

    element: "CType"
    length: int | None


@dataclass(frozen=True, slots=True)
class StructType:
    """A structure or union by its identity: ``struct auger``, a typedef's name for one without tag, else ``file:line``.

    Its members are in ``TypeTable.structs``.
    """

    identity: str
    union: bool = False


@dataclass(frozen=True, slots=True)
class FunctionType:
    """A function; ``parameters`` is None where no prototype is known."""

    returns: "CType"
    parameters: tuple["CType", ...] | None
    variadic: bool = False


@dataclass(frozen=True, slots=True)
class UnknownType:
    """A type whose declaration was not found (a missing header)."""

    name: str


CType: TypeAlias = IntType | FloatType | VoidType | PointerType | ArrayType | StructType | FunctionType | UnknownType


@dataclass(frozen=True, slots=True)
class Field:
    """A member of a structure: ``offset`` in bits from its start; ``bits`` is the width of a bit-field, else None."""

    name: str
    type: CType
    offset: int
    bits: int | None = None
    volatile: bool = False
    atomic: bool = False


@dataclass(frozen=True, slots=True)
class StructLayout:
    """A structure's or union's members in order; ``size`` and ``align`` in bytes; ``size`` None while incomplete."""

    identity: str
    union: bool
    fields: tuple[Field, ...]
    size: int | None
    align: int
    position: Position | None = None

    def field(self, name: str) -> Field | None:
        """The member of that name, or None."""
        return next((member for member in self.fields if member.name == name), None)


@dataclass(frozen=True, slots=True)
class Enumerator:
    """One enumeration constant."""

    name: str
    value: int
    position: Position


@dataclass(frozen=True, slots=True)
class Enumeration:
    """An enumeration with its constants in order; identity as for structures."""

    identity: str
    enumerators: tuple[Enumerator, ...]
    position: Position


@dataclass(frozen=True, slots=True)
class DataModel:
    """Sizes of the basic types, in bits, and the choices that C leaves to the implementation.

    ``max_align`` is the strictest alignment in bytes (1 on AVR, 2 on MSP430).
    """

    name: str
    short: int
    int_: int
    long: int
    long_long: int
    pointer: int
    double: int = 64
    long_double: int = 128
    max_align: int = 16
    wchar: int = 32
    char_signed: bool = True
    short_enums: bool = False
    size_type: str = "unsigned long"
    ptrdiff_type: str = "long"


# ---------------------------------------------------------------------------------------------------------- symbols

Storage = Literal["automatic", "parameter", "static-local", "static", "global", "extern", "temporary"]


@dataclass(frozen=True, slots=True)
class Variable:
    """An object with a name.

    ``identity`` tells it from every other in the program: ``name`` for one with external linkage, ``file:name`` for a
    file's static,
    ``file:function:name@line.column`` for a function's own static, ``name@line:column`` for automatic ones, ``%N`` for
    temporaries made by lowering.
    """

    name: str
    identity: str
    type: CType
    storage: Storage
    volatile: bool = False
    atomic: bool = False
    const: bool = False
    position: Position | None = None

    @property
    def lasting(self) -> bool:
        """Whether its value survives the function's return."""
        return self.storage in ("static-local", "static", "global", "extern")


# ---------------------------------------------------------------------------------------------------------- places


@dataclass(frozen=True, slots=True)
class VariablePlace:
    """A variable as a place in memory."""

    variable: Variable

    @property
    def type(self) -> CType:
        return self.variable.type


@dataclass(frozen=True, slots=True)
class MemberPlace:
    """A structure's member: ``base.name``. ``p->name`` has ``DerefPlace(p)`` as its base."""

    base: "PlaceExpr"
    struct: str
    name: str
    type: CType
    volatile: bool = False


@dataclass(frozen=True, slots=True)
class ElementPlace:
    """An element of an array object: ``base[index]``; ``base`` has an ``ArrayType``. ``position`` is the
    subscript's."""

    base: "PlaceExpr"
    index: "Expr"
    type: CType
    position: Position | None = None


@dataclass(frozen=True, slots=True)
class DerefPlace:
    """What a pointer points to: ``*p``. ``p[i]`` has ``PointerStep(p, i)`` as its pointer."""

    pointer: "Expr"
    type: CType
    position: Position | None = None


PlaceExpr: TypeAlias = VariablePlace | MemberPlace | ElementPlace | DerefPlace

# ---------------------------------------------------------------------------------------------------------- expressions


@dataclass(frozen=True, slots=True)
class Const:
    """An integer constant (also null pointers, with a ``PointerType``).

    ``position`` leads to its spelling; ``name`` is the enumerator's name where the parsed text had one.
    """

    value: int
    type: CType
    position: Position | None = None
    name: str | None = None


@dataclass(frozen=True, slots=True)
class FloatConst:
    """A floating constant."""

    value: float
    type: CType


@dataclass(frozen=True, slots=True)
class TextConst:
    """A string literal, without its final null; its type is an array of char."""

    text: str
    type: CType


@dataclass(frozen=True, slots=True)
class Load:
    """The value that a place holds now."""

    place: PlaceExpr
    type: CType
    position: Position | None = None


@dataclass(frozen=True, slots=True)
class AddressOf:
    """The address of a place: ``&x``, or an array that decays to a pointer to its first element."""

    place: PlaceExpr
    type: CType


@dataclass(frozen=True, slots=True)
class FunctionName:
    """A function as a value."""

    name: str
    type: CType


UnaryOp = Literal["-", "~", "!"]
BinaryOp = Literal["+", "-", "*", "/", "%", "<<", ">>", "&", "|", "^", "<", "<=", ">", ">=", "==", "!="]


@dataclass(frozen=True, slots=True)
class Unary:
    """A unary operator on a promoted operand; ``!`` gives ``int``."""

    op: UnaryOp
    operand: "Expr"
    type: CType


@dataclass(frozen=True, slots=True)
class Binary:
    """A binary operator. Comparisons give ``int``; their operands share one type (integers, reals or pointers)."""

    op: BinaryOp
    left: "Expr"
    right: "Expr"
    type: CType
    position: Position | None = None


@dataclass(frozen=True, slots=True)
class Cast:
    """A conversion of 6.3, implicit or written (``written``)."""

    operand: "Expr"
    type: CType
    written: bool = False


@dataclass(frozen=True, slots=True)
class PointerStep:
    """A pointer plus an integer number of elements (negative to step back; 6.5.6p8)."""

    pointer: "Expr"
    steps: "Expr"
    type: CType
    position: Position | None = None


@dataclass(frozen=True, slots=True)
class PointerDistance:
    """The difference of two pointers, in elements (6.5.6p9)."""

    left: "Expr"
    right: "Expr"
    type: CType


@dataclass(frozen=True, slots=True)
class Unknown:
    """A value that the C text does not settle here (a type never declared, an unsupported builtin); ``why`` says so."""

    type: CType
    why: str


Expr: TypeAlias = (
    Const
    | FloatConst
    | TextConst
    | Load
    | AddressOf
    | FunctionName
    | Unary
    | Binary
    | Cast
    | PointerStep
    | PointerDistance
    | Unknown
)

# ---------------------------------------------------------------------------------------------------------- statements


@dataclass(frozen=True, slots=True)
class Assign:
    """Store ``value`` in ``place``; their types are equal. ``initial`` marks an initialiser of an automatic
    variable."""

    place: PlaceExpr
    value: Expr
    position: Position
    initial: bool = False


@dataclass(frozen=True, slots=True)
class Call:
    """Call ``callee``; its result, if wanted, is stored in ``result`` (a temporary or a variable's place)."""

    callee: Expr
    arguments: tuple[Expr, ...]
    result: PlaceExpr | None
    position: Position


@dataclass(frozen=True, slots=True)
class Begin:
    """An automatic variable's life begins, its value indeterminate (6.2.4p6)."""

    variable: Variable
    position: Position


@dataclass(frozen=True, slots=True)
class Clobber:
    """Inline assembly or code that could not be given a meaning: ``places`` may have any value after it."""

    places: tuple[PlaceExpr, ...]
    why: str
    position: Position


Statement: TypeAlias = Assign | Call | Begin | Clobber


@dataclass(frozen=True, slots=True)
class Jump:
    """Go on at another block."""

    target: int


@dataclass(frozen=True, slots=True)
class Branch:
    """Go on at ``then`` if ``condition`` is not zero, else at ``otherwise``."""

    condition: Expr
    then: int
    otherwise: int
    position: Position


@dataclass(frozen=True, slots=True)
class CaseLabel:
    """A ``case``: the values from ``low`` to ``high`` (equal but for a case range), converted to the control's type.

    ``position`` is the keyword's, ``constant`` the position of the label's expression and ``name`` its enumerator.
    ``written`` is the value before conversion (a value that the control's type cannot hold never matches).
    """

    low: int
    high: int
    target: int
    position: Position
    constant: Position
    name: str | None = None
    written: int = 0


@dataclass(frozen=True, slots=True)
class FallThrough:
    """Control can run from the statement at ``source`` into the label at ``label``, which has statements before it."""

    source: Position
    label: Position


@dataclass(frozen=True, slots=True)
class SwitchSyntax:
    """What rules need of how a ``switch`` was written.

    ``falls`` are the places where a case runs on; ``unreached`` the first statements that no label leads to;
    ``default`` is the position of ``default:`` or None; ``nested_labels`` says that a label stands inside an inner
    statement (a loop or block), as in Duff's device or a coroutine; ``end`` is the last line of the body.
    """

    position: Position
    falls: tuple[FallThrough, ...]
    unreached: tuple[Position, ...]
    default: Position | None
    nested_labels: bool
    end: int


@dataclass(frozen=True, slots=True)
class Switch:
    """Go on at the case that holds ``value``, else at ``default`` (the block after the statement where none is
    written)."""

    value: Expr
    cases: tuple[CaseLabel, ...]
    default: int
    syntax: SwitchSyntax


@dataclass(frozen=True, slots=True)
class Return:
    """Leave the function."""

    value: Expr | None
    position: Position


@dataclass(frozen=True, slots=True)
class Stop:
    """Control does not come here or never goes on (after a function that does not return; an unknown computed jump)."""

    why: str


Terminator: TypeAlias = Jump | Branch | Switch | Return | Stop


@dataclass(frozen=True, slots=True)
class Block:
    """Statements in order, then the terminator."""

    statements: tuple[Statement, ...]
    terminator: Terminator


@dataclass(frozen=True, slots=True)
class Function:
    """A function body as a graph of blocks; ``blocks[0]`` is the entry.

    ``name`` is the C name, ``identity`` is ``name`` or ``file:name`` for a static one. ``variables`` are all that it
    names, its own and others. ``attributes`` are the words of ``read.types.Declaration``.
    """

    name: str
    identity: str
    type: FunctionType
    parameters: tuple[Variable, ...]
    variables: tuple[Variable, ...]
    blocks: tuple[Block, ...]
    position: Position
    end: int
    static: bool
    own: bool
    attributes: frozenset[str] = frozenset()


# ---------------------------------------------------------------------------------------------------------- a unit


@dataclass(frozen=True, slots=True)
class InitialValue:
    """What an object with static storage holds at start, scalar by scalar.

    ``path`` leads from the variable to the scalar: member names and element numbers. Scalars that are not listed are
    zero.
    """

    path: tuple[str | int, ...]
    value: Expr
    position: Position


@dataclass(frozen=True, slots=True)
class Object:
    """A variable with static storage that this unit defines, with its initialiser."""

    variable: Variable
    initial: tuple[InitialValue, ...]
    position: Position


@dataclass(frozen=True, slots=True, eq=False)
class TypeTable:
    """Structures and enumerations by identity, and the enumerators by name."""

    model: DataModel
    structs: Mapping[str, StructLayout] = field(default_factory=dict)
    enums: Mapping[str, Enumeration] = field(default_factory=dict)


@dataclass(frozen=True, slots=True, eq=False)
class TypedUnit:
    """A unit's meaning: its functions as IR, its objects with static storage, its types."""

    functions: tuple[Function, ...]
    objects: tuple[Object, ...]
    types: TypeTable
    notices: tuple[Notice, ...]
