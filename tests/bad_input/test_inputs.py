"""Inputs that are wrong in some way: one clear sentence on standard error, the rest of the work done, no traceback.

Beside each bad input lies a good file with a known finding, which has to be reported all the same.
"""

import json
import os
import re
import shutil
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import pytest

from stepring.cli import main

GOOD = """
enum blower { STILL, BLOWING, JAMMED };
static enum blower blower;
int asked(void); int stuck(void);
void step(void)
{
    switch (blower) {
    case STILL: if (asked()) { blower = BLOWING; } break;
    case BLOWING: if (stuck()) { blower = JAMMED; } else if (!asked()) { blower = STILL; } break;
    case JAMMED: break;
    }
    blower = blower == STILL ? STILL : blower;
}
void broken(void) { if (blower == BLOWING) { blower = 7; } }
"""
FINDING = re.compile(r"^good\.c:14:\d+: warning, rule SM05: ", re.MULTILINE)
SEEN = 1
"""The exit code where the finding was reported."""


class Said:
    """What a run gave: its exit code, the report, and the sentences on standard error."""

    def __init__(self, code: int, out: str, err: str) -> None:
        self.code, self.out, self.err = code, out, err
        self.sentences = err.splitlines()
        assert "Traceback" not in err + out
        assert all(line.startswith("stepring: ") for line in self.sentences), err
        assert all(len(line) < 600 for line in self.sentences), err
        assert "stage failed" not in err, err

    def about(self, word: str) -> list[str]:
        return [sentence for sentence in self.sentences if word in sentence]


Run = Callable[..., Said]


@pytest.fixture
def run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    """Inspect the temporary folder, which holds the good file, with ``main`` in this process."""
    (tmp_path / "good.c").write_text(GOOD, encoding="utf-8")
    monkeypatch.chdir(tmp_path)

    def inspect(*arguments: str) -> Said:
        code = main(["inspect", "--report", "lines", "--jobs", "1", *arguments])
        shown = capsys.readouterr()
        return Said(code, shown.out, shown.err)

    return inspect


def alone(folder: Path, *arguments: str, seconds: int = 100) -> Said:
    """The same in a process of its own, for what could take the interpreter down."""
    (folder / "good.c").write_text(GOOD, encoding="utf-8")
    command = [sys.executable, "-m", "stepring", "inspect", "--report", "lines", "--jobs", "1", *arguments]
    ended = subprocess.run(command, cwd=folder, capture_output=True, text=True, check=False, timeout=seconds)
    return Said(ended.returncode, ended.stdout, ended.stderr)


def test_the_good_file_alone(run: Run) -> None:
    said = run()
    assert (said.code, said.sentences) == (SEEN, [])
    assert FINDING.search(said.out)


# ---------------------------------------------------------------------------------------------------------- files


def test_a_missing_path(run: Run) -> None:
    said = run("good.c", "gone.c")
    assert said.code == 2
    assert FINDING.search(said.out)
    assert len(said.sentences) == len(said.about("gone.c")) == 1


def test_a_file_that_may_not_be_read(run: Run, tmp_path: Path) -> None:
    (tmp_path / "loop.c").symlink_to("loop.c")
    (tmp_path / "folder.c").mkdir()
    said = run("good.c", "loop.c")
    assert said.code == 2
    assert FINDING.search(said.out)
    assert len(said.sentences) == len(said.about("loop.c")) == 1


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser may read everything")
def test_a_file_without_permission(run: Run, tmp_path: Path) -> None:
    (tmp_path / "locked.c").write_text("int x;")
    (tmp_path / "locked.c").chmod(0)
    said = run()
    assert FINDING.search(said.out)
    assert len(said.sentences) == len(said.about("locked.c")) == 1


@pytest.mark.parametrize("data", [b"\x7fELF\x02\x01\x01" + bytes(range(256)) * 40, bytes(5000)])
def test_a_file_that_is_no_text(run: Run, tmp_path: Path, data: bytes) -> None:
    (tmp_path / "feeder.c").write_bytes(data)
    said = run()
    assert FINDING.search(said.out)
    assert len(said.sentences) == len(said.about("feeder.c")) == 1


