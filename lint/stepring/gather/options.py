"""Compiler options, reduced to those that only read.

A compile database is data from outside: a pull request can change it. GNU-style compiler drivers can load plugins,
run wrapper programs, read options from files and write files, all by option. So what is passed on is chosen from a
list of what is known to be harmless and needed for preprocessing; everything else is dropped, and what could have
loaded, run or written something is said. Three facts shape the details (documentation of the GNU compiler driver,
"Overall Options", "Spec Files"):

- An argument that begins with ``@`` names a file of further arguments, also where it stands as another option's value;
  so values are joined to their options or made absolute.
- A device name given with ``-mmcu=`` makes the AVR driver read a spec file, which is looked for in the working folder
  and under the sysroot; so the value has to be a plain word, the sysroot is dropped beside it, and the compiler runs
  in a folder of its own (see ``read.compiler``), which is why every path is made absolute here.
- ``-Wp,a,b`` and ``-Xpreprocessor a`` hand ``a`` to the preprocessor, which has writing options of its own; what they
  hand on goes through the same list.
"""

import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from stepring.gather.folders import joined

_FOLDER_OPTIONS = ("-idirafter", "-isystem", "-iquote", "-I")
_FILE_OPTIONS = ("-include", "-imacros")


def _words(text: str) -> frozenset[str]:
    return frozenset(text.split())


_KEPT_WORDS = _words(
    """-ansi -nostdinc -undef -trigraphs -pthread -fsigned-char -funsigned-char -fno-signed-char -fno-unsigned-char
    -fshort-enums -fno-short-enums -fsigned-bitfields -funsigned-bitfields -ffreestanding -fhosted -fno-builtin
    -fno-hosted -fshort-wchar -fno-short-wchar -fshort-double -fpack-struct -fms-extensions -fopenmp -ffast-math
    -fpic -fPIC -fpie -fPIE -fgnu89-inline -fno-common -fstack-protector -fexceptions"""
)
_KEPT_FORMS = re.compile(
    r"-std=[a-z0-9:]+|-O(?:[0-9]|s|g|z|fast)?|-fpack-struct=\d+|-fno-builtin-\w+|-m(?!llvm)[A-Za-z0-9][\w.,=+\-]*"
)
_MACHINE_WITH_VALUE = frozenset(("-mllvm", "-mlink-builtin-bitcode", "-mrelocation-model"))
# Ordinary options that have no part in preprocessing, or are replaced: left out without a word.
_QUIET_WORDS = _words(
    """-c -S -E -M -MM -MG -MP -MD -MMD -MV -P -C -CC -H -v -w -p -pg -pipe -s -static -shared -rdynamic -r -no-pie
    -pie -pedantic -pedantic-errors -nostdlib -nodefaultlibs -nostartfiles -nolibc -static-libgcc -Qunused-arguments
    -fdirectives-only -mthumb-interwork-warn"""
)
_QUIET_WITH_VALUE = _words("-o -MF -MT -MQ -MJ -l -L -T -u -z -e -A --param -arch -Tdata -Ttext -Tbss")
_QUIET_FORMS = re.compile(
    r"-o.+|-M[FTQJ].+|-[lLTueAz].+|--param=.*|-W(?!p,|a,|l,).*|-g(?!split-dwarf|coff-).*|-Wl,(?!.*@).*"
    r"|-f(?:no-)?[a-zA-Z][a-zA-Z0-9\-]*(?:=[\w.,+\-]*)?|-R.*|-d[A-Z]+|-fdebug-prefix-map=.*|-ffile-prefix-map=.*"
    r"|-fmacro-prefix-map=.*|-fdiagnostics-color=.*|-frandom-seed=.*"
)
# Options that load, run or write; a value of their own follows the first group as a separate argument.
_SAID_WITH_VALUE = _words(
    """-load -Xclang -Xpreprocessor -Xassembler -Xlinker -wrapper -B -specs --specs -plugin -iplugindir -aux-info
    -dumpdir -dumpbase -dumpbase-ext -auxbase -auxbase-strip -gcc-toolchain --gcc-toolchain -include-pch --config
    --config-system-dir --config-user-dir -cc1-args -Xcuda-ptxas -Xanalyzer -Xopenmp-target -serialize-diagnostics
    --serialize-diagnostics -ivfsoverlay -iwithprefix -iwithprefixbefore -iprefix --prefix"""
)
_SAID_FORMS = re.compile(
    r"-f(?:no-)?(?:plugin|pass-plugin|dump|profile|test-coverage|coverage|callgraph-info|stack-usage|save|"
    r"diagnostics-\w+-file|opt-info|auto-profile|modules|module|crash-diagnostics|memory-profile|cs-profile|"
    r"sanitize-(?:black|ignore)list|thinlto|optimization-record|time-trace|time-report|integrated-cc1|"
    r"wpa|ltrans|ltoplugin|xray|proc-stat|ptrauth|api|index|prebuilt|implicit-module|build-session|"
    r"depfile|rewrite|compile-policy|report).*"
)


