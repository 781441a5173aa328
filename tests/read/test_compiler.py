"""The unit's own compiler as preprocessor, and the choice between it and the built-in one."""

import shutil
import stat
import time
from pathlib import Path

import pytest

from stepring.gather.types import Unit
from stepring.places import Notice
from stepring.read import compiler
from stepring.read.compiler import preprocess_with_compiler, run_reading, surroundings_of
from stepring.read.markers import absolute_markers, split_predefined, under
from stepring.read.preprocess import preprocess
from stepring.read.types import Preprocessed

GCC = shutil.which("gcc") or ""
AVR_GCC = shutil.which("avr-gcc") or ""
needs_gcc = pytest.mark.skipif(not GCC, reason="no gcc on PATH")
needs_avr_gcc = pytest.mark.skipif(not AVR_GCC, reason="no avr-gcc on PATH")


def unit(folder: Path, text: str | bytes, *options: str, program: str = GCC, name: str = "feeder.c") -> Unit:
    source = folder / name
    source.write_bytes(text if isinstance(text, bytes) else text.encode())
    return Unit(source, folder, "database", (program, *options))


def done(result: Preprocessed | Notice) -> Preprocessed:
    assert isinstance(result, Preprocessed), result
    return result


def program(folder: Path, text: str) -> str:
    path = folder / "feedcc"
    path.write_text("#!/bin/sh\n" + text)
    path.chmod(path.stat().st_mode | stat.S_IXUSR)
    return str(path)


@needs_gcc
def test_macros_stay_and_predefined_ones_are_told_apart(tmp_path: Path) -> None:
    text = "#define FEED_PRIME 3\nint state = FEED_PRIME;\n#undef FEED_PRIME\n"
    result = done(preprocess_with_compiler(unit(tmp_path, text, "-DSHORE=1")))
    assert "#define FEED_PRIME 3\nint state = 3;\n#undef FEED_PRIME\n" in result.text
    assert "#define SHORE 1\n" in result.text
    assert result.predefined["__SIZEOF_INT__"] == "4"
    assert "__SIZEOF_INT__" not in result.text
    assert result.complete
    assert result.notices == ()


@needs_avr_gcc
def test_the_target_decides(tmp_path: Path) -> None:
    result = done(preprocess_with_compiler(unit(tmp_path, "int x;\n", "-mmcu=atmega328p", program=AVR_GCC)))
    assert result.predefined["__SIZEOF_INT__"] == "2"
    assert "#define __AVR_ATmega328P__ 1\n" in result.text


@needs_gcc
def test_markers_are_absolute(tmp_path: Path) -> None:
    (tmp_path / "inc").mkdir()
    (tmp_path / "src").mkdir()
    (tmp_path / "inc/feed.h").write_text("int feed;\n")
    one = unit(tmp_path, '#include "../inc/feed.h"\nint x;\n', name="src/feeder.c")
    result = done(preprocess_with_compiler(one))
    assert f'# 1 "{tmp_path}/inc/feed.h" 1\n' in result.text
    assert ".." not in result.text


def test_marker_texts_of_all_kinds() -> None:
    text = '# 1 "a.c"\n# 3 "../b \\"q\\" \\\\.h" 1 3\n#line 7 "a.c"\n# 0 "<built-in>"\n#define M "# 1 \\"a.c\\""\n'
    assert absolute_markers(text, under(Path("/barge/src"))) == (
        '# 1 "/barge/src/a.c"\n'
        '# 3 "/barge/b \\"q\\" \\\\.h" 1 3\n'
        '# 7 "/barge/src/a.c"\n'
        '# 0 "<built-in>"\n'
        '#define M "# 1 \\"a.c\\""\n'
    )


def test_predefined_macros_end_where_the_command_line_begins() -> None:
    text = (
        '# 0 "a.c"\n# 0 "<built-in>"\n#define A 1\n# 0 "<built-in>"\n#define B(x) x\n'
        '# 0 "<command-line>"\n#define C 3\n# 1 "a.c"\n'
    )
    macros, rest = split_predefined(text)
    assert dict(macros) == {"A": "1", "B(x)": "x"}
    assert rest == '# 0 "<command-line>"\n#define C 3\n# 1 "a.c"\n'
    assert split_predefined("int x;\n") == ({}, "int x;\n")


