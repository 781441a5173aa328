"""Which file an include means: beside the includer, then the unit's folders, then the stand-in library."""

import os
from functools import lru_cache
from pathlib import Path

from stepring.gather.tree import STANDARD_HEADERS
from stepring.read.builtin_state import Frame, State

STAND_IN = Path(__file__).parent / "stand_in"


def find_header(state: State, name: str, beside: Frame | None, start: int) -> tuple[str, int] | None:
    """A header's place, asked once a unit for each folder that includes it; see ``_search``."""
    home = beside.file.path.rpartition("/")[0] if beside is not None else None
    key = (name, home, start)
    if key not in state.found:
        state.found[key] = _search(state, name, home, start)
    return state.found[key]


def _search(state: State, name: str, home: str | None, start: int) -> tuple[str, int] | None:
    """A header's path and the index of the folder it was found in (-1: beside the includer).

    A standard header in angle brackets is the stand-in's where the include folders were only inferred. Where the name
    as written is not found, backslashes count as slashes and letter case is ignored, as on systems that allow both.
    """
    if name.startswith("/"):
        return (name, -1) if _is_file(name) else None
    if home is None and start <= 0 and name in STANDARD_HEADERS and state.unit.kind == "source":
        stand_in = f"{state.folders[-1]}/{name}"
        if len(state.folders) == len(state.unit.include_folders) + 1 and _is_file(stand_in):
            return stand_in, len(state.folders) - 1
    for exact in (True, False):
        plain = name if exact else name.replace("\\", "/")
        beside = _resolved(home, plain, exact=exact) if home is not None else None
        if beside is not None:
            return beside, -1
        for index in range(max(start, 0), len(state.folders)):
            path = _resolved(state.folders[index], plain, exact=exact)
            if path is not None:
                return path, index
        if name in state.not_found:
            return None
    if start <= 0:
        state.not_found.add(name)
    return None


def _resolved(folder: str, name: str, *, exact: bool) -> str | None:
    path = f"{folder}/{name}"
    if exact:
        return _normal(path) if _is_file(path) else None
    for part in name.split("/"):
        if part in ("", "."):
            continue
        if part == "..":
            folder = folder.rpartition("/")[0]
            continue
        actual = _members(folder, _changed(folder)).get(part.lower())
        if actual is None:
            return None
        folder = f"{folder}/{actual}"
    return folder if _is_file(folder) else None


@lru_cache(maxsize=4096)
def _members(folder: str, _changed: int) -> dict[str, str]:
    """A folder's members by their names in lower case."""
    try:
        return {path.name.lower(): path.name for path in sorted(Path(folder).iterdir(), reverse=True)}
    except OSError:
        return {}


def _changed(folder: str) -> int:
    try:
        return Path(folder).stat().st_mtime_ns
    except OSError:
        return 0


def _is_file(path: str) -> bool:
    try:
        return os.path.isfile(path)  # noqa: PTH113 (asked thousands of times a unit)
    except ValueError:
        return False


def _normal(path: str) -> str:
    """The path without ``.`` and ``..``, unless a symbolic link makes that another file."""
    if "/." not in path and "//" not in path:
        return path
    parts: list[str] = []
    for part in path.split("/"):
        if part == ".." and parts and parts[-1] not in ("", ".."):
            parts.pop()
        elif part not in (".", "") or not parts:
            parts.append(part)
    plain = "/".join(parts)
    try:
        return plain if Path(plain).samefile(path) else path
    except OSError:
        return path


def say_missing(state: State, name: str, file: str | None, line: int | None) -> None:
    text = f"header {name} was not found; what it declares is guessed."
    state.say("missing-header", "note", text, file, line)
    state.complete = False
