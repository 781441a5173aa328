"""A folder of C without a database: its sources, and for each the include folders that make its includes resolve.

The idea: an ``#include "a/b.h"`` says the end of a path. Every header of the tree whose path ends so is a candidate,
and the rest of its path is the include folder that the lost build must have had. Of several candidates the one whose
folder is nearest to the source is taken (steps up and down the tree), which is how people lay out trees with variants.

One walk of the tree, each file read once, and every answer kept for the folder that asked.
"""

import os
import posixpath
import re
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass, field
from fnmatch import fnmatch
from functools import lru_cache
from pathlib import Path

from stepring.gather.text import is_text, not_text, read_bytes, reason
from stepring.places import Notice

HEADER_SUFFIXES = frozenset((".h", ".H", ".hh", ".hpp", ".inc", ".inl", ".def", ".tbl", ".c", ".C", ".x", ".cfg"))
_BUILD_NAMES = ("build", "Build", "out", "builddir", "_build", "cmake-build-*", "CMakeFiles", "node_modules")
_BUILD_MARKS = frozenset(("CMakeCache.txt", "build.ninja", ".ninja_log", "pyvenv.cfg"))
_INCLUDE = re.compile(rb'^[ \t]*#[ \t]*(?:include|include_next|import)[ \t]*(?:"([^"\n]+)"|<([^>\n]+)>)', re.MULTILINE)
# ISO C N1570 7.1.2p2: an angle include of these never means the tree.
_STANDARD = """assert complex ctype errno fenv float inttypes iso646 limits locale math setjmp signal stdalign stdarg
    stdatomic stdbool stddef stdint stdio stdlib stdnoreturn string tgmath threads time uchar wchar wctype"""
STANDARD_HEADERS = frozenset(f"{name}.h" for name in _STANDARD.split())

# Steps from a source to an include folder from which on nearness alone says little.
_FAR = 4


@lru_cache(maxsize=1)
def _library() -> frozenset[str]:
    """The names of the stand-in library's headers."""
    folder = Path(__file__).parent.parent / "read" / "stand_in"
    return STANDARD_HEADERS | {path.relative_to(folder).as_posix() for path in folder.rglob("*.h")}


