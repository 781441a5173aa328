"""What is left of compiler options."""

from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from stepring.gather.options import reduce_options, split_command

HERE = Path("/barge/build")


def kept(*arguments: str) -> tuple[str, ...]:
    return reduce_options(arguments, HERE).kept


def dropped(*arguments: str) -> tuple[str, ...]:
    return reduce_options(arguments, HERE).dropped


@pytest.mark.parametrize(
    ("command", "words"),
    [
        ("gcc -c a.c", ["gcc", "-c", "a.c"]),
        ('gcc -DNAME=\\"auger\\" a.c', ["gcc", '-DNAME="auger"', "a.c"]),
        ('gcc "-DNAME=two words" a.c', ["gcc", "-DNAME=two words", "a.c"]),
        ('gcc -D"NAME=two words" a.c', ["gcc", "-DNAME=two words", "a.c"]),
        ('gcc "C:\\\\src\\\\a.c"', ["gcc", "C:\\src\\a.c"]),
        ('gcc "a\\b.c"', ["gcc", "a\\b.c"]),
        ("gcc my\\ file.c", ["gcc", "my file.c"]),
        ("gcc $HOME *.c '-DX'", ["gcc", "$HOME", "*.c", "'-DX'"]),
        ('gcc "" a.c', ["gcc", "", "a.c"]),
        ("  gcc\t-c\n a.c ", ["gcc", "-c", "a.c"]),
        ('gcc "not closed', ["gcc", "not closed"]),
        ("gcc end\\", ["gcc", "end\\"]),
    ],
)
def test_a_command_is_split_without_a_shell(command: str, words: list[str]) -> None:
    assert split_command(command) == words


@given(st.lists(st.text(st.characters(blacklist_characters="\0"), min_size=1), min_size=1))
def test_any_quoted_words_come_back(words: list[str]) -> None:
    quoted = " ".join('"' + word.replace("\\", "\\\\").replace('"', '\\"') + '"' for word in words)
    assert split_command(quoted) == words


def test_options_that_shape_the_text_are_kept() -> None:
    text = "-DA=1 -UB -std=gnu11 -mmcu=atmega328p -mthumb -funsigned-char -fshort-enums -Os -ansi -pthread"
    options = text.split()
    assert kept(*options) == tuple(options)
    assert dropped(*options) == ()


def test_paths_become_absolute() -> None:
    reduced = reduce_options(
        ["-I", "inc", "-Isrc/../inc2", "-isystem", "sys", "-iquote", "q", "-idirafter", "/z"], HERE
    )
    assert reduced.kept == (
        "-I/barge/build/inc",
        "-I/barge/build/inc2",
        "-isystem",
        "/barge/build/sys",
        "-iquote",
        "/barge/build/q",
        "-idirafter",
        "/z",
    )
    # The order in which a compiler searches, whatever the order of the options.
    assert [str(folder) for folder in reduced.include_folders] == [
        "/barge/build/q",
        "/barge/build/inc",
        "/barge/build/inc2",
        "/barge/build/sys",
        "/z",
    ]


def test_defines_are_told_to_the_built_in_preprocessor() -> None:
    reduced = reduce_options(["-DA", "-D", "B=2", "-DC=1", "-UC", '-DS="x"', "-DF(x)=x"], HERE)
    assert reduced.defines == ("A=1", "B=2", 'S="x"', "F(x)=x")


def test_forced_headers(tmp_path: Path) -> None:
    (tmp_path / "config.h").write_text("")
    reduced = reduce_options(["-include", "config.h", "-imacros", "other.h"], tmp_path)
    assert reduced.kept == ("-include", str(tmp_path / "config.h"), "-imacros", "other.h")
    assert reduced.included == (tmp_path / "config.h",)
    assert reduced.macro_files == (Path("other.h"),)


def test_ordinary_options_go_without_a_word() -> None:
    ordinary = """-c -o x.o -MD -MMD -MP -MF x.d -MT x.o -Wall -Wextra -Werror=format -g -g3 -ggdb -gdwarf-4 -pipe
        -ffunction-sections -fdata-sections -flto -fno-exceptions -fomit-frame-pointer -fstack-protector-strong
        -Wl,--gc-sections -lm -L lib -T link.ld -nostdlib --param max-inline=4 -fdiagnostics-color=always a.c b.o"""
    reduced = reduce_options(ordinary.split(), HERE)
    assert reduced.dropped == ()
    assert all(not option.startswith(("-o", "-M", "-W", "-g", "-l", "-L", "-T")) for option in reduced.kept)


@pytest.mark.parametrize(
    "options",
    [
        "-fplugin=x.so",
        "-fplugin-arg-x-y=1",
        "-fpass-plugin=x.so",
        "-Xclang -load -Xclang x.so",
        "-load x.so",
        "-wrapper gdb,--args",
        "-B.",
        "-B tools",
        "--prefix=tools",
        "-specs=x",
        "--specs=x",
        "-specs x",
        "-no-canonical-prefixes",
        "-iplugindir=x",
        "@x",
        "-Wp,-MD,x",
        "-Wp,-MMD,x",
        "-Xpreprocessor -MD",
        "-Xassembler -a=x",
        "-Wa,-adhln=x",
        "-Wl,@x",
        "-save-temps",
        "--save-temps",
        "-dumpdir x",
        "-dumpbase x",
        "-fdump-tree-all",
        "-fdump-go-spec=x",
        "-ftime-trace=x",
        "-gsplit-dwarf",
        "-fprofile-generate=x",
        "-fprofile-use",
        "--coverage",
        "-ftest-coverage",
        "-aux-info x",
        "-fcallgraph-info",
        "-fstack-usage",
        "-fdiagnostics-add-output=sarif:file=x",
        "-mllvm -info-output-file=x",
        "-include @x",
        "-imacros @x",
        "--config=x",
        "-fmodules-cache-path=x",
        "-mmcu=../x",
        "-some-new-option",
    ],
)
def test_options_that_load_run_or_write_are_dropped_and_said(options: str) -> None:
    words = options.split()
    reduced = reduce_options([*words, "-DAFTER"], HERE)
    assert reduced.kept == ("-DAFTER",)
    assert len(reduced.dropped) >= 1
    assert reduced.dropped[0].startswith(words[0])


def test_what_is_handed_on_to_the_preprocessor_goes_through_the_same_list() -> None:
    assert kept("-Wp,-DA=1,-UB", "-Xpreprocessor", "-DC") == ("-DA=1", "-UB", "-DC")


def test_no_sysroot_beside_a_device_name() -> None:
    assert kept("--sysroot=/opt/x", "-mcpu=cortex-m4") == ("-mcpu=cortex-m4", "--sysroot=/opt/x")
    assert kept("--sysroot=/opt/x", "-mmcu=atmega8") == ("-mmcu=atmega8",)
    assert dropped("--sysroot=/opt/x", "-mmcu=atmega8") == ("--sysroot=/opt/x",)


_pieces = st.sampled_from(
    ["@x", "-I", "-D", "-include", "-imacros", "-isystem", "-o", "-Xclang", "-Wp,", "-Wp,-MD,x", "-x", "c", "-wrapper"]
)


@given(st.lists(_pieces | st.text(max_size=8), max_size=8))
def test_no_combination_lets_a_response_file_or_an_output_through(arguments: list[str]) -> None:
    reduced = reduce_options(arguments, HERE)
    assert not any(option.startswith(("@", "-o", "-wrapper", "-Xclang", "-Wp", "-M")) for option in reduced.kept)
