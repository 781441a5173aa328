"""What reading gives: parsed declarations, macros, and the way back to the original source.

GNU C and vendor dialect that ISO C has no syntax for reaches the parser in a few reserved spellings; the next stage
(``meaning``) gives them their meaning:

===============================  ==========================================================================
source                           parsed as
===============================  ==========================================================================
``case A ... B:``, ``[A ... B]``  a call ``__stepring_range(A, B)``
``a ?: b``                       ``a ? __stepring_same : b``
``typeof (x)``, ``__auto_type``  a type name ``__stepring_typeof_N`` whose operand stands in ``typeofs``
``&&label`` (a label's address)  a call ``__stepring_label(label)``
``goto *p;``                     a call statement ``__stepring_goto(p);``
``asm (...)`` as a statement     a call ``__stepring_asm(lvalue, ...)`` whose arguments are the output operands
``va_arg(ap, T)``                ``(*(T *)__stepring_va_arg(ap))``
``types_compatible_p(T, U)``     a call ``__stepring_same_type(sizeof(T), sizeof(U))``
``__builtin_choose_expr``        a call ``__stepring_choose(c, a, b)``
``({ ... })``                    a statement expression (pycparser's own ``Compound`` as expression)
===============================  ==========================================================================
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from typing import Any, Literal

from stepring.gather.types import Unit
from stepring.places import Notice, Origin, Position
from stepring.read.source import SourceFile


@dataclass(frozen=True, slots=True)
class Preprocessed:
    """A unit's text after preprocessing.

    ``text`` holds GNU line markers (``# LINE "FILE" FLAGS``, files absolute) and keeps ``#define`` and ``#undef``
    lines in place.
    ``predefined`` maps the compiler's predefined macro names to their texts; empty where no compiler ran.
    ``complete`` is False where something (a header, a macro) was missing and had to be guessed.
    """

    unit: Unit
    text: str
    predefined: Mapping[str, str]
    complete: bool
    notices: tuple[Notice, ...] = ()


@dataclass(frozen=True, slots=True)
class Macro:
    """A ``#define``: ``parameters`` is None for an object-like macro; ``body`` is its replacement text."""

    name: str
    parameters: tuple[str, ...] | None
    body: str
    file: str
    line: int


@dataclass(frozen=True, slots=True, eq=False)
class Declaration:
    """One top-level declaration, parsed once for the whole run however many units contain it.

    ``key`` is the same for the same text at the same place. ``nodes`` are pycparser nodes (``c_ast.FuncDef``,
    ``c_ast.Decl``,
    ``c_ast.Typedef``, ``c_ast.Pragma``…) whose coordinates are those of a ``Position``. ``typeofs`` maps each
    ``__stepring_typeof_N`` to its operand: an expression node or a ``c_ast.Typename``. ``attributes`` are the attribute
    words met in the declaration without underscores (``noreturn``, ``interrupt``, ``signal``, ``packed``, …), vendor
    keywords of the same sense included (``__irq`` gives ``interrupt``).
    """

    key: str
    kind: Literal["function", "other"]
    names: tuple[str, ...]
    own: bool
    start: Position
    nodes: tuple[Any, ...]
    typeofs: Mapping[str, Any] = field(default_factory=dict)
    attributes: frozenset[str] = frozenset()


@dataclass(frozen=True, slots=True)
class FunctionPlace:
    """A function defined in the project's own files, read or not."""

    name: str
    file: str
    line: int
    read: bool


def _no_source(file: str) -> SourceFile | None:
    """The source of a text that is in no file."""
    return None


@dataclass(frozen=True, slots=True, eq=False)
class ReadUnit:
    """A unit after reading.

    ``declarations`` are in source order and hold at least all that the unit's own function definitions need.
    ``predefined`` are the compiler's predefined macros (empty where no compiler ran). ``inferred_types`` are type
    names that had no declaration. ``origin`` leads back to the original source: from a token's position in parsed
    text to the place and spelling a person sees; it never fails (a position that cannot be refined gives the line's
    first character).
    ``marked_falls`` are the (file, line) of statements or comments that mark a fall-through on purpose.
    ``source`` gives an original file's tokens, None where it cannot be read.
    """

    unit: Unit
    declarations: tuple[Declaration, ...]
    macros: Mapping[str, Macro]
    predefined: Mapping[str, str]
    functions: tuple[FunctionPlace, ...]
    inferred_types: tuple[str, ...]
    origin: Callable[[Position], Origin]
    marked_falls: frozenset[tuple[str, int]]
    notices: tuple[Notice, ...]
    source: Callable[[str], SourceFile | None] = _no_source
