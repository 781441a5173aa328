"""The unit's own compiler as preprocessor: what it predefines and finds is what the firmware is built with.

The compiler is a program run on data from outside, so it runs with little: an argument list (never a shell), only
options that read (``gather.options``), a working folder that nobody wrote to (a GNU driver looks for spec files in the
one it runs in), an environment without the variables that redirect it, no input, a time limit, and limits on what it
prints, on memory and on files it could write (none at all, where the system can say so).
"""

import contextlib
import os
import re
import selectors
import signal
import subprocess
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

from stepring.gather.text import decode, reason
from stepring.gather.types import Unit
from stepring.places import Notice
from stepring.read.markers import absolute_markers, macros_of, split_predefined, under
from stepring.read.types import Preprocessed

TIME_LIMIT = 60.0
OUTPUT_LIMIT = 512 * 1024 * 1024
_MESSAGE_LIMIT = 1024 * 1024
_MEMORY_LIMIT = 8 * 1024 * 1024 * 1024
_PASSED_ON = ("SYSTEMROOT", "TEMP", "TMP", "TMPDIR", "HOME", "LD_LIBRARY_PATH", "DYLD_LIBRARY_PATH", "SDKROOT")
_ERROR = re.compile(r"^(.+?):(\d+):(?:(\d+):)? (?:fatal )?error: (.*)$", re.MULTILINE)
_DRIVER_ERROR = re.compile(r"^\S+: (?:fatal )?error: (.*)$", re.MULTILINE)
_MISSING = re.compile(r"fatal error: (\S+): No such file or directory|fatal error: '([^']+)' file not found")


@dataclass(frozen=True, slots=True)
class Output:
    """What a program printed: ``ended`` is the exit status, or why it was stopped."""

    text: bytes
    messages: str
    ended: int | str


@dataclass(frozen=True, slots=True)
class Surroundings:
    """What a compiler knows without any source: its predefined macros and its own include folders."""

    predefined: Mapping[str, str]
    folders: tuple[Path, ...]


def preprocess_with_compiler(unit: Unit) -> Preprocessed | Notice:
    """The unit's text from its own compiler, or the sentence that says why there is none.

    Text with errors in it is kept, with a notice, where the compiler went on to the end. A missing header stops a
    compiler for good; then, as after a failure to run, another preprocessor has to do the work.
    """
    if not unit.arguments or not Path(unit.arguments[0]).is_absolute():
        text = f"{unit.source}: no compiler is known for it."
        return Notice("missing-compiler", "note", text, str(unit.source))
    output = run_reading([*unit.arguments, "-E", "-dD", str(unit.source)])
    text, complaint = decode(output.text), _complaint(unit, output)
    predefined, body = split_predefined(text)
    if output.ended != 0 and (
        not body.strip() or not isinstance(output.ended, int) or _MISSING.search(output.messages)
    ):
        return complaint
    body = absolute_markers(body, under(unit.directory))
    notices = () if output.ended == 0 else (complaint,)
    return Preprocessed(unit, body, predefined, output.ended == 0, notices)


def surroundings_of(unit: Unit) -> Surroundings | None:
    """What the unit's compiler predefines and where its own headers lie; None where it does not say."""
    if not unit.arguments or not Path(unit.arguments[0]).is_absolute():
        return None
    options = tuple(
        option
        for option in unit.arguments[1:]
        if option.startswith(("-m", "-std=", "-ansi", "-O", "-f", "--target=", "--sysroot=", "-nostdinc", "-pthread"))
    )
    return _surroundings(unit.arguments[0], options)


@lru_cache(maxsize=64)
def _surroundings(compiler: str, options: tuple[str, ...]) -> Surroundings | None:
    output = run_reading([compiler, *options, "-x", "c", "-E", "-dD", "-v", "-"])
    predefined = macros_of(decode(output.text))
    if output.ended != 0 or not predefined:
        return None
    listed = re.search(r"^#include <\.\.\.>.*\n((?: .*\n)*)", output.messages, re.MULTILINE)
    folders = [Path(line.strip()) for line in listed[1].splitlines()] if listed else []
    return Surroundings(predefined, tuple(Path(os.path.normpath(folder)) for folder in folders if folder.is_dir()))


