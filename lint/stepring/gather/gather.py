"""From the command line to the translation units: a database's entries where there is one, else what the tree holds.

The order is fixed whatever the file system gives: units are sorted by source, then by arguments. Nothing here runs a
program; it only decides which program the next stage may run.
"""

import os
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from pathlib import Path

from stepring.gather.compilers import (
    Choice,
    choose_compiler,
    choose_named,
    compiles_cpp,
    data_model_of,
    strip_launcher,
)
from stepring.gather.database import Entry, find_database, read_database
from stepring.gather.options import family, reduce_options
from stepring.gather.settings import Settings
from stepring.gather.text import is_text, not_text, read_bytes
from stepring.gather.tree import Tree, is_excluded, readable_sources, walk_tree
from stepring.gather.types import Gathered, Unit
from stepring.places import Notice

_NEAR_FOLDERS = ("include", "inc", "Inc", "Include", "includes", "src", "Src", "common", "lib", "port", "config")


@dataclass(slots=True)
class _Run:
    """What one gathering has found so far."""

    settings: Settings
    compilers: Sequence[str]
    tree_folders: list[Path]
    search_path: str | None
    units: list[Unit] = field(default_factory=list)
    notices: list[Notice] = field(default_factory=list)
    choices: dict[tuple[str, str], Choice] = field(default_factory=dict)
    dropped: dict[str, tuple[str, int, str]] = field(default_factory=dict)
    text_files: dict[Path, bool] = field(default_factory=dict)

    def say(self, notice: Notice) -> None:
        if notice not in self.notices:
            self.notices.append(notice)


def gather(
    paths: Sequence[Path],
    *,
    database: Path | None = None,
    compilers: Sequence[str] = (),
    settings: Settings | None = None,
    current: Path | None = None,
    search_path: str | None = None,
) -> Gathered:
    """The translation units of a run.

    ``paths`` are folders, ``.c`` and ``.i`` files; none means the current folder. ``database`` is a compile database
    that the user named, ``compilers`` are programs that the user allows by name. ``current`` and ``search_path`` stand
    for the process's working folder and PATH. Bad input gives notices; one of level ``error`` means that a named input
    could not be used.
    """
    here = _absolute(Path.cwd() if current is None else current, Path.cwd())
    settings = settings or Settings()
    named = [_absolute(Path(path), here) for path in paths] or [here]
    databases = _databases(named, _absolute(database, here) if database else settings.compile_commands)
    run = _Run(settings, compilers, _inspected(named, databases.values()), search_path)
    present = [path for path in named if _exists(path, run)]
    described: set[Path] = set()
    for found in sorted({found for found in databases.values() if found is not None}):
        # With paths named, or no database named, only what lies under the paths is read.
        wanted = None if not paths and (database or settings.compile_commands) else named
        described |= _from_database(found, wanted, run)
    for path in present:
        if path.is_dir():
            covered = any(_lies_under(source, [path]) for source in described) if paths else bool(described)
            if not covered:
                _from_folder(path, run)
        elif path.suffix == ".i":
            _add_preprocessed(path, run)
        elif path.suffix in (".c", ".h"):
            if path not in described:
                _from_file(path, run)
        else:
            text = f"{path} is neither a folder nor a .c or .i file and was left out."
            run.say(Notice("unreadable-file", "error", text, str(path)))
    for notice in _dropped_notices(run):
        run.say(notice)
    units = sorted(dict.fromkeys(run.units), key=lambda unit: (str(unit.source), unit.arguments, unit.defines))
    if not units:
        where = ", ".join(str(path) for path in named)
        run.say(Notice("nothing-to-read", "error", f"no C was found in {where}."))
    return Gathered(_root(named, units, explicit=bool(paths)), tuple(units), tuple(run.notices))


