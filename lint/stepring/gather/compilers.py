"""Which program a database's compiler name stands for, and which are refused.

A compile database is data from outside, and the first word of an entry names a program to run. It runs only where that
program is one the user has already chosen: it is found on PATH under a compiler's name, or the user named it on the
command line. Never a program inside the inspected tree, also not by way of a symbolic link or of a PATH entry that lies
in the tree or is relative; never a program that is no compiler (an interpreter would run the source file).
"""

import os
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from stepring.gather.folders import is_inside
from stepring.places import Notice

# GNU-style C drivers: a target prefix, the driver, a version.
_COMPILER = re.compile(
    r"(?:[\w.+]+-)*(?:cc|gcc|clang|armclang|tiarmclang|c89|c99|g\+\+|c\+\+|clang\+\+)(?:-\d[\d.]*)?(?:\.exe)?",
    re.ASCII,
)
_MODELS = (
    (re.compile(r"avr-|msp430"), "IP16"),
    (re.compile(r"(?:x86_64|amd64|aarch64|riscv64|powerpc64|mips64).*mingw|.*w64.*"), "LLP64"),
    (re.compile(r"(?:x86_64|amd64|aarch64|riscv64|powerpc64|ppc64|mips64|s390x)"), "LP64"),
    (re.compile(r"arm|thumb|i[3-6]86|riscv32|xtensa|mips|powerpc|ppc|m68k|sh-|rx-|tiarmclang|avr32|xc32"), "ILP32"),
)


@dataclass(frozen=True, slots=True)
class Choice:
    """The program to run (absolute), or None; and what is to be said about it."""

    program: str | None
    notice: Notice | None = None


def names_compiler(program: str) -> bool:
    """Whether a program's name is that of a GNU-style C compiler driver."""
    return _COMPILER.fullmatch(_base(program)) is not None


def strip_launcher(arguments: Sequence[str]) -> Sequence[str]:
    """The arguments without a program in front that only launches the compiler (a compiler cache)."""
    if len(arguments) > 1 and not names_compiler(arguments[0]) and names_compiler(arguments[1]):
        return arguments[1:]
    return arguments


def compiles_cpp(program: str) -> bool:
    """Whether the driver's name is that of a C++ driver, which reads a ``.c`` file as C++."""
    return "++" in _base(program)


def data_model_of(program: str, options: Sequence[str]) -> str | None:
    """The data model that a compiler's name and options suggest, where it cannot be asked; None: nothing known."""
    if any(option.startswith("-mmcu=") for option in options):
        return "IP16"
    if "-m32" in options or "-mthumb" in options or any(option.startswith("-mcpu=cortex-m") for option in options):
        return "ILP32"
    name = _base(program)
    return next((model for pattern, model in _MODELS if pattern.match(name)), None)


def choose_compiler(
    name: str,
    directory: Path,
    tree: Sequence[Path],
    named: Sequence[str] = (),
    search_path: str | None = None,
) -> Choice:
    """The program that an entry's first word stands for.

    ``directory`` is the entry's, ``tree`` the folders under inspection, ``named`` the programs the user named,
    ``search_path`` stands for the environment's PATH.
    """
    base = _base(name)
    for program in named:
        if program == name or _base(program) == base:
            return _named(program, tree)
    if not names_compiler(name):
        text = (
            f"{name!r} is not the name of a compiler whose options are known; it is not run, and the built-in "
            "preprocessor is used. If it takes GNU-style options, name it with --compiler."
        )
        return Choice(None, Notice("refused-compiler", "warning", text))
    has_folder = "/" in name or os.sep in name
    if has_folder and is_inside(directory / name, tree):
        text = (
            f"compiler {name} lies inside the inspected tree and is not run; the built-in preprocessor is used. "
            "Install it outside of the tree and put it on PATH, or name it with --compiler."
        )
        return Choice(None, Notice("refused-compiler", "warning", text))
    found = _on_path(base, tree, search_path)
    if found is None:
        text = (
            f"compiler {name} is not on PATH; the built-in preprocessor is used. "
            "Put it on PATH, or name it with --compiler."
        )
        return Choice(None, Notice("missing-compiler", "warning", text))
    if has_folder and not _same(directory / name, found):
        text = f"compiler {name} is not the one on PATH; {found} is used instead (or name one with --compiler)."
        return Choice(found, Notice("missing-compiler", "note", text))
    return Choice(found)


def choose_named(named: Sequence[str], tree: Sequence[Path]) -> Choice:
    """The first program the user named, for sources that no database describes."""
    return _named(named[0], tree) if named else Choice(None)


def _named(program: str, tree: Sequence[Path]) -> Choice:
    if not Path(program).is_absolute():
        found = _on_path(program, tree, None) if "/" not in program and os.sep not in program else None
        if found is not None:
            return Choice(found)
        text = f"--compiler {program} is neither an absolute path nor on PATH; the built-in preprocessor is used."
        return Choice(None, Notice("missing-compiler", "warning", text))
    if is_inside(program, tree):
        text = (
            f"--compiler {program} lies inside the inspected tree and is not run; the built-in preprocessor is used. "
            "Install it outside of the tree."
        )
        return Choice(None, Notice("refused-compiler", "warning", text))
    if not _is_program(program):
        text = f"--compiler {program} is not a program that can be run; the built-in preprocessor is used."
        return Choice(None, Notice("missing-compiler", "warning", text))
    return Choice(program)


def _on_path(base: str, tree: Sequence[Path], search_path: str | None) -> str | None:
    """A program by name on PATH; one whose resolved name is a compiler's is preferred over a launcher's link."""
    path = os.environ.get("PATH", os.defpath) if search_path is None else search_path
    endings = ("", ".exe") if os.name == "nt" and not base.endswith(".exe") else ("",)
    launcher: str | None = None
    for folder in path.split(os.pathsep):
        if not folder or not Path(folder).is_absolute():
            continue
        for ending in endings:
            program = f"{folder}/{base}{ending}"
            if not _is_program(program) or is_inside(folder, tree) or is_inside(program, tree):
                continue
            if names_compiler(os.path.realpath(program)):
                return program
            launcher = launcher or program
    return launcher


def _is_program(program: str) -> bool:
    return Path(program).is_file() and os.access(program, os.X_OK)


def _same(left: Path, right: str) -> bool:
    return os.path.realpath(left) == os.path.realpath(right)


def _base(program: str) -> str:
    return program.replace("\\", "/").rsplit("/", 1)[-1]