def test_an_empty_folder(run: Run, tmp_path: Path) -> None:
    (tmp_path / "empty").mkdir()
    said = run("empty")
    assert said.code == 2
    assert len(said.sentences) == len(said.about("no C was found")) == 1


def test_bytes_that_are_no_utf_8(run: Run, tmp_path: Path) -> None:
    """A comment and a string in another encoding cost nothing, not even a column."""
    bad = (
        GOOD.encode().replace(b"int asked", b"/* K\xf6der \xff\xfe */ int asked").replace(b"void broken", b"void other")
    )
    (tmp_path / "feeder.c").write_bytes(bad + b'const char *word = "\xe4\xf6\xfc";\n')
    said = run()
    assert said.code == SEEN
    assert len(FINDING.findall(said.out)) == 1
    assert re.search(r"^feeder\.c:14:\d+: warning, rule SM05", said.out, re.MULTILINE)
    assert all("feeder.c" in sentence for sentence in said.sentences)


# ---------------------------------------------------------------------------------------------------------- databases


DATABASES = {
    "no JSON": "[{,]",
    "cut off": '[{"directory": ".", "file": "good.c"',
    "no list": '{"directory": "."}',
    "a list of a number": "[1]",
    "an entry without a file": '[{"directory": ".", "command": "cc -c good.c"}]',
    "a number for a file": '[{"directory": ".", "file": 3, "command": "cc -c good.c"}]',
    "no text": "\x00\x01",
    "empty": "",
    "an empty list": "[]",
    "deep": "[" * 100_000,
}


@pytest.mark.parametrize("kind", DATABASES)
def test_a_database_that_is_malformed(run: Run, tmp_path: Path, kind: str) -> None:
    (tmp_path / "build.json").write_text(DATABASES[kind])
    said = run("--compile-commands", "build.json", "good.c")
    assert FINDING.search(said.out), said.err
    assert len(said.about("build.json")) == 1
    assert len(said.sentences) == 1


def test_a_database_that_is_not_there(run: Run) -> None:
    said = run("--compile-commands", "gone.json", "good.c")
    assert said.code == 2
    assert FINDING.search(said.out)
    assert len(said.sentences) == len(said.about("gone.json")) == 1


def test_a_database_that_names_missing_files_and_a_missing_compiler(run: Run, tmp_path: Path) -> None:
    entries = [
        {"directory": str(tmp_path), "file": "gone.c", "arguments": ["cc", "-c", "gone.c"]},
        {"directory": str(tmp_path), "file": "good.c", "arguments": ["no-such-gcc", "-c", "good.c"]},
        {"directory": str(tmp_path / "no folder"), "file": "other.c", "command": "cc -c other.c"},
    ]
    (tmp_path / "compile_commands.json").write_text(json.dumps(entries))
    said = run()
    assert FINDING.search(said.out)
    assert len(said.about("gone.c")) == len(said.about("other.c")) == len(said.about("no-such-gcc")) == 1
    assert len(said.sentences) == 3


def test_a_database_that_is_told_to_run_other_programs(run: Run, tmp_path: Path) -> None:
    mark = tmp_path / "ran"
    script = tmp_path / "evil-cc"
    script.write_text(f"#!/bin/sh\ntouch {mark}\n")
    script.chmod(0o755)
    options = ["-wrapper", f"touch,{mark}", f"-fplugin={script}", "-o", str(mark), f"-specs={script}"]
    entries = [
        {"directory": str(tmp_path), "file": "good.c", "arguments": ["cc", *options, "-c", "good.c"]},
        {"directory": str(tmp_path), "file": "other.c", "arguments": [str(script), "-c", "other.c"]},
        {"directory": str(tmp_path), "file": "third.c", "command": f"cc -c third.c; touch {mark}"},
    ]
    for name in ("other.c", "third.c"):
        (tmp_path / name).write_text("int x;\n")
    (tmp_path / "compile_commands.json").write_text(json.dumps(entries))
    said = run("--compiler", "cc")
    assert FINDING.search(said.out)
    assert not mark.exists()
    assert said.about("-wrapper") and said.about("evil-cc")


