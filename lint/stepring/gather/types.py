"""What gathering gives: the translation units, and what was found about the tree around them."""

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from stepring.places import Notice

UnitKind = Literal["database", "source", "preprocessed"]


@dataclass(frozen=True, slots=True)
class Unit:
    """One translation unit.

    ``source`` and ``directory`` are absolute. ``arguments`` are the compiler's, with the compiler first, reduced to
    those that only read (see ``gather.options``); empty where no compiler is known. ``include_folders`` are absolute
    and serve the built-in preprocessor, ``defines`` are its ``NAME=VALUE`` texts. ``included`` and ``macro_files``
    are files that the compiler's ``-include`` and ``-imacros`` name: read before the source, the latter for their
    macros alone.
    ``data_model`` is what the compiler's name or the headers suggest (``IP16``, ``ILP32``, ``LP64``, ``LLP64``); it
    counts only where no compiler can be asked and the user names none.
    """

    source: Path
    directory: Path
    kind: UnitKind
    arguments: tuple[str, ...] = ()
    include_folders: tuple[Path, ...] = ()
    defines: tuple[str, ...] = ()
    included: tuple[Path, ...] = ()
    macro_files: tuple[Path, ...] = ()
    data_model: str | None = None


@dataclass(frozen=True, slots=True)
class Gathered:
    """All units of a run in a fixed order, the folder that reported paths are relative to, and notices."""

    root: Path
    units: tuple[Unit, ...]
    notices: tuple[Notice, ...] = ()