def run_reading(arguments: Sequence[str]) -> Output:
    """Run a program that only reads and prints, under limits; it never raises for what the program does."""
    program = arguments[0]
    try:
        process = subprocess.Popen(
            list(arguments),
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            cwd=Path(program).anchor,
            env=_environment(program),
            start_new_session=True,
        )
    except (OSError, ValueError) as error:
        return Output(b"", "", f"cannot be run ({reason(error)})")
    _limit(process.pid)
    text, messages, stopped = b"", "", "was interrupted"
    try:
        text, messages, stopped = _collect(process)
    finally:
        _stop(process, finished=not stopped)
    code = process.poll()
    if stopped or code is None:
        return Output(text, messages, stopped or "did not end")
    return Output(text, messages, code if code >= 0 else f"ended by signal {-code}")


def _collect(process: "subprocess.Popen[bytes]") -> tuple[bytes, str, str]:
    """Read both pipes to their ends, or to a limit (the last member says which)."""
    assert process.stdout is not None and process.stderr is not None
    text, messages, stopped = bytearray(), bytearray(), ""
    deadline = time.monotonic() + TIME_LIMIT
    with selectors.DefaultSelector() as selector:
        selector.register(process.stdout, selectors.EVENT_READ, text)
        selector.register(process.stderr, selectors.EVENT_READ, messages)
        while selector.get_map() and not stopped:
            ready = selector.select(max(0.0, deadline - time.monotonic()))
            if not ready:
                stopped = f"did not finish within {TIME_LIMIT:.0f} s"
            for key, _ in ready:
                block = os.read(key.fd, 1 << 20)
                if not block:
                    selector.unregister(key.fileobj)
                elif key.data is text or len(messages) < _MESSAGE_LIMIT:
                    key.data.extend(block)
            if len(text) > OUTPUT_LIMIT:
                stopped = f"printed more than {OUTPUT_LIMIT // (1024 * 1024)} MB"
    return bytes(text), messages.decode("utf-8", "replace"), stopped


def _stop(process: "subprocess.Popen[bytes]", *, finished: bool) -> None:
    """End what is left of a program and of those it started (they are a session of their own)."""
    if not finished:
        with contextlib.suppress(OSError):
            if hasattr(os, "killpg"):
                os.killpg(process.pid, signal.SIGKILL)
            else:
                process.kill()
    for pipe in (process.stdout, process.stderr):
        if pipe is not None:
            pipe.close()
    try:
        process.wait(timeout=5)
    except subprocess.TimeoutExpired:
        process.kill()
        process.wait()


def _limit(pid: int) -> None:
    """No file may grow, memory is bounded; where the system cannot limit another process, nothing happens."""
    try:
        import resource
    except ImportError:
        return
    if not hasattr(resource, "prlimit"):
        return
    with contextlib.suppress(OSError, ValueError):
        resource.prlimit(pid, resource.RLIMIT_FSIZE, (0, 0))
        resource.prlimit(pid, resource.RLIMIT_AS, (_MEMORY_LIMIT, _MEMORY_LIMIT))
        resource.prlimit(pid, resource.RLIMIT_CORE, (0, 0))


def _environment(program: str) -> dict[str, str]:
    """Variables a compiler needs to run; those that redirect it, add options or make it write are not among them."""
    kept = {name: os.environ[name] for name in _PASSED_ON if name in os.environ}
    folders = (
        str(Path(program).parent),
        str(Path(os.path.realpath(program)).parent),
        "/usr/local/bin",
        "/usr/bin",
        "/bin",
    )
    return {**kept, "PATH": os.pathsep.join(dict.fromkeys(folders)), "LC_ALL": "C"}


def _complaint(unit: Unit, output: Output) -> Notice:
    """What a compiler said first, at the place it names."""
    compiler = Path(unit.arguments[0]).name
    source = str(unit.source)
    if isinstance(output.ended, str):
        text = f"{compiler} {output.ended} on {source}."
        return Notice("preprocessor", "warning", text, source)
    missing = _MISSING.search(output.messages)
    found = _ERROR.search(output.messages)
    if found is None:
        driver = _DRIVER_ERROR.search(output.messages)
        said = driver[1].strip() if driver else f"exit status {output.ended}"
        return Notice("preprocessor", "warning", f"{compiler} rejected {source}: {said}.", source)
    file = under(unit.directory)(found[1])
    line, column = int(found[2]), int(found[3]) if found[3] else None
    if missing is not None:
        name = missing[1] or missing[2]
        text = f"header {name} was not found by {compiler}; the built-in preprocessor reads {source} without it."
        return Notice("missing-header", "note", text, file, line, column)
    text = f"{compiler} rejected {source} at {file}, line {line}: {found[4].strip()}."
    return Notice("preprocessor", "warning", text, file, line, column)
