"""What gathering gives: the translation units, and what was found about the tree around them."""

from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from stepring.places import Notice

UnitKind = Literal["database", "source", "preprocessed"]


@dataclass(frozen=True, slots=True)
class Unit:
    """One translation unit.

    ``source`` and ``directory`` are absolute. ``arguments`` are the compiler's, with the compiler first, reduced to those that
    only read (see ``gather.options``); empty where no compiler is known. ``include_folders`` are absolute and serve
    the built-in preprocessor, ``defines`` are its ``NAME=VALUE`` texts.
    """

    source: Path
    directory: Path
    kind: UnitKind
    arguments: tuple[str, ...] = ()
    include_folders: tuple[Path, ...] = ()
    defines: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Gathered:
    """All units of a run in a fixed order, the folder that reported paths are relative to, and notices."""

    root: Path
    units: tuple[Unit, ...]
    notices: tuple[Notice, ...] = ()
