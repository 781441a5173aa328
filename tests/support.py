"""What several tests share: from a C text to a typed unit, without files or a preprocessor."""

from pathlib import Path

from pycparser import c_ast, c_parser

from stepring.gather.types import Unit
from stepring.meaning.models import MODELS
from stepring.meaning.types import Function, TypedUnit
from stepring.meaning.unit import Meanings, lower_unit
from stepring.places import Origin, Position
from stepring.read.types import Declaration, ReadUnit


def read_text(text: str, name: str = "feeder.c") -> ReadUnit:
    """A C text without directives, parsed as one unit."""
    ast = c_parser.CParser().parse(text, name)
    declarations = []
    for number, node in enumerate(ast.ext):
        kind = "function" if isinstance(node, c_ast.FuncDef) else "other"
        names = (node.decl.name,) if isinstance(node, c_ast.FuncDef) else (getattr(node, "name", None) or "",)
        start = Position(name, node.coord.line if node.coord else 1, 1)
        declarations.append(Declaration(f"{hash(text)}:{number}", kind, names, True, start, (node,)))  # type: ignore[arg-type]

    def origin(position: Position) -> Origin:
        return Origin(position.file, position.line, max(1, position.column), max(1, position.column) + 1)

    unit = Unit(Path("/barge") / name, Path("/barge"), "source")
    return ReadUnit(unit, tuple(declarations), {}, {}, (), (), origin, frozenset(), ())


def lower_text(text: str, model: str = "LP64", name: str = "feeder.c") -> TypedUnit:
    """The typed unit of a C text."""
    return lower_unit(read_text(text, name), MODELS[model], Meanings())


def lower_function_text(text: str, function: str, model: str = "LP64") -> Function:
    """One function of a C text as IR."""
    unit = lower_text(text, model)
    assert not unit.notices, unit.notices
    return next(item for item in unit.functions if item.name == function)
