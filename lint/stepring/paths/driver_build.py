"""Building and running a witness's C program with the host's compiler, and reading where it stopped.

The checks that the compiler brings (addresses, undefined arithmetic, array bounds) are the judge: their report names a
file and a line. Everything is run from argument lists, never through a shell, in a folder of its own, without input,
with a time limit and with limits on what it writes. The program that runs is the inspected code: it is only built and
run because somebody asked for that.
"""

import os
import re
import signal
import subprocess
import tempfile
from collections.abc import Sequence
from contextlib import suppress
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

from stepring.gather.compilers import choose_compiler, choose_named
from stepring.gather.types import Unit
from stepring.meaning.models import model_from_macros
from stepring.meaning.types import DataModel
from stepring.paths.driver import MARK
from stepring.read.compiler import surroundings_of

BUILD_SECONDS = 60.0
RUN_SECONDS = 20.0
_LARGEST_FILE = 64 * 1024 * 1024
_LONGEST_MESSAGES = 1024 * 1024

COMPILERS = ("cc", "gcc", "clang")

# Alignment is not modelled (see paths.memory): a structure that the inspected code packs must not stop the program.
CHECKS = ("-fsanitize=address,undefined", "-fsanitize=float-cast-overflow", "-fno-sanitize=alignment")
FLAGS = (
    *("-O0", "-g", "-w", "-Wno-error=implicit-function-declaration", "-Wno-error=int-conversion"),
    *("-Wno-error=incompatible-pointer-types", "-fno-omit-frame-pointer", "-fno-sanitize-recover=all"),
)

_KEPT_FLAGS = re.compile(
    r"-std=.*|-ansi|-trigraphs|-f(?:no-)?(?:un)?signed-(?:char|bitfields)|-f(?:no-)?short-enums|-fpack-struct(?:=\d+)?"
    r"|-f(?:no-)?short-wchar|-ffreestanding|-f(?:no-)?builtin(?:-\w+)?|-fms-extensions|-fgnu89-inline|-f(?:no-)?common"
    r"|-pthread|-m(?:32|64)"
)
_PATH_OPTIONS = ("-idirafter", "-isystem", "-iquote", "-include", "-imacros")
_CHECK = re.compile(r"^(.+?):(\d+)(?::\d+)?: runtime error: (.*)$", re.MULTILINE)
_ADDRESS = re.compile(r"ERROR: AddressSanitizer:? ([\w-]+(?: [a-z][\w-]*)*?)(?: on .*|: .*)?$", re.MULTILINE)
_FRAME = re.compile(r"^ +#\d+ 0x[0-9a-f]+ in \S+ (.+?):(\d+)(?::\d+)?$", re.MULTILINE)
_COMPARED = re.compile(r"^(.+?):(\d+): (.*)$", re.MULTILINE)
_COMPILER_ERROR = re.compile(r"^(.+?):(\d+):(?:\d+:)? (?:fatal )?error: (.*)$", re.MULTILINE)
_UNDEFINED = re.compile(r"undefined reference to [`'\"]([A-Za-z_]\w*)['\"`]|symbol not found.*: _?([A-Za-z_]\w*)")
_LINKER_ERROR = re.compile(r"^.*(?:ld|collect2)[^:]*: (.*)$", re.MULTILINE)


@dataclass(frozen=True, slots=True)
class Host:
    """The host's compiler: its program, further options that fit the data model, and its checks."""

    compiler: str
    options: tuple[str, ...]
    checks: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Stop:
    """Where a program stopped, by which message; ``line`` 0 where it names no place of the inspected code."""

    file: str
    line: int
    message: str


@dataclass(frozen=True, slots=True)
class Ran:
    """How a run ended: ``status`` is the exit status, or why it was stopped; ``stop`` what stopped it, if anything."""

    status: int | str
    stop: Stop | None


