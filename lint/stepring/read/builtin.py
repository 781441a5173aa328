"""The built-in preprocessor: no toolchain, no library, and still every unit gets a text.

A legacy controller's compiler may be lost, and its headers with it. So nothing here is fatal: a header that is not
found is passed over, an unknown name in ``#if`` is 0 (as ISO C says), ``#error`` is a remark, and stand-in headers
declare the standard library. Files are cut into segments once (``segments``), macros are pcpp's (``macros``); this
module walks the segments, keeps the conditionals and the files apart, and writes line markers.
"""

import re
import time
from collections.abc import Mapping, Sequence
from functools import lru_cache
from pathlib import Path

from stepring.gather.types import Unit
from stepring.read.builtin_headers import STAND_IN, find_header, say_missing
from stepring.read.builtin_state import Frame, State, sync
from stepring.read.builtin_text import ALWAYS, flush, put_run
from stepring.read.macros import Definition, Engine, LimitReached, definition_of
from stepring.read.markers import marker
from stepring.read.predefined import predefined_for
from stepring.read.segments import CONDITIONALS, Directive, Run, load
from stepring.read.types import Preprocessed

TIME_LIMIT = 60.0
DEPTH_LIMIT = 200
OUTPUT_LIMIT = 256 * 1024 * 1024
INCLUDE_LIMIT = 100_000
_HEADER_NAME = re.compile(r'"([^"]*)"|<([^>]*)>')


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
    state = State(unit, engine, engine.start(deadline), tuple(dict.fromkeys(folders)), deadline)
    for name, body in data_model_macros.items():
        define(state, f"{name} {body}" if body else name)
    # The operator form of a pragma (N1570 6.10.9) says nothing that is read here.
    define(state, "_Pragma(text)")
    state.put(marker(1, "<command-line>"))
    for given in unit.defines:
        name, _, body = given.partition("=")
        if define(state, f"{name} {body}"):
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


def define(state: State, text: str) -> bool:
    definition = definition_of(text.strip())
    if definition is None:
        return False
    state.table.put(definition)
    return True


def _read_file(state: State, path: str, *, quiet: bool) -> None:
    """Read a file named by the command line, and all it includes; ``quiet`` keeps nothing but its macros."""
    try:
        file = load(path)
    except OSError:
        found = find_header(state, path, None, -1) if not path.startswith("/") else None
        if found is None:
            say_missing(state, path, None, None)
            return
        file = load(found[0])
    kept, size = state.out, state.size
    if quiet:
        state.out = []
    _enter(state, Frame(file, file.path, False, -1), "")
    _walk(state)
    if quiet:
        definitions = [piece for piece in state.out if piece.startswith(("#define ", "#undef ", "# "))]
        state.out, state.size = [*kept, *definitions], size


# -- walking ---------------------------------------------------------------------------------------------------------


def _enter(state: State, frame: Frame, flags: str) -> None:
    state.frames.append(frame)
    state.put(marker(1, frame.shown, flags))
    define(state, f'__FILE__ "{_escaped(frame.shown)}"')
    state.plain.clear()
    for notice in frame.file.notices:
        state.say(notice.kind, notice.level, notice.text, notice.file, notice.line)
        state.complete = state.complete and notice.level == "note"


def _leave(state: State) -> None:
    frame = state.frames.pop()
    flush(state, frame)
    if state.frames:
        above = state.frames[-1]
        state.put(marker(above.line + above.offset, above.shown, "2 3" if above.system else "2"))
        define(state, f'__FILE__ "{_escaped(above.shown)}"')
        state.plain.clear()


def _walk(state: State) -> None:
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
            put_run(state, frame, segment)
        else:
            _directive(state, frame, segment)


def _directive(state: State, frame: Frame, directive: Directive) -> None:
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
        sync(state, frame, directive.line)
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


def _choose(state: State, frame: Frame, directive: Directive) -> None:
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


def _holds(state: State, frame: Frame, part: Directive) -> bool:
    if part.name in ("ifdef", "elifdef", "ifndef", "elifndef"):
        names = part.rest.split()
        known = bool(names) and (names[0] in state.table.names or names[0] in ALWAYS)
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


def _has(state: State, frame: Frame, text: str) -> str:
    found = _HEADER_NAME.match(text.strip())
    if found is None:
        return "0"
    return "0" if find_header(state, found[1] or found[2], frame if found[1] else None, -1) is None else "1"


def _define_directive(state: State, frame: Frame, directive: Directive) -> None:
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
    sync(state, frame, directive.line)
    state.put(f"#define {directive.rest}\n")
    frame.line = directive.line + 1


def _pragma(state: State, frame: Frame, directive: Directive) -> None:
    if directive.rest == "once":
        state.once.add(frame.file.path)
        return
    sync(state, frame, directive.line)
    state.put(f"#pragma {directive.rest}\n")
    frame.line = directive.line + 1


def _line(state: State, frame: Frame, directive: Directive) -> None:
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


def _include(state: State, frame: Frame, directive: Directive) -> None:
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
    place = find_header(state, name, frame if quoted and directive.name != "include_next" else None, start)
    if place is None:
        say_missing(state, name, frame.shown, line)
        return
    path, index = place
    if path in state.once:
        return
    try:
        file = load(path)
    except OSError:
        say_missing(state, name, frame.shown, line)
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
    flush(state, frame)
    frame.line = directive.line + directive.lines
    system = index >= 0 and state.folders[index] == str(STAND_IN)
    _enter(state, Frame(file, path, system, index), "1 3" if system else "1")


def _escaped(text: str) -> str:
    return text.replace("\\", "\\\\").replace('"', '\\"')


__all__ = ["predefined_for", "preprocess_builtin"]