@dataclass(slots=True)
class Tree:
    """The files of a tree by their path relative to ``base`` (with ``/``), and what was asked about them so far."""

    base: Path
    sources: list[str] = field(default_factory=list)
    notices: list[Notice] = field(default_factory=list)
    _files: set[str] = field(default_factory=set)
    _folders: set[str] = field(default_factory=set)
    _by_name: dict[str, list[str]] = field(default_factory=dict)
    _includes: dict[str, tuple[tuple[str, bool], ...]] = field(default_factory=dict)
    _found: dict[tuple[str, str, bool], tuple[str, str] | None] = field(default_factory=dict)
    _candidates: dict[str, tuple[tuple[str, str], ...]] = field(default_factory=dict)
    _steps: dict[tuple[str, str], int] = field(default_factory=dict)
    _unknown: dict[tuple[str, int], int] = field(default_factory=dict)
    _closures: dict[str, frozenset[str]] = field(default_factory=dict)

    def add(self, path: str) -> None:
        """Make a file known (its suffix decides whether it can be included)."""
        self._files.add(path)
        self._folders.add(path.rpartition("/")[0])
        self._by_name.setdefault(path.rpartition("/")[2].lower(), []).append(path)

    def files(self) -> list[str]:
        """All files of the tree, sorted."""
        return sorted(self._files)

    def data_model(self, source: str) -> str | None:
        """The data model that a source's includes suggest: the AVR and MSP430 libraries mean a 16-bit ``int``."""
        for file in self._closures.get(source, (source,)):
            if any(text.startswith(("avr/", "util/delay", "msp430")) for text, _ in self.includes(file)):
                return "IP16"
        return None

    def include_folders(self, source: str) -> tuple[Path, ...]:
        """The include folders that a source needs, nearest first; absolute.

        ``source`` is relative to ``base``. Headers that are not in the tree give no folder.
        """
        home = source.rpartition("/")[0]
        folders: set[str] = set()
        seen = {source}
        waiting = [source]
        while waiting:
            file = waiting.pop()
            folder = file.rpartition("/")[0]
            for text, quoted in self.includes(file):
                target = self._beside(folder, text) if quoted else None
                if target is None:
                    nearest = self._nearest(home, text, quoted)
                    if nearest is None:
                        continue
                    found_in, target = nearest
                    folders.add(found_in)
                if target not in seen:
                    seen.add(target)
                    waiting.append(target)
        self._closures[source] = frozenset(seen)
        ordered = sorted(folders, key=lambda folder: (self._distance(home, folder), folder))
        return tuple(self.base / folder for folder in ordered)

    def includes(self, file: str) -> tuple[tuple[str, bool], ...]:
        """What a file includes: the text between the delimiters, and whether they are quotes."""
        known = self._includes.get(file)
        if known is None:
            data = read_bytes(self.base / file)
            known = ()
            if isinstance(data, bytes):
                known = tuple(
                    ((quoted or angled).decode("latin-1").strip().replace("\\", "/"), bool(quoted))
                    for quoted, angled in dict.fromkeys(_INCLUDE.findall(data))
                )
            self._includes[file] = known
        return known

    def _beside(self, folder: str, text: str) -> str | None:
        path = f"{folder}/{text}" if folder else text
        if path in self._files:
            return path
        path = posixpath.normpath(path) if "." in text[:-2] else path
        return path if path in self._files else None

    def _nearest(self, home: str, text: str, quoted: bool) -> tuple[str, str] | None:
        """What an include means to a source in ``home``: the nearest candidate's include folder and path.

        A standard header in angle brackets never means the tree, another library's only where it is near.
        """
        key = (home, text, quoted)
        if key in self._found:
            return self._found[key]
        candidates = self._candidates_for(text) if quoted or text not in STANDARD_HEADERS else ()
        ranked = sorted((self._distance(home, folder), folder.count("/"), path, folder) for folder, path in candidates)
        if len(ranked) > 1 and ranked[0][0] >= _FAR:
            # No candidate is near: of those about as far, the one whose own includes can be found.
            near = [rank for rank in ranked if rank[0] <= ranked[0][0] + 1]
            ranked = sorted(near, key=lambda rank: (self._unknown_includes(rank[2]), rank))
        found = (ranked[0][3], ranked[0][2]) if ranked else None
        if found is not None and not quoted and ranked[0][0] >= _FAR and text in _library():
            found = None
        self._found[key] = found
        return found

    def _candidates_for(self, text: str) -> tuple[tuple[str, str], ...]:
        """The include folders and paths under which an include's text can be found, wherever it is asked."""
        known = self._candidates.get(text)
        if known is None:
            plain = posixpath.normpath(text)
            while plain.startswith("../"):
                plain = plain[3:]
            ending = "/" + plain.lower()
            paths = self._by_name.get(plain.rpartition("/")[2].lower(), ())
            matching = [path for path in paths if ("/" + path.lower()).endswith(ending)]
            known = self._candidates[text] = tuple((_folder_of(path, text), path) for path in matching)
        return known

    def _unknown_includes(self, file: str, depth: int = 2) -> int:
        """How many includes of a file, and of the files it includes, neither the tree nor the stand-in library has."""
        known = self._unknown.get((file, depth))
        if known is not None:
            return known
        unknown = 0
        home = file.rpartition("/")[0]
        for text, _ in self.includes(file):
            candidates = self._candidates_for(text)
            if candidates and depth:
                nearest = min(candidates, key=lambda found: (self._distance(home, found[0]), found[1]))
                unknown += self._unknown_includes(nearest[1], depth - 1)
            elif not candidates and text not in _library():
                unknown += 1
        self._unknown[file, depth] = unknown
        return unknown

    def _distance(self, home: str, folder: str) -> int:
        key = (home, folder)
        steps = self._steps.get(key)
        if steps is None:
            left, right = (home.split("/") if home else []), (folder.split("/") if folder else [])
            common = 0
            for one, other in zip(left, right, strict=False):
                if one != other:
                    break
                common += 1
            steps = self._steps[key] = len(left) + len(right) - 2 * common
        return steps