def find_host(model: DataModel, unit: Unit, root: Path, named: Sequence[str] = ()) -> Host | str:
    """The host's compiler for a data model, or why there is none. ``named`` are compilers that the user allows."""
    programs: list[str] = []
    if named:
        choice = choose_named(named, [root])
        if choice.program is None:
            return choice.notice.text.rstrip(".") if choice.notice else f"{named[0]} cannot be run"
        programs = [choice.program]
    else:
        found = (choose_compiler(name, root, [root]).program for name in COMPILERS)
        programs = [program for program in found if program is not None]
    if not programs:
        return f"no C compiler is on PATH (looked for {', '.join(COMPILERS)})"
    built = ""
    for program in programs:
        for extra in ((), ("-m32",)):
            options = (*(option for option in host_options(unit) if _KEPT_FLAGS.fullmatch(option)), *extra)
            known = surroundings_of(_asked(unit, program, options))
            theirs = None if known is None else model_from_macros(known.predefined)
            if known is None or theirs is None:
                continue
            strict = () if "__clang__" in known.predefined else ("-fsanitize=bounds-strict",)
            host = Host(program, extra, (*CHECKS, *strict))
            if _sizes(theirs) == _sizes(model) and (not extra or _builds(host)):
                return host
            built = built or theirs.name
    names = list(dict.fromkeys(Path(program).name for program in programs))
    verb = "builds" if len(names) == 1 else "build"
    return f"the witness is for the data model {model.name}, and {' and '.join(names)} {verb} for {built or 'another'}"


@lru_cache(maxsize=16)
def _builds(host: Host) -> bool:
    """Whether a compiler has what its options ask for: the libraries of another word size often are not there."""
    with tempfile.TemporaryDirectory(prefix="stepring-") as made:
        folder = Path(made)
        source, target = folder / "empty.c", folder / "empty.o"
        source.write_text("#include <stdint.h>\nint main(void) { return 0; }\n", encoding="utf-8")
        return (
            not compile_file(host, (), source, target, folder) and not link(host, [target], folder / "empty", folder)[0]
        )


def _asked(unit: Unit, program: str, options: tuple[str, ...]) -> Unit:
    return Unit(unit.source, unit.directory, unit.kind, (program, *options))


def _sizes(model: DataModel) -> tuple[object, ...]:
    return (
        *(model.short, model.int_, model.long, model.long_long, model.pointer),
        *(model.char_signed, model.short_enums),
    )


def host_options(unit: Unit) -> tuple[str, ...]:
    """The unit's own options that the host's compiler needs too: macros, folders, language, sizes of types."""
    if not unit.arguments:
        kept = [f"-D{text}" for text in unit.defines] + [f"-I{folder}" for folder in unit.include_folders]
        for option, files in (("-include", unit.included), ("-imacros", unit.macro_files)):
            for file in files:
                kept += [option, str(file)]
        return tuple(kept)
    kept = []
    words = iter(unit.arguments[1:])
    for word in words:
        if word in _PATH_OPTIONS:
            kept += [word, next(words, "")]
        elif word[:2] in ("-D", "-U", "-I") or _KEPT_FLAGS.fullmatch(word):
            kept.append(word)
        elif word == "-x":
            next(words, "")
    return tuple(kept)


# ------------------------------------------------------------------------------------------------------------ building


def compile_file(host: Host, options: Sequence[str], source: Path, target: Path, folder: Path) -> str:
    """Compile one file to an object; empty, or why that cannot be done."""
    words = [host.compiler, *options, *host.options, *host.checks, *FLAGS]
    status, messages = run_limited([*words, "-x", "c", "-c", str(source), "-o", str(target)], folder, BUILD_SECONDS)
    if status == 0:
        return ""
    found = _COMPILER_ERROR.search(messages)
    if found is None:
        return f"the compiler could not build it ({_first_line(messages) or status})"
    return f"the compiler rejects {Path(found[1]).name}, line {found[2]}: {found[3].strip()}"


def link(host: Host, objects: Sequence[Path], target: Path, folder: Path) -> tuple[str, tuple[str, ...]]:
    """Link objects: empty, or why that cannot be done; and the symbols that nothing defines."""
    words = [host.compiler, *host.options, *host.checks, *FLAGS]
    status, messages = run_limited([*words, *map(str, objects), "-o", str(target)], folder, BUILD_SECONDS)
    if status == 0:
        return "", ()
    missing = tuple(dict.fromkeys(first or second for first, second in _UNDEFINED.findall(messages)))
    if missing:
        return f"nothing defines {', '.join(missing)}", missing
    found = _LINKER_ERROR.search(messages)
    said = found[1].strip() if found else _first_line(messages) or str(status)
    return f"the program cannot be linked ({said})", ()