def repository_of(path: Path) -> Path | None:
    """The nearest folder at or above a path that holds ``.git``."""
    folder = path if path.is_dir() else path.parent
    return next((place for place in (folder, *folder.parents) if (place / ".git").exists()), None)


def _absolute(path: Path, here: Path) -> Path:
    return Path(os.path.normpath(here / path))


def _databases(named: Sequence[Path], given: Path | None) -> dict[Path, Path | None]:
    """The database of each named path."""
    if given is not None:
        return dict.fromkeys(named, given)
    return {path: None if path.suffix == ".i" else find_database(_folder(path)) for path in named}


def _folder(path: Path) -> Path:
    return path if path.is_dir() else path.parent


def _inspected(named: Sequence[Path], databases: Iterable[Path | None]) -> list[Path]:
    """The folders whose content is under inspection, and so cannot name a program to run."""
    folders = [repository_of(path) or _folder(path) for path in named]
    folders += [_folder(path) for path in named]
    folders += [found.parent for found in databases if found is not None]
    return list(dict.fromkeys(folders))


def _exists(path: Path, run: _Run) -> bool:
    try:
        path.stat()
    except (OSError, ValueError):
        run.say(Notice("unreadable-file", "error", f"{path} does not exist or cannot be read.", str(path)))
        return False
    return True


def _is_text_file(path: Path, run: _Run) -> bool:
    """Whether a source can be read as text; if not, it is said once."""
    known = run.text_files.get(path)
    if known is None:
        data = read_bytes(path)
        known = isinstance(data, bytes) and is_text(data)
        if not known:
            run.say(data if isinstance(data, Notice) else not_text(path))
        run.text_files[path] = known
    return known


# -- a database ------------------------------------------------------------------------------------------------------


def _from_database(path: Path, wanted: Sequence[Path] | None, run: _Run) -> set[Path]:
    """Add a database's units whose source lies under a wanted path; the sources it describes come back."""
    entries, notices = read_database(path)
    for notice in notices:
        run.say(notice)
    described: set[Path] = set()
    for entry in entries:
        if wanted is not None and not _lies_under(entry.source, wanted):
            continue
        if run.settings.exclude and _excluded(entry.source, run.settings):
            continue
        if entry.source in described and _duplicate(entry, run):
            continue
        if not entry.source.is_file():
            text = f"{entry.source} is named by {path} and is no file; it was left out."
            run.say(Notice("unreadable-file", "warning", text, str(entry.source)))
            continue
        if _is_text_file(entry.source, run):
            run.units.append(_unit_of(entry, run))
            described.add(entry.source)
    return described


def _duplicate(entry: Entry, run: _Run) -> bool:
    return _unit_of(entry, run) in run.units


def _lies_under(source: Path, wanted: Sequence[Path]) -> bool:
    if any(source == path or path in source.parents for path in wanted):
        return True
    real = Path(os.path.realpath(source))
    return any(real == other or other in real.parents for other in map(_real, wanted))


def _real(path: Path) -> Path:
    return Path(os.path.realpath(path))


def _excluded(source: Path, settings: Settings) -> bool:
    if settings.folder is None:
        return False
    try:
        relative = source.relative_to(settings.folder).as_posix()
    except ValueError:
        return False
    return is_excluded(relative, settings.exclude)


def _unit_of(entry: Entry, run: _Run) -> Unit:
    words = strip_launcher(entry.arguments)
    name = words[0]
    reduced = reduce_options(words[1:], entry.directory)
    for option in reduced.dropped:
        kind = family(option)
        text, count, first = run.dropped.get(kind, (option, 0, str(entry.source)))
        run.dropped[kind] = (text, count + 1, first)
    if compiles_cpp(name):
        # The C driver of the same set: the entry is for a C source.
        name = name.replace("clang++", "clang").replace("g++", "gcc").replace("c++", "cc")
    choice = _choose(name, entry.directory, run)
    if entry.source.suffix == ".i":
        return Unit(entry.source, entry.directory, "preprocessed")
    language = ("-x", "c") if entry.source.suffix != ".c" else ()
    return Unit(
        source=entry.source,
        directory=entry.directory,
        kind="database",
        arguments=(choice.program, *reduced.kept, *language) if choice.program else (),
        include_folders=reduced.include_folders,
        defines=reduced.defines,
        included=reduced.included,
        macro_files=reduced.macro_files,
        data_model=data_model_of(name, reduced.kept),
    )