@pytest.mark.skipif(shutil.which("gcc") is None, reason="this machine has no compiler named gcc")
def test_a_unit_that_the_compiler_rejects(run: Run, tmp_path: Path) -> None:
    (tmp_path / "feeder.c").write_text("#error this board has no feeder\nint x;\n")
    entries = [
        {"directory": str(tmp_path), "file": name, "arguments": ["gcc", "-c", name]} for name in ("feeder.c", "good.c")
    ]
    (tmp_path / "compile_commands.json").write_text(json.dumps(entries))
    said = run()
    assert said.code == SEEN
    assert FINDING.search(said.out)
    assert said.about("this board has no feeder")
    assert said.sentences == said.about("feeder.c")


# ---------------------------------------------------------------------------------------------------------- C


BAD_C = {
    "a declaration that cannot be parsed": "int x = = 3;\nint after(void) { return 1; }\n",
    "a function that cannot be parsed": "int f(void) { return 1 +; }\nint after(void) { return 1; }\n",
    "a string that is not closed": 'const char *s = "feed;\nint after(void) { return 1; }\n',
    "a character that is not closed": "int c = 'f;\nint after(void) { return 1; }\n",
    "a comment that is not closed": "int x; /* feed\nint after(void) { return 1; }\n",
    "a brace that is not closed": "int f(void) { if (1) { return 1; }\nint after(void) { return 1; }\n",
    "a brace too many": "int f(void) { return 1; } }\nint after(void) { return 1; }\n",
    "a parenthesis that is not closed": "int f(void) { return (1 + 2; }\nint after(void) { return 1; }\n",
    "an #if that is not closed": "#if 1\nint after(void) { return 1; }\n",
    "an #else alone": "#else\nint after(void) { return 1; }\n",
    "a condition that is none": "#if 1 +\n#endif\nint after(void) { return 1; }\n",
    "a macro's call that is not closed": "#define M(a, b) a\nint x = M(1,\n",
    "a macro with the wrong number of arguments": "#define M(a, b) a\nint x = M(1);\nint after(void) { return 1; }\n",
    "a file that includes itself": '#include "feeder.c"\nint after(void) { return 1; }\n',
    "an #error": "#error no feeder\nint after(void) { return 1; }\n",
    "a division by zero in a condition": "#if 1 / 0\n#endif\nint after(void) { return 1; }\n",
    "a case outside a switch": "int f(void) { case 1: return 1; }\nint after(void) { return 1; }\n",
    "a break outside a loop": "int f(void) { break; return 1; }\nint after(void) { return 1; }\n",
    "a goto nowhere": "int f(void) { goto nowhere; return 1; }\nint after(void) { return 1; }\n",
    "two cases of one value": "int f(int x) { switch (x) { case 1: return 1; case 1: return 2; } return 0; }\n",
    "another language": "def feed(kg):\n    return [kg for _ in range(3)]\n",
    "an array of negative size": "int a[-3];\nint f(void) { return a[0]; }\n",
    "a structure that contains itself": "struct s { struct s inner; };\nint f(struct s *p) { return !&p->inner; }\n",
}
SILENT = {
    # What C compilers take or what changes nothing that is looked at.
    "a case outside a switch",
    "a break outside a loop",
    "a goto nowhere",
    "two cases of one value",
    "an array of negative size",
    "a structure that contains itself",
    "a brace too many",
}


@pytest.mark.parametrize("kind", BAD_C)
def test_c_that_is_wrong(run: Run, tmp_path: Path, kind: str) -> None:
    (tmp_path / "feeder.c").write_text(BAD_C[kind])
    said = run("--no-compiler")
    assert said.code == SEEN
    assert FINDING.search(said.out)
    assert said.sentences == said.about("feeder.c")
    assert len(said.sentences) <= 2
    if kind not in SILENT:
        assert said.sentences, kind
        assert all(re.search(r"feeder\.c(, line \d+)?", sentence) for sentence in said.sentences)


