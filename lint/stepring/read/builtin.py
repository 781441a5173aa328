"""The built-in preprocessor: no toolchain, no library, and still every unit gets a text.

A legacy controller's compiler may be lost, and its headers with it. So nothing here is fatal: a header that is not
found is passed over, an unknown name in ``#if`` is 0 (as ISO C says), ``#error`` is a remark, and stand-in headers
declare the standard library. Files are cut into segments once (``segments``), macros are pcpp's (``macros``); this
module walks the segments, keeps the conditionals and the files apart, and writes line markers.
"""

import os
import re
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from functools import lru_cache
from pathlib import Path

from stepring.gather.tree import STANDARD_HEADERS
from stepring.gather.types import Unit
from stepring.places import Notice, NoticeLevel
from stepring.read.macros import Definition, Engine, LimitReached, Table, definition_of, would_paste
from stepring.read.markers import marker
from stepring.read.predefined import predefined_for
from stepring.read.segments import CONDITIONALS, Directive, Run, SourceFile, load
from stepring.read.types import Preprocessed

TIME_LIMIT = 60.0
DEPTH_LIMIT = 200
OUTPUT_LIMIT = 256 * 1024 * 1024
INCLUDE_LIMIT = 100_000
STAND_IN = Path(__file__).parent / "stand_in"
_NOTICE_LIMIT = 200
# A macro call that directives interrupt is carried on for so many characters.
_CARRY_LIMIT = 64 * 1024
# More empty lines than this are told by a marker.
_GAP = 8
_HEADER_NAME = re.compile(r'"([^"]*)"|<([^>]*)>')
_BRACKETS = re.compile(r'[()]|"[^"\\\n]*(?:\\.[^"\\\n]*)*"?|\'[^\'\\\n]*(?:\\.[^\'\\\n]*)*\'?')
_NEXT = re.compile(r"\s*")
_ALWAYS = ("__FILE__", "__LINE__", "__COUNTER__")


@dataclass(slots=True)
class _Frame:
    """A file being read: where in it, and where it was found among the include folders (-1: beside the includer)."""

    file: SourceFile
    shown: str
    system: bool
    found_at: int
    index: int = 0
    line: int = 1
    offset: int = 0
    carried: str = ""
    carried_line: int = 0


@dataclass(slots=True)
class _State:
    """A unit being preprocessed."""

    unit: Unit
    engine: Engine
    table: Table
    folders: tuple[str, ...]
    deadline: float
    out: list[str] = field(default_factory=list)
    size: int = 0
    frames: list[_Frame] = field(default_factory=list)
    once: set[str] = field(default_factory=set)
    includes: int = 0
    complete: bool = True
    notices: list[Notice] = field(default_factory=list)
    said: set[tuple[str, str]] = field(default_factory=set)
    plain: dict[str, tuple[str, bool, int]] = field(default_factory=dict)
    not_found: set[str] = field(default_factory=set)
    found: dict[tuple[str, str | None, int], tuple[str, int] | None] = field(default_factory=dict)

    def say(self, kind: str, level: NoticeLevel, text: str, file: str | None = None, line: int | None = None) -> None:
        """Add a notice, once."""
        if (kind, text) in self.said or len(self.notices) >= _NOTICE_LIMIT:
            return
        self.said.add((kind, text))
        self.notices.append(Notice(kind, level, text, file, line))

    def put(self, text: str) -> None:
        """Add to the output."""
        self.out.append(text)
        self.size += len(text)