def _choose(name: str, directory: Path, run: _Run) -> Choice:
    # A bare name means the same everywhere; a relative path depends on the folder.
    key = (name, str(directory) if "/" in name and not name.startswith("/") else "")
    choice = run.choices.get(key)
    if choice is None:
        choice = choose_compiler(name, directory, run.tree_folders, run.compilers, run.search_path)
        run.choices[key] = choice
        if choice.notice is not None:
            run.say(choice.notice)
    return choice


def _dropped_notices(run: _Run) -> Iterable[Notice]:
    for _, (option, count, first) in sorted(run.dropped.items()):
        units = "1 unit" if count == 1 else f"{count} units"
        text = f"compiler option {option} was dropped in {units}: it is not among the options that only read."
        yield Notice("dropped-option", "note", text, first)


# -- no database -----------------------------------------------------------------------------------------------------


def _from_folder(folder: Path, run: _Run) -> None:
    tree = walk_tree(folder, run.settings.exclude, run.settings.folder)
    _add_sources(tree, tree.sources, run)


def _from_file(path: Path, run: _Run) -> None:
    """A single file: its repository is its tree, or else its folder and the include folders around it."""
    repository = repository_of(path)
    if repository is not None:
        tree = walk_tree(repository, run.settings.exclude, run.settings.folder)
        tree.notices.clear()
        _add_sources(tree, [path.relative_to(repository).as_posix()], run)
        return
    base = next((place for place in (path.parents[2:3] or path.parents[-1:])), path.parent)
    tree = Tree(base)
    near = {path.parent}
    for place in list(path.parents)[:3]:
        near |= {place / name for name in _NEAR_FOLDERS}
    for folder in sorted(near):
        if folder.is_dir() and not folder.is_symlink():
            part = walk_tree(folder)
            prefix = folder.relative_to(base).as_posix()
            for file in part.files():
                tree.add(file if prefix == "." else f"{prefix}/{file}")
    _add_sources(tree, [path.relative_to(base).as_posix()], run)


def _add_sources(tree: Tree, sources: Iterable[str], run: _Run) -> None:
    choice = choose_named(run.compilers, run.tree_folders)
    if choice.notice is not None:
        run.say(choice.notice)
    for source in readable_sources(tree, sources):
        folders = tree.include_folders(source)
        path = tree.base / source
        arguments: tuple[str, ...] = ()
        if choice.program is not None:
            language = ("-x", "c") if path.suffix != ".c" else ()
            arguments = (choice.program, *(f"-I{folder}" for folder in folders), *language)
        run.units.append(Unit(path, path.parent, "source", arguments, folders, data_model=tree.data_model(source)))
    for notice in tree.notices:
        run.say(notice)
    tree.notices.clear()


def _add_preprocessed(path: Path, run: _Run) -> None:
    if _is_text_file(path, run):
        run.units.append(Unit(path, path.parent, "preprocessed"))


# -- the root --------------------------------------------------------------------------------------------------------


def _root(named: Sequence[Path], units: Sequence[Unit], *, explicit: bool) -> Path:
    """The folder that reported paths are relative to: the repository, else the named folder or what all share."""
    places = [_folder(path) for path in named]
    if not explicit and units and not any(places[0] in unit.source.parents for unit in units):
        places = [unit.source.parent for unit in units]
    common = Path(os.path.commonpath(places)) if len({place.anchor for place in places}) == 1 else places[0]
    return repository_of(common) or common