@needs_gcc
def test_columns_count_characters(tmp_path: Path) -> None:
    """One stray byte of an old encoding is one character, beside valid UTF-8."""
    result = done(preprocess_with_compiler(unit(tmp_path, b'char *a = "\xe9", *b = "\xc3\xa9"; int after;\n')))
    line = next(line for line in result.text.splitlines() if "after" in line)
    assert line == 'char *a = "é", *b = "é"; int after;'


@needs_gcc
def test_a_rejected_unit_keeps_its_text(tmp_path: Path) -> None:
    result = done(preprocess_with_compiler(unit(tmp_path, "int a;\n#error no hopper\nint b;\n#error again\n")))
    assert "int a;" in result.text
    assert "int b;" in result.text
    assert not result.complete
    assert len(result.notices) == 1
    notice = result.notices[0]
    assert (notice.kind, notice.file, notice.line) == ("preprocessor", str(tmp_path / "feeder.c"), 2)
    assert "no hopper" in notice.text


@needs_gcc
def test_a_missing_header_falls_back_with_what_the_compiler_knows(tmp_path: Path) -> None:
    (tmp_path / "inc").mkdir()
    (tmp_path / "inc/feed.h").write_text("int feed;\n")
    text = '#include <limits.h>\n#include "feed.h"\n#include "gone.h"\nlong most = LONG_MAX;\n'
    one = unit(tmp_path, text, f"-I{tmp_path}/inc", "-DSHORE=1")
    one = Unit(one.source, one.directory, "database", one.arguments, (tmp_path / "inc",), ("SHORE=1",))
    alone = preprocess_with_compiler(one)
    assert isinstance(alone, Notice)
    assert (alone.kind, alone.line, alone.column) == ("missing-header", 3, 10)
    assert "gone.h" in alone.text
    result = preprocess(one, data_model="IP16")
    assert "int feed;" in result.text
    assert "long most = 0x7fffffffffffffffL;" in result.text
    assert "#define SHORE 1\n" in result.text
    assert result.predefined["__SIZEOF_LONG__"] == "8"
    assert not result.complete
    assert {notice.kind for notice in result.notices} == {"missing-header"}


@needs_gcc
def test_no_program_runs_where_that_is_not_allowed(tmp_path: Path) -> None:
    mark = tmp_path / "mark"
    one = unit(tmp_path, "int x;\n", program=program(tmp_path, f'touch "{mark}"\n'))
    result = preprocess(one, data_model="ILP32", allow_compiler=False)
    assert not mark.exists()
    assert "int x;" in result.text
    preprocess(one, data_model="ILP32")
    assert mark.exists()


def test_a_program_that_is_gone(tmp_path: Path) -> None:
    result = preprocess(unit(tmp_path, "int x;\n", program="/nowhere/gcc"), data_model="ILP32")
    assert "int x;" in result.text
    assert [notice.kind for notice in result.notices] == ["preprocessor"]
    assert "no such file" in result.notices[0].text


def test_a_program_that_is_no_program(tmp_path: Path) -> None:
    path = tmp_path / "feedcc"
    path.write_bytes(b"\x7fELF nonsense")
    path.chmod(0o755)
    result = preprocess(unit(tmp_path, "int x;\n", program=str(path)), data_model="ILP32")
    assert "int x;" in result.text
    assert [notice.kind for notice in result.notices] == ["preprocessor"]


def test_a_program_that_does_not_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(compiler, "TIME_LIMIT", 0.5)
    start = time.monotonic()
    output = run_reading([program(tmp_path, "sleep 60 &\nsleep 60\n")])
    assert "did not finish" in str(output.ended)
    assert time.monotonic() - start < 30


def test_a_program_that_closes_its_output_and_goes_on(tmp_path: Path) -> None:
    start = time.monotonic()
    output = run_reading([program(tmp_path, "exec >&- 2>&-\nsleep 60\n")])
    assert output.ended != 0
    assert time.monotonic() - start < 30


def test_a_program_that_prints_without_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(compiler, "OUTPUT_LIMIT", 4_000_000)
    output = run_reading([program(tmp_path, "yes 'int x;'\n")])
    assert "printed more than" in str(output.ended)
    assert 4_000_000 < len(output.text) < 8_000_000