def preprocess_builtin(
    unit: Unit,
    data_model_macros: Mapping[str, str],
    *,
    system_folders: Sequence[Path] = (),
    time_limit: float = TIME_LIMIT,
) -> Preprocessed:
    """A unit's text without any compiler.

    ``data_model_macros`` are the macros that count as predefined (see ``predefined_for``); ``system_folders`` are
    searched after the unit's own include folders and before the stand-in headers. After ``time_limit`` seconds the text
    that is there is given back with a notice. The result's ``predefined`` is empty: no compiler said it.
    """
    engine = _engine()
    deadline = time.monotonic() + time_limit
    folders = (*map(str, unit.include_folders), *map(str, system_folders), str(STAND_IN))
    state = _State(unit, engine, engine.start(deadline), tuple(dict.fromkeys(folders)), deadline)
    for name, body in data_model_macros.items():
        _define(state, f"{name} {body}" if body else name)
    # The operator form of a pragma (N1570 6.10.9) says nothing that is read here.
    _define(state, "_Pragma(text)")
    state.put(marker(1, "<command-line>"))
    for define in unit.defines:
        name, _, body = define.partition("=")
        if _define(state, f"{name} {body}"):
            state.put(f"#define {name} {body}\n")
    try:
        for path in unit.macro_files:
            _read_file(state, str(path), quiet=True)
        for path in unit.included:
            _read_file(state, str(path), quiet=False)
        _read_file(state, str(unit.source), quiet=False)
    except LimitReached as limit:
        text = f"{unit.source}: {limit}; what was preprocessed until then is read."
        state.say("preprocessor", "warning", text, str(unit.source))
        state.complete = False
    except RecursionError:
        text = f"{unit.source}: something in it is nested too deeply; what was preprocessed until then is read."
        state.say("preprocessor", "warning", text, str(unit.source))
        state.complete = False
    finally:
        engine.start(float("inf"))
    return Preprocessed(unit, "".join(state.out), {}, state.complete, tuple(state.notices))


@lru_cache(maxsize=1)
def _engine() -> Engine:
    return Engine()


def _define(state: _State, text: str) -> bool:
    definition = definition_of(text.strip())
    if definition is None:
        return False
    state.table.put(definition)
    return True


def _read_file(state: _State, path: str, *, quiet: bool) -> None:
    """Read a file named by the command line, and all it includes; ``quiet`` keeps nothing but its macros."""
    try:
        file = load(path)
    except OSError:
        found = _find(state, path, None, -1) if not path.startswith("/") else None
        if found is None:
            _missing(state, path, None, None)
            return
        file = load(found[0])
    kept, size = state.out, state.size
    if quiet:
        state.out = []
    _enter(state, _Frame(file, file.path, False, -1), "")
    _walk(state)
    if quiet:
        definitions = [piece for piece in state.out if piece.startswith(("#define ", "#undef ", "# "))]
        state.out, state.size = [*kept, *definitions], size


# -- walking ---------------------------------------------------------------------------------------------------------


def _enter(state: _State, frame: _Frame, flags: str) -> None:
    state.frames.append(frame)
    state.put(marker(1, frame.shown, flags))
    _define(state, f'__FILE__ "{_escaped(frame.shown)}"')
    state.plain.clear()
    for notice in frame.file.notices:
        state.say(notice.kind, notice.level, notice.text, notice.file, notice.line)
        state.complete = state.complete and notice.level == "note"


def _leave(state: _State) -> None:
    frame = state.frames.pop()
    _flush(state, frame)
    if state.frames:
        above = state.frames[-1]
        state.put(marker(above.line + above.offset, above.shown, "2 3" if above.system else "2"))
        _define(state, f'__FILE__ "{_escaped(above.shown)}"')
        state.plain.clear()


def _walk(state: _State) -> None:
    """Read until the innermost file and all around it are at their ends."""
    while state.frames:
        frame = state.frames[-1]
        if frame.index >= len(frame.file.segments):
            _leave(state)
            continue
        if time.monotonic() > state.deadline:
            raise LimitReached("preprocessing it takes too long", whole=True)
        if state.size > OUTPUT_LIMIT:
            raise LimitReached(f"it becomes larger than {OUTPUT_LIMIT // (1024 * 1024)} MB", whole=True)
        segment = frame.file.segments[frame.index]
        frame.index += 1
        if isinstance(segment, Run):
            _run(state, frame, segment)
        else:
            _directive(state, frame, segment)


