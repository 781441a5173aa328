"""From whole C files to rings: preprocesses with the host compiler against the stand-in library headers."""

import subprocess
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from pycparser import c_ast, c_parser

import stepring.read
from stepring.gather.types import Unit
from stepring.meaning.models import MODELS
from stepring.meaning.types import DataModel, Function, Object, StructLayout
from stepring.meaning.unit import Meanings, lower_unit
from stepring.places import Origin, Position
from stepring.read.types import Declaration, ReadUnit
from stepring.shapes.rings import find_rings, ring_functions
from stepring.shapes.types import Program, Ring

STAND_IN = Path(stepring.read.__file__).parent / "stand_in"


def origin(position: Position) -> Origin:
    """A position as an origin: nothing is rewritten here."""
    column = max(1, position.column)
    return Origin(position.file, position.line, column, column + 1)


@dataclass(frozen=True, slots=True)
class Sources:
    """What the program stage takes."""

    functions: tuple[Function, ...]
    objects: tuple[Object, ...]
    structs: dict[str, StructLayout]
    model: DataModel

    def rings(self) -> tuple[Ring, ...]:
        """The rings of the sources."""
        return find_rings(self.functions, self.objects, self.structs, self.model, origin)

    def program(self) -> Program:
        """The sources as a program without machines."""
        return Program((), self.rings())


def read_files(paths: Sequence[Path], includes: Sequence[Path] = (), model: str = "LP64") -> Sources:
    """Preprocess, parse and lower C files; keep the functions that the unit stage keeps."""
    meanings = Meanings()
    functions: dict[str, Function] = {}
    objects: list[Object] = []
    structs: dict[str, StructLayout] = {}
    for path in paths:
        options = [f"-I{folder}" for folder in (*includes, STAND_IN)]
        done = subprocess.run(
            ["gcc", "-E", "-nostdinc", "-D__attribute__(x)=", *options, str(path)],
            capture_output=True,
            text=True,
            check=True,
        )
        ast: Any = c_parser.CParser().parse(done.stdout, str(path))
        declarations = []
        for number, node in enumerate(ast.ext):
            function = isinstance(node, c_ast.FuncDef)
            names = (node.decl.name,) if function else (getattr(node, "name", None) or "",)
            start = Position(node.coord.file, node.coord.line, 1) if node.coord else Position(str(path), 1, 1)
            key = f"{start.file}:{start.line}:{number}:{path}"
            declarations.append(
                Declaration(key, "function" if function else "other", names, True, start, (node,))  # type: ignore[arg-type]
            )
        unit = Unit(path, path.parent, "source")
        typed = lower_unit(
            ReadUnit(unit, tuple(declarations), {}, {}, (), (), origin, frozenset(), ()), MODELS[model], meanings
        )
        for kept in ring_functions(typed.functions):
            functions.setdefault(kept.identity, kept)
        objects.extend(typed.objects)
        structs.update(typed.types.structs)
    return Sources(tuple(functions.values()), tuple(objects), structs, MODELS[model])