def test_headers_that_include_each_other(run: Run, tmp_path: Path) -> None:
    (tmp_path / "a.h").write_text('#include "b.h"\nint a;\n')
    (tmp_path / "b.h").write_text('#include "a.h"\nint b;\n')
    (tmp_path / "feeder.c").write_text('#include "a.h"\nint f(void) { return a + b; }\n')
    said = run("--no-compiler")
    assert said.code == SEEN
    assert FINDING.search(said.out)
    assert len(said.sentences) == 1
    assert "cycle" in said.sentences[0]


@pytest.mark.skipif(shutil.which("cc") is None, reason="this machine has no C compiler named cc")
def test_headers_that_include_each_other_with_a_compiler(run: Run, tmp_path: Path) -> None:
    (tmp_path / "feeder.h").write_text('#include "feeder.h"\nint a;\n')
    (tmp_path / "feeder.c").write_text('#include "feeder.h"\nint f(void) { return a; }\n')
    entries = [
        {"directory": str(tmp_path), "file": name, "arguments": ["cc", "-c", name]} for name in ("feeder.c", "good.c")
    ]
    (tmp_path / "compile_commands.json").write_text(json.dumps(entries))
    said = run("--compiler", "cc")
    assert FINDING.search(said.out)
    assert said.sentences == said.about("feeder")
    assert 1 <= len(said.sentences) <= 3


# ---------------------------------------------------------------------------------------------------------- size

DEEP = 10_000
DEEP_C = {
    "parentheses": f"int f(int x) {{ return {'(' * DEEP}x{')' * DEEP}; }}",
    "blocks": f"int f(int x) {{ {'{' * DEEP} x++; {'}' * DEEP} return x; }}",
    "ifs": f"int f(int x) {{ {'if (x) ' * DEEP} x++; return x; }}",
    "else-ifs": "int f(int x) { " + "".join(f"if (x == {n}) x += 2; else " for n in range(DEEP)) + "x = 0; return x; }",
    "loops": f"int f(int x) {{ {'while (x) ' * DEEP} x--; return x; }}",
    "signs": f"int f(int x) {{ return {'- ' * DEEP} x; }}",
    "sums": f"int f(int x) {{ return {'x + ' * DEEP} x; }}",
    "choices": f"int f(int x) {{ return {'x ? 1 : ' * DEEP} 2; }}",
    "pointers": f"int {'*' * DEEP} p;",
    "subscripts": f"extern int a; int f(void) {{ return a{'[0]' * DEEP}; }}",
    "calls": f"int g(int x); int f(int x) {{ return {'g(' * DEEP}x{')' * DEEP}; }}",
    "initialisers": f"int a = {'{' * DEEP}1{'}' * DEEP};",
    "structures": "".join(f"struct s{n} {{ " for n in range(DEEP)) + "int x;" + "} m; " * DEEP + ";",
    "conditions": "#if 1\n" * DEEP + "int x;\n" + "#endif\n" * DEEP,
    "a condition's parentheses": f"#if {'(' * DEEP}1{')' * DEEP}\nint x;\n#endif",
    "macros": "#define M0 1\n" + "".join(f"#define M{n + 1} M{n}\n" for n in range(DEEP)) + f"int x = M{DEEP};\n",
}


@pytest.mark.parametrize("kind", DEEP_C)
def test_nesting_ten_thousand_deep(tmp_path: Path, kind: str) -> None:
    (tmp_path / "feeder.c").write_text(DEEP_C[kind] + "\nint after(void) { return 1; }\n")
    said = alone(tmp_path, "--no-compiler")
    assert said.code == SEEN, said.err
    assert FINDING.search(said.out)
    assert said.sentences == said.about("feeder.c")
    assert len(said.sentences) <= 2