def _sync(state: _State, frame: _Frame, line: int) -> None:
    """Bring the output to a line of the file."""
    gap = line - frame.line
    if 0 <= gap <= _GAP:
        if gap:
            state.put("\n" * gap)
    else:
        state.put(marker(line + frame.offset, frame.shown, "3" if frame.system else ""))
    frame.line = line


def _directive(state: _State, frame: _Frame, directive: Directive) -> None:
    name = directive.name
    if name in CONDITIONALS:
        _choose(state, frame, directive)
    elif name in ("elif", "else", "elifdef", "elifndef"):
        # Reached from above: a part before it was taken.
        if directive.end >= 0:
            frame.index = directive.end + 1
    elif name in ("endif", ""):
        pass
    elif name == "define":
        _define_directive(state, frame, directive)
    elif name == "undef":
        if not directive.rest:
            return
        macro = directive.rest.split()[0]
        state.table.drop(macro)
        state.plain.clear()
        _sync(state, frame, directive.line)
        state.put(f"#undef {macro}\n")
        frame.line = directive.line + 1
    elif name in ("include", "include_next", "import"):
        _include(state, frame, directive)
    elif name == "pragma":
        _pragma(state, frame, directive)
    elif name == "line" or name.isdigit():
        _line(state, frame, directive)
    elif name in ("error", "warning"):
        said = directive.rest[:200]
        place = f"{frame.shown}, line {directive.line + frame.offset}"
        state.say("preprocessor", "note", f"{place}: #{name} {said}", frame.shown, directive.line + frame.offset)
        state.complete = state.complete and name == "warning"
    elif name not in ("ident", "sccs", "assert", "unassert", "region", "endregion"):
        place = f"{frame.shown}, line {directive.line + frame.offset}"
        text = f"{place}: directive #{name} is not known and was passed over."
        state.say("preprocessor", "note", text, frame.shown, directive.line + frame.offset)


def _choose(state: _State, frame: _Frame, directive: Directive) -> None:
    """Go on in the part of a conditional that holds, or behind it."""
    segments = frame.file.segments
    part = directive
    while True:
        if part.name in ("else", "endif") or _holds(state, frame, part):
            return
        if part.next >= len(segments):
            frame.index = len(segments)
            return
        frame.index = part.next + 1
        following = segments[part.next]
        if not isinstance(following, Directive):
            return
        part = following


def _holds(state: _State, frame: _Frame, part: Directive) -> bool:
    if part.name in ("ifdef", "elifdef", "ifndef", "elifndef"):
        names = part.rest.split()
        known = bool(names) and (names[0] in state.table.names or names[0] in _ALWAYS)
        return known == (part.name in ("ifdef", "elifdef"))
    text = part.rest
    if "__has_include" in text:
        text = re.sub(r"__has_include(_next)?\s*\(\s*([^)]*)\)", lambda found: _has(state, frame, found[2]), text)
    line = part.line + frame.offset
    try:
        return state.engine.holds(text, line)
    except LimitReached as limit:
        if limit.whole:
            raise
        reason = str(limit)
    except (ValueError, RecursionError, IndexError) as error:
        reason = "it is nested too deeply" if isinstance(error, RecursionError) else str(error)
    shown = text if len(text) <= 80 else text[:77] + "..."
    said = f"{frame.shown}, line {line}: #{part.name} {shown} has no value and counts as false ({reason})."
    state.say("preprocessor", "note", said, frame.shown, line)
    state.complete = False
    return False


def _has(state: _State, frame: _Frame, text: str) -> str:
    found = _HEADER_NAME.match(text.strip())
    if found is None:
        return "0"
    return "0" if _find(state, found[1] or found[2], frame if found[1] else None, -1) is None else "1"


