"""Line markers: what they look like, and making the files they name absolute.

GNU form: ``# LINE "FILE" FLAGS``; in flags 1 means that a file begins, 2 that it is returned to, 3 that it is a system
header. ``#line LINE "FILE"`` is the same in ISO C (N1570 6.10.4). Inside the quotes a backslash escapes what follows.
Texts in angle brackets (``<built-in>``, ``<command-line>``) are no files.
"""

import os
import re
from collections.abc import Callable, Mapping
from functools import lru_cache
from pathlib import Path

_MARKER = re.compile(r'^[ \t]*#[ \t]*(?:line[ \t]+)?(\d+)[ \t]+"((?:[^"\\\n]|\\.)*)"([^\n]*)$', re.MULTILINE)
_BUILT_IN = re.compile(
    r'\A(?:# \d+ "[^"\n]*"[^\n]*\n)?((?:# \d+ "<(?:built-in|built in)>"[^\n]*\n|#define [^\n]*\n|#undef [^\n]*\n|\n)+)'
)
_DEFINE = re.compile(r"^#define[ \t]+(\w+(?:\([^)\n]*\))?)[ \t]*([^\n]*)$|^#undef[ \t]+(\w+)", re.MULTILINE)


def marker(line: int, file: str, flags: str = "") -> str:
    """One line marker with its newline."""
    name = file.replace("\\", "\\\\").replace('"', '\\"')
    return f'# {line} "{name}" {flags}\n' if flags else f'# {line} "{name}"\n'


def has_markers(text: str) -> bool:
    """Whether a text holds a line marker that names a file."""
    return _MARKER.search(text) is not None


def absolute_markers(text: str, place: Callable[[str], str]) -> str:
    """The text with every marker in GNU form and its file as ``place`` gives it; each name is asked about once."""
    known: dict[str, str] = {}

    def rewrite(found: re.Match[str]) -> str:
        line, name, flags = found.groups()
        absolute = known.get(name)
        if absolute is None:
            plain = re.sub(r"\\(.)", r"\1", name) if "\\" in name else name
            absolute = plain if _is_no_file(plain) else place(plain)
            absolute = absolute.replace("\\", "\\\\").replace('"', '\\"')
            known[name] = absolute
        return f'# {line} "{absolute}"{flags}'

    return _MARKER.sub(rewrite, text)


def under(directory: Path) -> Callable[[str], str]:
    """For ``absolute_markers``: relative names count from a folder; ``.`` and ``..`` are taken out."""
    return lambda name: _plain(str(directory), name)


def under_nearest(directory: Path) -> Callable[[str], str]:
    """The same where the folder of the build is not known: the first folder from ``directory`` up that has the file."""

    def place(name: str) -> str:
        for folder in (directory, *directory.parents):
            candidate = _plain(str(folder), name)
            if Path(candidate).is_file():
                return candidate
        return _plain(str(directory), name)

    return place


def split_predefined(text: str) -> tuple[Mapping[str, str], str]:
    """The compiler's predefined macros, and the text without the part that gives them.

    They stand in front, under markers of ``<built-in>``; everything up to the first marker of another kind is theirs.
    """
    found = _BUILT_IN.match(text)
    if found is None:
        return {}, text
    return macros_of(found[1]), text[found.end() :]


@lru_cache(maxsize=64)
def macros_of(text: str) -> Mapping[str, str]:
    """The macros that a text's ``#define`` and ``#undef`` lines leave behind, by name (with its parameters)."""
    macros: dict[str, str] = {}
    for name, body, undefined in _DEFINE.findall(text):
        if undefined:
            macros.pop(undefined, None)
        else:
            macros[name] = body.strip()
    return macros


def _is_no_file(name: str) -> bool:
    return name.startswith("<") and name.endswith(">")


@lru_cache(maxsize=65536)
def _plain(directory: str, name: str) -> str:
    whole = f"{directory}/{name}" if not name.startswith("/") and not re.match(r"[A-Za-z]:[\\/]", name) else name
    plain = os.path.normpath(whole)
    if ".." in whole and not _same(plain, whole):
        return whole
    return plain


def _same(left: str, right: str) -> bool:
    return os.path.realpath(left) == os.path.realpath(right)
