"""``stepring.toml``: what a project fixes once for all its runs.

The file lies in the inspected tree, so it is data from outside: it can leave files out and choose among answers, and it
can never name a program. TOML 1.0, read with the standard library.
"""

import re
import tomllib
from collections.abc import Callable, Collection
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from stepring.gather.text import reason
from stepring.places import Notice

SETTINGS_NAME = "stepring.toml"
FAIL_LEVELS = ("error", "warning", "note", "none")
_TABLE = "inspect"


@dataclass(frozen=True, slots=True)
class Settings:
    """The settings of a run; the command line comes before them.

    ``exclude`` are globs of paths relative to ``folder``, ``compile_commands`` is absolute, ``folder`` is where the
    settings file lies (None: there is none).
    """

    exclude: tuple[str, ...] = ()
    data_model: str | None = None
    compile_commands: Path | None = None
    fail_level: str | None = None
    folder: Path | None = None


def find_settings(start: Path) -> Path | None:
    """The nearest ``stepring.toml`` from ``start`` up to the folder that holds ``.git`` (or ``start`` alone)."""
    start = start if start.is_dir() else start.parent
    found = None
    for folder in (start, *start.parents):
        if found is None and (folder / SETTINGS_NAME).is_file():
            found = folder / SETTINGS_NAME
        if (folder / ".git").exists():
            return found
    return start / SETTINGS_NAME if (start / SETTINGS_NAME).is_file() else None


def read_settings(path: Path, models: Collection[str] = ()) -> tuple[Settings, tuple[Notice, ...]]:
    """The settings of a file; each mistake gives a notice with its line, and the rest counts.

    ``models`` are the names of the data models there are (none: any name is taken).
    """
    try:
        text = path.read_bytes().decode("utf-8-sig")
        table = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        found = re.search(r" \(at line (\d+), column (\d+)\)$", str(error))
        sentence = str(error)[: found.start()] if found else re.sub(r" \(at end of document\)$", "", str(error))
        line = int(found[1]) if found else text.count("\n") + 1
        column = int(found[2]) if found else None
        said = f"{path}, line {line}: {sentence[:1].lower() + sentence[1:]}; none of its settings are used."
        return Settings(), (Notice("bad-settings", "error", said, str(path), line, column),)
    except UnicodeDecodeError as error:
        line = error.object.count(b"\n", 0, error.start) + 1
        said = f"{path}, line {line}: a settings file has to be UTF-8; none of its settings are used."
        return Settings(), (Notice("bad-settings", "error", said, str(path), line),)
    except (OSError, ValueError, RecursionError) as error:
        said = f"{path} cannot be read: {reason(error)}; none of its settings are used."
        return Settings(), (Notice("bad-settings", "error", said, str(path)),)
    notices: list[Notice] = []

    def complain(key: str, sentence: str) -> None:
        line = _line_of(text, key)
        notices.append(Notice("bad-settings", "error", f"{path}, line {line}: {sentence}", str(path), line))

    for key in table:
        if key != _TABLE:
            complain(key, f"{key!r} is not known; the settings stand in [{_TABLE}].")
    inspect = table.get(_TABLE, {})
    if not isinstance(inspect, dict):
        complain(_TABLE, f"[{_TABLE}] has to be a table.")
        inspect = {}
    values: dict[str, Any] = {}
    for key, value in inspect.items():
        if key not in _KEYS:
            complain(key, f"{key!r} is not known; known are {', '.join(sorted(_KEYS))}.")
            continue
        test, form = _KEYS[key]
        if not test(value):
            complain(key, f"{key} has to be {form}.")
            continue
        if key == "data-model" and models and value not in models:
            complain(key, f"{key} has to be one of {', '.join(sorted(models))}.")
            continue
        values[key] = value
    database = values.get("compile-commands")
    settings = Settings(
        exclude=tuple(values.get("exclude", ())),
        data_model=values.get("data-model"),
        compile_commands=path.parent / database if database else None,
        fail_level=values.get("fail-level"),
        folder=path.parent,
    )
    return settings, tuple(notices)


def _is_text(value: object) -> bool:
    return isinstance(value, str) and value != ""


def _is_text_list(value: object) -> bool:
    return isinstance(value, list) and all(isinstance(member, str) for member in value)


_KEYS: dict[str, tuple[Callable[[Any], bool], str]] = {
    "exclude": (_is_text_list, "a list of globs"),
    "data-model": (_is_text, "the name of a data model"),
    "compile-commands": (_is_text, "the path of a compile database"),
    "fail-level": (lambda value: value in FAIL_LEVELS, f"one of {', '.join(FAIL_LEVELS)}"),
}


def _line_of(text: str, key: str) -> int:
    """The line on which a key or table is written (a repeated name gives its first line)."""
    word = re.escape(key)
    found = re.search(rf"^[ \t]*\[*[ \t\w.\-]*[\"']?{word}[\"']?[ \t]*[=\].]", text, re.MULTILINE)
    return text.count("\n", 0, found.start()) + 1 if found else 1