@dataclass(frozen=True, slots=True)
class Reduced:
    """What is left of a compiler's arguments.

    ``kept`` goes to the compiler; ``include_folders``, ``defines`` (``NAME=VALUE``), ``included`` and ``macro_files``
    say the same to the built-in preprocessor. ``language`` is the last ``-x``. ``dropped`` are the options to be said.
    """

    kept: tuple[str, ...]
    include_folders: tuple[Path, ...]
    defines: tuple[str, ...]
    included: tuple[Path, ...]
    macro_files: tuple[Path, ...]
    language: str | None
    dropped: tuple[str, ...]


def split_command(command: str) -> list[str]:
    """A database's ``command`` as arguments: ``"`` and ``\\`` alone are special, nothing is expanded.

    (The JSON Compilation Database format. Inside quotes a backslash escapes ``"`` and ``\\``, and is itself elsewhere.)
    """
    arguments: list[str] = []
    current: list[str] | None = None
    quoted = False
    for piece in re.findall(r"\\.|\\|\"|[ \t\r\n]+|[^\\\" \t\r\n]+", command, re.DOTALL):
        if piece == '"':
            quoted = not quoted
            current = [] if current is None else current
        elif piece[0] == "\\" and len(piece) == 2:
            plain = quoted and piece[1] not in '"\\'
            current = [] if current is None else current
            current.append(piece if plain else piece[1])
        elif piece[0] in " \t\r\n" and not quoted:
            if current is not None:
                arguments.append("".join(current))
            current = None
        else:
            current = [] if current is None else current
            current.append(piece)
    if current is not None:
        arguments.append("".join(current))
    return arguments