def _define_directive(state: _State, frame: _Frame, directive: Directive) -> None:
    if directive.macro is None:
        directive.macro = definition_of(directive.rest) or False
    if not isinstance(directive.macro, Definition):
        line = directive.line + frame.offset
        text = f"{frame.shown}, line {line}: the macro definition is malformed and was passed over."
        state.say("preprocessor", "warning", text, frame.shown, line)
        return
    state.table.put(directive.macro)
    if state.plain:
        state.plain.clear()
    _sync(state, frame, directive.line)
    state.put(f"#define {directive.rest}\n")
    frame.line = directive.line + 1


def _pragma(state: _State, frame: _Frame, directive: Directive) -> None:
    if directive.rest == "once":
        state.once.add(frame.file.path)
        return
    _sync(state, frame, directive.line)
    state.put(f"#pragma {directive.rest}\n")
    frame.line = directive.line + 1


def _line(state: _State, frame: _Frame, directive: Directive) -> None:
    """``#line N "FILE"``: from the next line on, other numbers and another name are shown."""
    rest = directive.rest if directive.name == "line" else f"{directive.name} {directive.rest}"
    found = re.match(r'(\d{1,9})(?:\s+"([^"\n]*)")?', rest)
    if found is None:
        return
    frame.offset = int(found[1]) - (directive.line + directive.lines)
    if found[2]:
        frame.shown = found[2] if found[2].startswith("/") else f"{frame.file.path.rpartition('/')[0]}/{found[2]}"
    frame.line = directive.line + directive.lines
    state.put(marker(frame.line + frame.offset, frame.shown, "3" if frame.system else ""))


# -- inclusion -------------------------------------------------------------------------------------------------------


def _include(state: _State, frame: _Frame, directive: Directive) -> None:
    rest, line = directive.rest, directive.line + frame.offset
    found = _HEADER_NAME.match(rest)
    if found is None:
        try:
            found = _HEADER_NAME.search(state.engine.expand(rest, line))
        except LimitReached as limit:
            if limit.whole:
                raise
        except Exception:
            # pcpp's own exceptions for malformed macro calls.
            found = None
    if found is None:
        text = f"{frame.shown}, line {line}: #include {rest[:80]} names no header and was passed over."
        state.say("preprocessor", "note", text, frame.shown, line)
        state.complete = False
        return
    quoted, name = found[1] is not None, (found[1] if found[1] is not None else found[2]).strip()
    start = frame.found_at + 1 if directive.name == "include_next" else 0
    place = _find(state, name, frame if quoted and directive.name != "include_next" else None, start)
    if place is None:
        _missing(state, name, frame.shown, line)
        return
    path, index = place
    if path in state.once:
        return
    try:
        file = load(path)
    except OSError:
        _missing(state, name, frame.shown, line)
        return
    if file.guard is not None and file.guard in state.table.names:
        return
    state.includes += 1
    if len(state.frames) >= DEPTH_LIMIT or state.includes > INCLUDE_LIMIT:
        state.once.add(path)
        extent = f"{DEPTH_LIMIT} levels deep" if len(state.frames) >= DEPTH_LIMIT else f"{INCLUDE_LIMIT} times"
        text = f"{frame.shown}, line {line}: files are included {extent} (a cycle?); {path} was passed over."
        state.say("preprocessor", "warning", text, frame.shown, line)
        state.complete = False
        return
    if directive.name == "import":
        state.once.add(path)
    _flush(state, frame)
    frame.line = directive.line + directive.lines
    system = index >= 0 and state.folders[index] == str(STAND_IN)
    _enter(state, _Frame(file, path, system, index), "1 3" if system else "1")


def _find(state: _State, name: str, beside: _Frame | None, start: int) -> tuple[str, int] | None:
    """A header's place, asked once a unit for each folder that includes it; see ``_search``."""
    home = beside.file.path.rpartition("/")[0] if beside is not None else None
    key = (name, home, start)
    if key not in state.found:
        state.found[key] = _search(state, name, home, start)
    return state.found[key]