def _folder_of(path: str, text: str) -> str:
    """The include folder under which ``text`` leads to ``path``."""
    plain = posixpath.normpath(text)
    ups = 0
    while plain.startswith("../"):
        plain = plain[3:]
        ups += 1
    folder = path[: len(path) - len(plain)].rstrip("/")
    if ups:
        # The folder lay as many steps deeper; the first part of the rest is such a folder when it is one step.
        inner = plain.split("/")[:-1][:ups]
        folder = "/".join(part for part in (folder, *inner) if part)
    return folder


def walk_tree(base: Path, exclude: Sequence[str] = (), exclude_base: Path | None = None) -> Tree:
    """All files of a folder that can be a source or be included; hidden folders and build outputs are passed over.

    Folders are never entered by a symbolic link: what the link leads to is in the tree anyway, or is none of its own.
    ``exclude`` are globs of paths relative to ``exclude_base``.
    """
    tree = Tree(base)
    prefix = _relative_prefix(base, exclude_base)
    waiting = [""]
    while waiting:
        folder = waiting.pop()
        try:
            with os.scandir(base / folder) as entries:
                members = sorted(entries, key=lambda entry: entry.name)
        except OSError as error:
            path = str(base / folder)
            text = f"folder {path} cannot be read: {reason(error)}; what is in it was left out."
            tree.notices.append(Notice("unreadable-file", "warning", text, path))
            continue
        if folder and any(member.name in _BUILD_MARKS for member in members):
            continue
        below: list[str] = []
        for member in members:
            path = f"{folder}/{member.name}" if folder else member.name
            if not _is_utf8(path) or (exclude and is_excluded(prefix + path, exclude)):
                continue
            try:
                if member.is_dir(follow_symlinks=False):
                    if not _is_passed_over(member.name):
                        below.append(path)
                elif _suffix(member.name) in HEADER_SUFFIXES and member.is_file():
                    tree.add(path)
                    if member.name.endswith(".c"):
                        tree.sources.append(path)
            except OSError:
                continue
        waiting.extend(reversed(below))
    tree.sources.sort()
    return tree


def is_excluded(path: str, globs: Iterable[str]) -> bool:
    """Whether a relative path, or a folder above it, matches a glob."""
    for glob in globs:
        plain = glob.removeprefix("./").rstrip("/")
        if fnmatch(path, plain) or fnmatch(path, plain + "/*") or ("/" not in plain and fnmatch(path, f"*/{plain}")):
            return True
        if plain.startswith("**/") and fnmatch(path, plain[3:]):
            return True
        if "/" not in plain and any(fnmatch(part, plain) for part in path.split("/")):
            return True
    return False


def readable_sources(tree: Tree, sources: Iterable[str]) -> Iterator[str]:
    """The sources that are text; the others give a notice."""
    for source in sources:
        data = read_bytes(tree.base / source)
        if isinstance(data, Notice):
            tree.notices.append(data)
        elif not is_text(data):
            tree.notices.append(not_text(tree.base / source))
        else:
            yield source


def _is_passed_over(name: str) -> bool:
    return name.startswith(".") or any(fnmatch(name, glob) for glob in _BUILD_NAMES)


def _suffix(name: str) -> str:
    return name[name.rfind(".") :] if "." in name else ""


def _is_utf8(path: str) -> bool:
    """A name that is not valid in the file system's encoding cannot be printed or stand in a URI."""
    try:
        path.encode("utf-8")
    except UnicodeEncodeError:
        return False
    return True


def _relative_prefix(base: Path, exclude_base: Path | None) -> str:
    if exclude_base is None or exclude_base == base:
        return ""
    try:
        relative = base.relative_to(exclude_base).as_posix()
    except ValueError:
        return ""
    return "" if relative == "." else relative + "/"