def reduce_options(arguments: Sequence[str], directory: Path) -> Reduced:
    """The options (the compiler itself not among them) that only read; relative paths count from ``directory``."""
    kept: list[str] = []
    folders: dict[str, list[Path]] = {option: [] for option in _FOLDER_OPTIONS}
    defines: dict[str, str] = {}
    included: list[Path] = []
    macro_files: list[Path] = []
    language: str | None = None
    dropped: list[str] = []
    sysroots: list[str] = []
    queue = _handed_on(arguments)
    index = 0

    def value_of(option: str) -> str | None:
        """The value joined to the option, or else the next argument."""
        nonlocal index
        if len(queue[index]) > len(option):
            return queue[index][len(option) :]
        index += 1
        return queue[index] if index < len(queue) else None

    while index < len(queue):
        argument = queue[index]
        folder_option = next((option for option in _FOLDER_OPTIONS if argument.startswith(option)), None)
        file_option = next((option for option in _FILE_OPTIONS if argument == option), None)
        if argument.startswith("@"):
            dropped.append(argument)
        elif not argument.startswith("-") or argument in ("-", "--"):
            # A source, object or archive: the source comes from the entry's own member.
            index += 1
            continue
        elif argument[:2] in ("-D", "-U"):
            value = value_of(argument[:2])
            if value:
                kept.append(argument[:2] + value)
                _note_define(defines, argument[:2], value)
        elif argument == "-I-":
            dropped.append(argument)
        elif folder_option is not None:
            value = value_of(folder_option)
            if value and value[0] != "=" and not value.startswith("$SYSROOT"):
                folder = joined(directory, value)
                kept.extend((folder_option + str(folder),) if folder_option == "-I" else (folder_option, str(folder)))
                folders[folder_option].append(folder)
            elif value:
                kept.append(folder_option + value)
        elif file_option is not None:
            value = value_of(file_option)
            file = joined(directory, value) if value else directory
            if value and not value.startswith(("@", "-")) and (file.is_file() or not file.exists()):
                kept.extend((file_option, str(file) if file.is_file() else value))
                (included if file_option == "-include" else macro_files).append(file if file.is_file() else Path(value))
            elif value:
                dropped.append(f"{file_option} {value}")
        elif argument in ("--sysroot", "-isysroot") or argument.startswith(("--sysroot=", "-isysroot")):
            option = "--sysroot" if argument.startswith("--") else "-isysroot"
            value = value_of(option)
            if value:
                sysroots.append(f"{option}={joined(directory, value.lstrip('='))}")
        elif argument.startswith("-x"):
            language = value_of("-x")
        elif argument in ("-target", "--target") or argument.startswith("--target="):
            value = value_of("--target" if argument.startswith("--") else "-target")
            if value and re.fullmatch(r"=?[\w.+\-]+", value):
                kept.append("--target=" + value.lstrip("="))
        elif argument in _MACHINE_WITH_VALUE or argument in _SAID_WITH_VALUE:
            following = value_of(argument)
            dropped.append(argument if following is None else f"{argument} {following}")
        elif argument in _KEPT_WORDS or _KEPT_FORMS.fullmatch(argument):
            kept.append(argument)
        elif argument in _QUIET_WITH_VALUE:
            index += 1
        elif argument in _QUIET_WORDS or (_QUIET_FORMS.fullmatch(argument) and not _SAID_FORMS.fullmatch(argument)):
            pass
        else:
            dropped.append(argument)
        index += 1
    if any(option.startswith("-mmcu=") for option in kept):
        dropped.extend(sysroots)
    else:
        for sysroot in sysroots:
            option, _, value = sysroot.partition("=")
            kept.extend((sysroot,) if option == "--sysroot" else (option, value))
    order = ("-iquote", "-I", "-isystem", "-idirafter")
    return Reduced(
        kept=tuple(kept),
        include_folders=tuple(dict.fromkeys(folder for option in order for folder in folders[option])),
        defines=tuple(f"{name}={value}" for name, value in defines.items()),
        included=tuple(included),
        macro_files=tuple(macro_files),
        language=language,
        dropped=tuple(dropped),
    )


def family(option: str) -> str:
    """An option without its value, so that a run says each kind once."""
    if option.startswith("@"):
        return "@"
    return re.split(r"[=, ]", option, maxsplit=1)[0]


def _handed_on(arguments: Sequence[str]) -> list[str]:
    """The arguments with what ``-Wp,`` and ``-Xpreprocessor`` hand on put in their place."""
    flat: list[str] = []
    waiting = iter(arguments)
    for argument in waiting:
        if argument.startswith("-Wp,"):
            parts = [part for part in argument[4:].split(",") if part]
            writes = any(part.startswith(("-M", "-o", "-d", "@")) for part in parts)
            flat.extend((argument,) if writes else parts)
        elif argument == "-Xpreprocessor":
            part = next(waiting, "")
            if re.fullmatch(r"-[DU]\w.*", part):
                flat.append(part)
            else:
                flat.extend((argument, part))
        else:
            flat.append(argument)
    return flat


def _note_define(defines: dict[str, str], option: str, text: str) -> None:
    name, equals, value = text.partition("=")
    if option == "-U":
        for known in [known for known in defines if known == name or known.startswith(name + "(")]:
            del defines[known]
    else:
        defines[name] = value if equals else "1"