LONG = 10_000_000
LONG_C = {
    "a comment": "/* " + "x" * LONG + " */ int after(void) { return 1; }\n",
    "a string": 'const char s[] = "' + "x" * LONG + '";\n',
    "a name": "int " + "x" * LONG + ";\n",
    "numbers": "const unsigned char picture[] = {" + f"0x{255:040x}," * (LONG // 43) + "};\n",
    "blanks": "int x;" + " " * LONG + "int y;\n",
}


@pytest.mark.parametrize("kind", LONG_C)
def test_a_line_of_ten_megabytes(tmp_path: Path, kind: str) -> None:
    (tmp_path / "feeder.c").write_text(LONG_C[kind])
    start = time.monotonic()
    said = alone(tmp_path, "--no-compiler", seconds=200)
    assert said.code == SEEN
    assert FINDING.search(said.out)
    assert said.sentences == said.about("feeder.c")
    assert len(said.sentences) <= 1
    assert time.monotonic() - start < 150


def test_macros_that_grow_without_end(tmp_path: Path) -> None:
    """Each of 40 macros is twice the one before: a terabyte of text, were it expanded."""
    lines = "#define M0 1 +\n" + "".join(f"#define M{n + 1} M{n} M{n}\n" for n in range(40))
    (tmp_path / "feeder.c").write_text(lines + "int x = M40 1;\nint after(void) { return 1; }\n")
    said = alone(tmp_path, "--no-compiler")
    assert said.code == SEEN
    assert FINDING.search(said.out)
    assert said.sentences == said.about("feeder.c")
    assert 1 <= len(said.sentences) <= 2


# ---------------------------------------------------------------------------------------------------------- settings


@pytest.mark.parametrize(
    ("text", "line", "words"),
    [
        ("[inspect]\nexclude = [\n", 3, "none of its settings"),
        ("[inspect]\n\nfail-level = 'loud'\n", 3, "fail-level has to be one of"),
        ("[inspect]\ndata-model = 'IP17'\n", 2, "data-model has to be one of"),
        ("[inspect]\nfail-level = 'note'\ncolour = 'red'\n", 3, "'colour' is not known"),
        (b"\n\xff\n", 2, "UTF-8"),
    ],
)
def test_settings_that_are_malformed(run: Run, tmp_path: Path, text: str | bytes, line: int, words: str) -> None:
    (tmp_path / "stepring.toml").write_bytes(text if isinstance(text, bytes) else text.encode())
    said = run()
    assert said.code == 2
    assert FINDING.search(said.out)
    (sentence,) = said.sentences
    assert sentence.startswith(f"stepring: error: stepring.toml, line {line}: ")
    assert words in sentence


def test_settings_take_effect(run: Run, tmp_path: Path) -> None:
    (tmp_path / "vendor").mkdir()
    (tmp_path / "vendor" / "feeder.c").write_text(GOOD)
    (tmp_path / "stepring.toml").write_text('[inspect]\nexclude = ["vendor/**"]\nfail-level = "error"\n')
    said = run()
    assert said.code == 0
    assert FINDING.search(said.out)
    assert "vendor" not in said.out
    assert run("--fail-level", "warning").code == SEEN
    assert "vendor/feeder.c:14:" in run("vendor/feeder.c").out  # what is named itself is read


def test_settings_above_the_inspected_folder_count_within_one_repository(run: Run, tmp_path: Path) -> None:
    (tmp_path / ".git").mkdir()
    (tmp_path / "src" / "deep").mkdir(parents=True)
    shutil.move(tmp_path / "good.c", tmp_path / "src" / "deep" / "good.c")
    (tmp_path / "stepring.toml").write_text('[inspect]\nfail-level = "none"\n')
    assert run("src/deep").code == 0
    (tmp_path / "src" / "stepring.toml").write_text('[inspect]\nfail-level = "warning"\n')
    assert run("src/deep").code == SEEN


# ---------------------------------------------------------------------------------------------------------- commands


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["rule", "SM99"], "there is no rule 'SM99'"),
        (["rule", "\x1b[31m"], "there is no rule"),
        (["inspect", "--data-model", "IP17"], "IP17"),
        (["inspect", "--jobs", "many"], "many"),
        (["inspect", "--jobs", "0"], "0"),
        (["inspect", "--kind", "maybe"], "maybe"),
        (["inspect", "--no-such-option"], "--no-such-option"),
        (["look"], "look"),
    ],
)
def test_commands_that_ask_for_what_is_not_there(
    run: Run, capsys: pytest.CaptureFixture[str], arguments: list[str], words: str
) -> None:
    assert main(arguments) == 2
    shown = capsys.readouterr()
    assert words in shown.err
    assert "Traceback" not in shown.err
    assert "\x1b" not in shown.err
    assert len(shown.err.splitlines()) <= 4
