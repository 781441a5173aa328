"""A JSON Compilation Database: found where build systems put it, read entry by entry.

The format: a list of objects with ``directory``, ``file`` and either ``arguments`` (a list) or ``command`` (a string).
A mistake costs the entry that has it; only a file that is no JSON list gives nothing.
"""

import json
import os
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

from stepring.gather.folders import joined
from stepring.gather.options import split_command
from stepring.gather.text import reason
from stepring.places import Notice

DATABASE_NAME = "compile_commands.json"
BUILD_FOLDERS = ("build", "Build", "out", "builddir", "_build", ".build", "bin", "cmake-build-*", "build-*", "build_*")
_C_SUFFIXES = (".c", ".i")


@dataclass(frozen=True, slots=True)
class Entry:
    """One entry: ``source`` and ``directory`` absolute, ``arguments`` with the compiler first."""

    source: Path
    directory: Path
    arguments: tuple[str, ...]


def find_database(folder: Path) -> Path | None:
    """The database of a folder: in it, in its build folders, else in the parents up to the one that holds ``.git``."""
    for place in (folder, *folder.parents):
        found = next(_databases_of(place), None)
        if found is not None:
            return found
        if (place / ".git").exists() or place == Path.home():
            return None
        if not any((parent / ".git").exists() for parent in place.parents):
            return None
    return None


def _databases_of(folder: Path) -> Iterator[Path]:
    """Databases of one folder: its own, those of its build folders, those one level deeper, sorted."""
    yield from _existing([folder / DATABASE_NAME])
    builds = sorted({build for name in BUILD_FOLDERS for build in _folders(folder, name)}, key=_build_order)
    yield from _existing(build / DATABASE_NAME for build in builds)
    yield from _existing(below / DATABASE_NAME for build in builds for below in _folders(build, "*"))


def _build_order(build: Path) -> tuple[int, str]:
    name = build.name
    return (BUILD_FOLDERS.index(name) if name in BUILD_FOLDERS else len(BUILD_FOLDERS), name)


def _folders(folder: Path, name: str) -> list[Path]:
    try:
        return sorted(path for path in folder.glob(name) if path.is_dir())
    except OSError:
        return []


def _existing(paths: Iterable[Path]) -> Iterator[Path]:
    for path in paths:
        try:
            if path.is_file():
                yield path
        except OSError:
            continue


def read_database(path: Path) -> tuple[list[Entry], list[Notice]]:
    """The entries of a database in its order, those for sources that are not C left out; and its mistakes."""

    def fault(sentence: str, line: int | None = None, column: int | None = None) -> Notice:
        place = f"{path}, line {line}" if line else f"{path}"
        return Notice("bad-database", "error", f"{place}: {sentence}", str(path), line, column)

    try:
        data = json.loads(path.read_bytes().decode("utf-8-sig"))
    except json.JSONDecodeError as error:
        message = error.msg[:1].lower() + error.msg[1:]
        return [], [fault(f"the compile database is not JSON: {message}.", error.lineno, error.colno)]
    except UnicodeDecodeError as error:
        line = error.object.count(b"\n", 0, error.start) + 1
        return [], [fault("the compile database is not UTF-8.", line)]
    except RecursionError:
        return [], [fault("the compile database is nested too deeply.")]
    except (OSError, ValueError) as error:
        return [], [fault(f"the compile database cannot be read: {reason(error)}.")]
    if not isinstance(data, list):
        return [], [fault("a compile database has to be a list of entries.", 1)]
    if not data:
        return [], [fault("the compile database is empty.", 1)]
    entries: list[Entry] = []
    notices: list[Notice] = []
    for number, member in enumerate(data, 1):
        read = _entry(member, path.parent)
        if isinstance(read, str):
            text = f"{path}, entry {number}: {read}; it was left out."
            notices.append(Notice("bad-database", "warning", text, str(path)))
        elif read is not None:
            entries.append(read)
    return entries, notices


def _entry(member: object, base: Path) -> Entry | str | None:
    """An entry, what is wrong with it, or None where it is sound and not about C."""
    if not isinstance(member, dict):
        return "an entry has to be an object"
    file, directory = member.get("file"), member.get("directory")
    if not isinstance(file, str) or not file:
        return "it names no file"
    if not isinstance(directory, str) or not directory:
        return "it names no directory"
    arguments, command = member.get("arguments"), member.get("command")
    if isinstance(arguments, list) and arguments and all(isinstance(word, str) for word in arguments):
        words = list(arguments)
    elif isinstance(command, str) and command.strip():
        words = split_command(command)
    else:
        return "it has neither arguments nor a command"
    if not all(_can_be_passed(word) for word in (file, directory, *words)):
        return "it holds a character that no path or argument can have"
    if not file.endswith(_C_SUFFIXES) and not _says(words, "c"):
        return None
    if _says(words, "c++"):
        return None
    folder = joined(base, directory)
    return Entry(joined(folder, file), folder, tuple(words))


def _says(words: list[str], language: str) -> bool:
    """Whether ``-x`` names a language."""
    return f"-x{language}" in words or any(pair == ("-x", language) for pair in pairwise(words))


def _can_be_passed(word: str) -> bool:
    if "\0" in word:
        return False
    try:
        os.fsencode(word)
    except UnicodeEncodeError:
        return False
    return True
