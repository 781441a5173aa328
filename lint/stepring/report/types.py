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


@dataclass(frozen=True, slots=True, eq=False)
class Outcome:
    """A run's whole result; reported paths are relative to ``root``.

    ``models`` are the data models the units were read with. ``fail_level`` is what the project's settings say about the
    exit code, None where they say nothing.
    """

    root: Path
    rules: tuple[Rule, ...]
    program: Program
    obligations: tuple[Obligation, ...]
    notices: tuple[Notice, ...]
    coverage: Coverage
    models: tuple[str, ...]
    fail_level: str | None = None
