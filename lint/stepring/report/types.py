"""What a report is made from: everything one run found out."""

from dataclasses import dataclass
from pathlib import Path

from stepring.places import Notice
from stepring.rule import Obligation, Rule
from stepring.shapes.types import Program


@dataclass(frozen=True, slots=True)
class Coverage:
    """How much was read: units, and functions defined in the project's own files."""

    units_total: int
    units_read: int
    functions_total: int
    functions_read: int


@dataclass(frozen=True, slots=True)
class Inspection:
    """What an inspection was asked for, so that its log is enough to read the same units again.

    All paths are relative to the root. ``paths`` are those named (none: the folder ``folder``, where it was started);
    ``compile_commands`` is a database that was named, ``data_model`` a model. ``compilers`` are the names of those that
    were allowed, without folders; ``use_compiler`` is False where none was to be run.
    """

    folder: str = "."
    paths: tuple[str, ...] = ()
    compile_commands: str | None = None
    data_model: str | None = None
    compilers: tuple[str, ...] = ()
    use_compiler: bool = True


@dataclass(frozen=True, slots=True, eq=False)
class Outcome:
    """A run's whole result; reported paths are relative to ``root``.

    ``models`` are the data models the units were read with. ``fail_level`` is what the project's settings say about the
    exit code, None where they say nothing. ``inspection`` is what was asked for.
    """

    root: Path
    rules: tuple[Rule, ...]
    program: Program
    obligations: tuple[Obligation, ...]
    notices: tuple[Notice, ...]
    coverage: Coverage
    models: tuple[str, ...]
    fail_level: str | None = None
    inspection: Inspection = Inspection()