def _search(state: _State, name: str, home: str | None, start: int) -> tuple[str, int] | None:
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


def _missing(state: _State, name: str, file: str | None, line: int | None) -> None:
    text = f"header {name} was not found; what it declares is guessed."
    state.say("missing-header", "note", text, file, line)
    state.complete = False


# -- text ------------------------------------------------------------------------------------------------------------


def _run(state: _State, frame: _Frame, run: Run) -> None:
    """Put out a run of lines with the macros in it expanded."""
    if run.open_string:
        line = run.open_string + frame.offset
        text = f"{frame.shown}, line {line}: a string literal is not closed on its line."
        state.say("unterminated", "warning", text, frame.shown, line)
        state.complete = False
    if frame.carried:
        text = frame.carried + "\n" * max(0, run.line - frame.carried_line - frame.carried.count("\n")) + run.text
        line, frame.carried = frame.carried_line, ""
        whole = Run(line, text, text.count("\n"), run.words)
        _sync(state, frame, line)
        _expand(state, frame, whole, _sorted_places(whole, state.table.names))
        return
    _sync(state, frame, run.line)
    if run.words.isdisjoint(state.table.names) and run.words.isdisjoint(_ALWAYS):
        state.put(run.text)
        frame.line = run.line + run.lines
        return
    _expand(state, frame, run, _sorted_places(run, state.table.names))


def _sorted_places(run: Run, names: set[str]) -> list[tuple[int, int]]:
    places = run.places()
    used = [name for name in places if name in names or name in _ALWAYS]
    if len(used) == 1:
        return places[used[0]]
    return sorted(place for name in used for place in places[name])


def _expand(state: _State, frame: _Frame, run: Run, places: Sequence[tuple[int, int]]) -> None:
    """Put out a run, each macro use replaced; a call that is still open at its end waits for the next run."""
    text, done, counted, line = run.text, 0, 0, run.line
    for start, end in places:
        if start < done:
            continue
        line += text.count("\n", counted, start)
        counted = start
        name = text[start:end]
        replaced = _replacement(state, frame, name, text, start, end, line)
        if replaced is None:
            continue
        new, stop = replaced
        if stop < 0 and len(text) - start > _CARRY_LIMIT:
            _open_call(state, frame, name, line)
            break
        if stop < 0:
            state.put(text[done:start])
            frame.carried, frame.carried_line = text[start:], line
            frame.line = line
            return
        before = text[done:start]
        state.put(before)
        left = text[start - 1] if start else ""
        if new and done == start and state.out:
            left = next((piece[-1] for piece in reversed(state.out) if piece), "")
        if new and would_paste(left, new[0]):
            state.put(" ")
        state.put(new)
        newlines = text.count("\n", start, stop)
        if newlines:
            state.put("\n" * newlines)
        elif new and stop < len(text) and would_paste(new[-1], text[stop]):
            state.put(" ")
        done = stop
    state.put(text[done:])
    frame.line = run.line + run.lines


def _replacement(
    state: _State, frame: _Frame, name: str, text: str, start: int, end: int, line: int
) -> tuple[str, int] | None:
    """What a macro use becomes and where it ends; None: no use after all; an end of -1: it is not closed yet."""
    shown_line = line + frame.offset
    function_like = name in state.table.names and state.table.definition(name).function_like
    stop = end
    if not function_like:
        known = state.plain.get(name)
        if known is None:
            known = _plain_expansion(state, frame, name, shown_line)
        new, goes_on, open_brackets = known
        if open_brackets:
            closing = _closing(text, end, open_brackets)
            if closing < 0:
                return new, end
            return _expanded(state, frame, text[start : closing + 1], shown_line), closing + 1
        if not goes_on or _bracket_after(text, end) < 0:
            return new, end
    while True:
        opening = _bracket_after(text, stop)
        if opening < 0:
            return None if stop == end else (_expanded(state, frame, text[start:stop], shown_line), stop)
        closing = _closing(text, opening)
        if closing < 0:
            return "", -1
        stop = closing + 1
        new = _expanded(state, frame, text[start:stop], shown_line)
        if not _ends_in_call(state, new) or _bracket_after(text, stop) < 0:
            return new, stop