def _first_line(text: str) -> str:
    return next((line.strip() for line in text.splitlines() if line.strip()), "")


# ------------------------------------------------------------------------------------------------------------- running


def run_program(program: Path, folder: Path, roots: Sequence[Path], seconds: float = RUN_SECONDS) -> Ran:
    """Run a built program; ``roots`` are the folders of the inspected code, where a stop can be."""
    status, messages = run_limited([str(program)], folder, seconds)
    return Ran(status, _stop_of(messages, status, folder, roots))


def _stop_of(messages: str, status: int | str, folder: Path, roots: Sequence[Path]) -> Stop | None:
    found = _CHECK.search(messages)
    address = _ADDRESS.search(messages)
    if address is not None and (found is None or address.start() < found.start()):
        return _frame_of(messages[address.start() :], address[1].strip(), folder, roots)
    if found is not None:
        return Stop(_real(found[1], folder), int(found[2]), found[3].strip())
    compared = [line for line in _COMPARED.findall(messages) if not line[0].startswith(MARK.rstrip(":"))]
    if not compared or status == 0:
        return None
    file, line, message = compared[-1]
    return Stop(file, int(line), message.strip())


def _frame_of(report: str, message: str, folder: Path, roots: Sequence[Path]) -> Stop:
    """The innermost call of the report's first list that lies in the inspected code."""
    first = report.split("\n\n", 1)[0]
    real_roots = [os.path.realpath(root) for root in roots]
    for file, line in _FRAME.findall(first):
        real = _real(file, folder)
        if any(real.startswith(root.rstrip("/") + "/") for root in real_roots):
            return Stop(real, int(line), message)
    return Stop("", 0, message)


def _real(file: str, folder: Path) -> str:
    return os.path.realpath(folder / file)


def run_limited(arguments: Sequence[str], folder: Path, seconds: float) -> tuple[int | str, str]:
    """Run a program with a time limit: its exit status or why it was stopped, and what it wrote as messages.

    Its output is dropped; its messages are kept up to a limit. It and all that it started end with this call.
    """
    errors = folder / "messages"
    with errors.open("wb") as file:
        try:
            process = subprocess.Popen(
                list(arguments),
                stdin=subprocess.DEVNULL,
                stdout=subprocess.DEVNULL,
                stderr=file,
                cwd=folder,
                env=_environment(folder),
                start_new_session=True,
            )
        except (OSError, ValueError) as error:
            return f"cannot be run ({getattr(error, 'strerror', None) or error})", ""
        _limit(process.pid)
        status: int | str
        try:
            code = process.wait(timeout=seconds)
            status = code if code >= 0 else f"was ended by signal {-code}"
        except subprocess.TimeoutExpired:
            status = f"did not end within {seconds:.0f} s"
        finally:
            _end(process)
    with errors.open("rb") as file:
        return status, file.read(_LONGEST_MESSAGES).decode("utf-8", "replace")


def _end(process: "subprocess.Popen[bytes]") -> None:
    """End what is left of a program and of those it started (they are a session of their own)."""
    with suppress(OSError):
        if hasattr(os, "killpg"):
            os.killpg(process.pid, signal.SIGKILL)
        else:
            process.kill()
    with suppress(subprocess.TimeoutExpired):
        process.wait(timeout=5)


def _limit(pid: int) -> None:
    """No file may grow beyond a limit; memory is not bounded, since the checks for addresses reserve far more of it."""
    try:
        import resource
    except ImportError:
        return
    if hasattr(resource, "prlimit"):
        with suppress(OSError, ValueError):
            resource.prlimit(pid, resource.RLIMIT_FSIZE, (_LARGEST_FILE, _LARGEST_FILE))
            resource.prlimit(pid, resource.RLIMIT_CORE, (0, 0))


def _environment(folder: Path) -> dict[str, str]:
    """What a compiler and a program need; the folder serves for temporary files."""
    folders = os.environ.get("PATH", os.defpath).split(os.pathsep)
    path = os.pathsep.join(part for part in folders if Path(part).is_absolute())
    kept = {name: os.environ[name] for name in ("SYSTEMROOT", "SDKROOT") if name in os.environ}
    return {**kept, "PATH": path, "TMPDIR": str(folder), "HOME": str(folder), "LC_ALL": "C"}
