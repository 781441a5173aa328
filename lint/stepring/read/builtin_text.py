"""Runs of text put out with the macros in them replaced, each piece on the line it stands on.

Only a macro's name, and the call that follows where it is function-like, is ever cut into tokens; what lies between is
copied. A call that a directive interrupts is carried on into the next run.
"""

import re
from collections.abc import Sequence

from stepring.read.builtin_state import Frame, State, sync
from stepring.read.macros import LimitReached, would_paste
from stepring.read.segments import Run

# A macro call that directives interrupt is carried on for so many characters.
_CARRY_LIMIT = 64 * 1024
_BRACKETS = re.compile(r'[()]|"[^"\\\n]*(?:\\.[^"\\\n]*)*"?|\'[^\'\\\n]*(?:\\.[^\'\\\n]*)*\'?')
_NEXT = re.compile(r"\s*")
# Names that are replaced though nothing defines them.
ALWAYS = ("__FILE__", "__LINE__", "__COUNTER__")


def put_run(state: State, frame: Frame, run: Run) -> None:
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
        sync(state, frame, line)
        _expand(state, frame, whole, _sorted_places(whole, state.table.names))
        return
    sync(state, frame, run.line)
    if run.words.isdisjoint(state.table.names) and run.words.isdisjoint(ALWAYS):
        state.put(run.text)
        frame.line = run.line + run.lines
        return
    _expand(state, frame, run, _sorted_places(run, state.table.names))


def _sorted_places(run: Run, names: set[str]) -> list[tuple[int, int]]:
    places = run.places()
    used = [name for name in places if name in names or name in ALWAYS]
    if len(used) == 1:
        return places[used[0]]
    return sorted(place for name in used for place in places[name])


def _expand(state: State, frame: Frame, run: Run, places: Sequence[tuple[int, int]]) -> None:
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
    state: State, frame: Frame, name: str, text: str, start: int, end: int, line: int
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


def _plain_expansion(state: State, frame: Frame, name: str, line: int) -> tuple[str, bool, int]:
    """An object-like macro's text, whether it ends in the name of a function-like one, and how many brackets of calls
    are open at its end; kept while macros stay."""
    new = _expanded(state, frame, name, line)
    known = new, _ends_in_call(state, new), _open_brackets(state, new)
    if not state.engine.moving:
        state.plain[name] = known
    return known


def _ends_in_call(state: State, text: str) -> bool:
    found = re.search(r"([A-Za-z_$][\w$]*)\s*$", text)
    return found is not None and found[1] in state.table.names and state.table.definition(found[1]).function_like


def _open_brackets(state: State, text: str) -> int:
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


def _expanded(state: State, frame: Frame, text: str, line: int) -> str:
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


def flush(state: State, frame: Frame) -> None:
    """Put out what still waited for a closing bracket."""
    if frame.carried:
        _open_call(state, frame, frame.carried.split("(")[0].strip(), frame.carried_line)
        sync(state, frame, frame.carried_line)
        state.put(frame.carried if frame.carried.endswith("\n") else frame.carried + "\n")
        frame.line = frame.carried_line + frame.carried.count("\n")
        frame.carried = ""


def _open_call(state: State, frame: Frame, name: str, line: int) -> None:
    line += frame.offset
    text = f"{frame.shown}, line {line}: the call of macro {name} is not closed and was left as it is."
    state.say("unterminated", "warning", text, frame.shown, line)
    state.complete = False