def _bracket_after(text: str, place: int) -> int:
    """Where an opening bracket follows (white space between counts not); -1: something else does."""
    found = _NEXT.match(text, place)
    after = found.end() if found else place
    if after >= len(text):
        return -1
    return after if text[after] == "(" else -1


def _closing(text: str, opening: int, depth: int = 0) -> int:
    """The bracket that closes the one at ``opening`` (and ``depth`` open ones before it), or -1."""
    for found in _BRACKETS.finditer(text, opening):
        if found[0] == "(":
            depth += 1
        elif found[0] == ")":
            depth -= 1
            if depth == 0:
                return found.start()
    return -1


def _plain_expansion(state: _State, frame: _Frame, name: str, line: int) -> tuple[str, bool, int]:
    """An object-like macro's text, whether it ends in the name of a function-like one, and how many brackets of calls
    are open at its end; kept while macros stay."""
    new = _expanded(state, frame, name, line)
    known = new, _ends_in_call(state, new), _open_brackets(state, new)
    if not state.engine.moving:
        state.plain[name] = known
    return known


def _ends_in_call(state: _State, text: str) -> bool:
    found = re.search(r"([A-Za-z_$][\w$]*)\s*$", text)
    return found is not None and found[1] in state.table.names and state.table.definition(found[1]).function_like


def _open_brackets(state: _State, text: str) -> int:
    """How many brackets are open at the end of a text, if one of them opens the call of a function-like macro."""
    if text.count("(") <= text.count(")"):
        return 0
    stack: list[bool] = []
    for found in _BRACKETS.finditer(text):
        if found[0] == "(":
            stack.append(_ends_in_call(state, text[: found.start()]))
        elif found[0] == ")" and stack:
            stack.pop()
    return len(stack) if any(stack) else 0


def _expanded(state: _State, frame: _Frame, text: str, line: int) -> str:
    """A piece of text with its macros expanded, or as it is where that goes wrong."""
    engine = state.engine
    try:
        new = engine.expand(text, line)
    except LimitReached as limit:
        if limit.whole:
            raise
        reason = str(limit)
    except RecursionError:
        reason = "its macros are nested too deeply"
    except Exception as error:
        # pcpp's own exceptions for malformed macro calls.
        reason = str(error) or type(error).__name__
    else:
        if not engine.complaints:
            return new
        reason = engine.complaints[0]
        engine.complaints.clear()
        state.say("preprocessor", "note", f"{frame.shown}, line {line}: {reason}.", frame.shown, line)
        return new
    shown = text if len(text) <= 60 else text[:57] + "..."
    said = f"{frame.shown}, line {line}: {shown} was left as it is ({reason})."
    state.say("preprocessor", "warning", said.replace("\n", " "), frame.shown, line)
    state.complete = False
    return text.replace("\n", " ")


def _flush(state: _State, frame: _Frame) -> None:
    """Put out what still waited for a closing bracket."""
    if frame.carried:
        _open_call(state, frame, frame.carried.split("(")[0].strip(), frame.carried_line)
        _sync(state, frame, frame.carried_line)
        state.put(frame.carried if frame.carried.endswith("\n") else frame.carried + "\n")
        frame.line = frame.carried_line + frame.carried.count("\n")
        frame.carried = ""


def _open_call(state: _State, frame: _Frame, name: str, line: int) -> None:
    line += frame.offset
    text = f"{frame.shown}, line {line}: the call of macro {name} is not closed and was left as it is."
    state.say("unterminated", "warning", text, frame.shown, line)
    state.complete = False


def _escaped(text: str) -> str:
    return text.replace("\\", "\\\\").replace('"', '\\"')


__all__ = ["predefined_for", "preprocess_builtin"]