def test_a_program_that_complains_without_end(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(compiler, "TIME_LIMIT", 1.0)
    output = run_reading([program(tmp_path, "yes 'warning' >&2\n")])
    assert "did not finish" in str(output.ended)
    assert len(output.messages) < 4_000_000


def test_a_program_that_is_killed(tmp_path: Path) -> None:
    assert run_reading([program(tmp_path, "kill -9 $$\n")]).ended == "ended by signal 9"


def test_a_program_gets_no_input_and_a_folder_of_its_own(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    monkeypatch.setenv("LD_PRELOAD", "")
    monkeypatch.setenv("CPATH", "/evil")
    output = run_reading([program(tmp_path, 'pwd\ncat\necho "[$CPATH][$LC_ALL]"\n')])
    assert output.text.decode() == "/\n[][C]\n"


def test_a_program_cannot_make_a_file_grow(tmp_path: Path) -> None:
    resource = pytest.importorskip("resource")
    if not hasattr(resource, "prlimit"):
        pytest.skip("the system cannot limit another process")
    target = tmp_path / "target"
    output = run_reading([program(tmp_path, f'sleep 0.3\necho text > "{target}"\necho done\n')])
    assert not target.exists() or target.stat().st_size == 0
    assert output.ended != 0 or b"done" in output.text


@needs_gcc
def test_endless_input_is_cut_off(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(compiler, "TIME_LIMIT", 1.0)
    one = unit(tmp_path, '#include "/dev/zero"\nint x;\n')
    start = time.monotonic()
    result = preprocess(one, data_model="LP64")
    assert time.monotonic() - start < 30
    assert "int x;" in result.text
    assert not result.complete


@needs_gcc
def test_surroundings(tmp_path: Path) -> None:
    found = surroundings_of(unit(tmp_path, "", "-DX=1", "-std=c99"))
    assert found is not None
    assert found.predefined["__STDC_VERSION__"] == "199901L"
    assert "X" not in found.predefined
    assert any((folder / "stdint.h").is_file() for folder in found.folders)
    assert surroundings_of(Unit(tmp_path / "a.c", tmp_path, "source")) is None
    assert surroundings_of(unit(tmp_path, "", program=program(tmp_path, "exit 3\n"))) is None


@needs_gcc
@pytest.mark.parametrize(
    "text",
    [
        b"",
        b"\n" * 1000,
        b'int x = "not closed;\n',
        b"/* not closed\n",
        b"#if 1\n" * 10_000,
        b"int x = " + b"(" * 10_000 + b"1" + b")" * 10_000 + b";\n",
        b"int x = 1" + b" + 1" * 1_000_000 + b";\n",
        b"\xff\xfe\xfd\n",
        b'#include "feeder.c"\n',
        b"#include\n#define\n#undef\n#if\n#bad\n",
    ],
)
def test_strange_sources_give_a_text_or_a_sentence(tmp_path: Path, text: bytes) -> None:
    one = unit(tmp_path, text)
    for allowed in (True, False):
        result = preprocess(one, data_model="LP64", allow_compiler=allowed)
        assert isinstance(result.text, str)
        assert "internal" not in {notice.kind for notice in result.notices}
        assert result.complete or result.notices


# -- .i files --------------------------------------------------------------------------------------------------------


def as_it_is(path: Path) -> Preprocessed:
    return preprocess(Unit(path, path.parent, "preprocessed"), data_model="LP64")


def test_a_preprocessed_file_without_markers_gets_one(tmp_path: Path) -> None:
    path = tmp_path / "feeder.i"
    path.write_text("int x;\n")
    assert as_it_is(path).text == f'# 1 "{path}"\nint x;\n'


def test_a_preprocessed_file_keeps_its_markers(tmp_path: Path) -> None:
    (tmp_path / "src").mkdir()
    (tmp_path / "build").mkdir()
    (tmp_path / "src/feeder.c").write_text("int x;\n")
    path = tmp_path / "build/feeder.i"
    path.write_text('#line 1 "src/feeder.c"\nint x;\n# 9 "gone.h" 1 3\nint y;\n')
    assert as_it_is(path).text == (
        f'# 1 "{tmp_path}/src/feeder.c"\nint x;\n# 9 "{tmp_path}/build/gone.h" 1 3\nint y;\n'
    )


def test_a_preprocessed_file_that_is_not_text(tmp_path: Path) -> None:
    path = tmp_path / "feeder.i"
    path.write_bytes(b"int x;\0")
    assert [notice.kind for notice in as_it_is(path).notices] == ["not-text"]
    assert [notice.kind for notice in as_it_is(tmp_path / "gone.i").notices] == ["unreadable-file"]
