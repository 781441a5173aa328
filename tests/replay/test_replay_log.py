"""A log's witnesses replayed: in the interpreter, as programs, and everything that can be amiss."""

import json
import os
import re
import shutil
import subprocess
import sys
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

sys.path.insert(0, str(Path(__file__).parent))
sys.path.insert(0, str(Path(__file__).parent.parent / "report"))

from barge_log import (
    QUEUE,
    at,
    bounds,
    log_of,
    undefined,
    witness,
    witnesses,
    write_project,
)
from log_checks import assert_sound

from stepring.cli import main
from stepring.paths import driver_build
from stepring.paths.witness import Ending, Made, OutsideValue, Reference, StartValue, Witness, WitnessCall
from stepring.replaying import Judged, Wishes, replay_log
from stepring.witness_log import read_log

HOST = next((name for name in driver_build.COMPILERS if shutil.which(name)), None)
needs_host = pytest.mark.skipif(HOST is None, reason="no C compiler (cc, gcc, clang) is on PATH to build programs with")


@pytest.fixture
def project(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """The project; the current folder is its root."""
    root = tmp_path / "barge firmware"
    root.mkdir()
    write_project(root)
    monkeypatch.chdir(root)
    return root


def judged(root: Path, *given: Witness, wishes: Wishes | None = None) -> list[Judged]:
    """The witnesses' judgements, in the order of the witnesses (that of the log is by place)."""
    log = read_log(log_of(root, given))
    return sorted(replay_log(log, root, wishes or Wishes()), key=lambda one: one.claim.text)


def interpreted(root: Path, *given: Witness) -> list[Judged]:
    return judged(root, *given, wishes=Wishes(compile=False))


# ----------------------------------------------------------------------------------------------------- the good cases


@needs_host
def test_every_kind_of_witness_is_replayed_both_ways(project: Path) -> None:
    given = witnesses(project)
    for name, one in zip(given, judged(project, *given.values()), strict=True):
        assert one.held, f"{name}: {one.why}"
        assert one.ended == "stopped", f"{name}: {one.program_why}"


def test_the_interpreter_needs_no_compiler_at_all(project: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    log = log_of(project, list(witnesses(project).values()), use_compiler=False, data_model="LP64")

    def never(*_: Any) -> None:
        raise AssertionError("a program was run")

    monkeypatch.setattr(subprocess, "Popen", never)
    assert main(["replay", str(log), "--no-programs"]) == 0


def test_a_log_is_replayed_wherever_the_project_lies(project: Path, tmp_path: Path, capsys: Any) -> None:
    log = log_of(project, [bounds(project)])
    other = tmp_path / "elsewhere"
    shutil.copytree(project, other)
    shutil.rmtree(project / "src")
    assert main(["replay", str(log), "--root", str(other), "--no-programs"]) == 0
    assert "replayed: the subscript in q->slots[q->head] is 4" in capsys.readouterr().out


def test_a_log_of_a_folder_without_a_database(project: Path) -> None:
    (project / "compile_commands.json").unlink()
    header = project / "include/queue.h"
    header.write_text(header.read_text("utf-8").replace("slots[SLOTS]", "slots[4]"), "utf-8")
    level = project / "src/level.c"
    level.write_text(level.read_text("utf-8").replace("SCALE", "3"), "utf-8")
    (one,) = interpreted(project, replace(bounds(project), model="ILP32"))
    assert one.held, one.why


def test_a_log_with_witnesses_is_sound(project: Path) -> None:
    log = json.loads(log_of(project, list(witnesses(project).values())).read_text("utf-8"))
    assert_sound(log, project)


@needs_host
def test_the_report_and_the_exit_code(project: Path, capsys: Any) -> None:
    log = log_of(project, [bounds(project)])
    assert main(["replay", str(log), "--keep", "checks"]) == 0
    line = at(project, "q->slots[q->head]").line
    out = capsys.readouterr().out
    assert out.splitlines() == [
        f"1. RB01, src/queue.c, line {line}",
        "   Finding      Finding 0 is *made* up.",
        "   Interpreter  replayed: the subscript in q->slots[q->head] is 4; the array has 4 elements.",
        next(
            text for text in out.splitlines() if text.startswith("   Program      stopped at the line: index 4 out of")
        ),
        f"   Kept         checks/RB01_queue_{line}.c",
        "",
        "1 witness: 1 replayed in the interpreter; as programs 1 stopped at the line.",
    ]


VALUES = """
#include <limits.h>
#include <stdint.h>
#include <stddef.h>
enum shore { SHORE_DOWN = -3, SHORE_UP };
struct record { unsigned kind : 3; signed mass : 5; uint64_t serial; uint8_t *bytes; };
static int8_t a; uint8_t b; static short c; static int32_t d; static int64_t e, f; static uint64_t g; static _Bool h;
static enum shore i; static char j; static struct record k[2]; static uint32_t *l; static const struct record *m;
static uint8_t buffer[4];
int held(void)
{
    return a == INT8_MIN && b == 255 && c == SHRT_MIN && d == INT32_MIN && e == INT64_MIN && f == INT64_MAX
        && g == UINT64_MAX && h == 1 && i == SHORE_DOWN && j == -7 && k[1].kind == 5 && k[1].mass == -16
        && k[1].serial == 1ULL << 63 && k[1].bytes == &buffer[2] && l == NULL && m == &k[1];
}
int given(int8_t v, uint64_t w, int64_t x, _Bool y, const uint8_t *p, const struct record *q, uint16_t z)
{
    return v == INT8_MIN && w == UINT64_MAX && x == INT64_MIN && y == 1 && p == &buffer[3] && q == NULL && z == 65535;
}
int main(int count, char **words) { return words == NULL && count == 3; }
"""


@needs_host
def test_every_kind_of_value_reaches_the_program_as_it_is(project: Path) -> None:
    values = project / "src/values.c"
    values.write_text(VALUES, "utf-8")
    database = project / "compile_commands.json"
    entry = {"directory": ".", "arguments": ["cc", "-c", "src/values.c"], "file": "src/values.c"}
    database.write_text(json.dumps([entry]), "utf-8")
    file = f"{project}/src/values.c:"
    start = [
        *((f"{file}a", "", -128), ("b", "", 255), (f"{file}c", "", -(2**15)), (f"{file}d", "", -(2**31))),
        *((f"{file}e", "", -(2**63)), (f"{file}f", "", 2**63 - 1), (f"{file}g", "", 2**64 - 1), (f"{file}h", "", 1)),
        *((f"{file}i", "", -3), (f"{file}j", "", -7), (f"{file}k", "[1].kind", 5), (f"{file}k", "[1].mass", -16)),
        *((f"{file}k", "[1].serial", 2**63), (f"{file}k", "[1].bytes", Reference(f"{file}buffer", 2))),
        *((f"{file}l", "", None), (f"{file}m", "", Reference(f"{file}k", 1))),
    ]
    ending = Ending("result", at(project, "return", "src/values.c"), None, "", "1", "0")
    placed = tuple(StartValue(item, path, value) for item, path, value in start)
    arguments = (-128, 2**64 - 1, -(2**63), 1, Reference(f"{file}buffer", 3), None, 65535)
    found = judged(
        project,
        witness(ending, ("held", ()), start=placed),
        witness(ending, ("given", arguments)),
        witness(ending, ("main", (3, None))),
    )
    assert [(one.held, one.ended) for one in found] == 3 * [(True, "stopped")], found


@needs_host
def test_what_a_witness_says_nothing_of_does_nothing(project: Path) -> None:
    source = project / "src/locked.c"
    source.write_text(
        """
        void panel_lock(void); int panel_unlock(int level); struct pair { int low, high; };
        struct pair panel_pair(void); extern int panel_levels[3];
        int unlocked(int n)
        { panel_lock(); (void)panel_unlock(n); if (n > 5) { panel_pair(); } return n + panel_levels[1]; }
        """,
        "utf-8",
    )
    entry = {"directory": ".", "arguments": ["cc", "-c", "src/locked.c"], "file": "src/locked.c"}
    (project / "compile_commands.json").write_text(json.dumps([entry]), "utf-8")
    ending = Ending("result", at(project, "unlocked", "src/locked.c"), None, "", "4", "3")
    start = tuple(StartValue("panel_levels", f"[{number}]", 0) for number in range(3))
    (one,) = judged(project, witness(ending, ("unlocked", (4,)), start=start))
    assert (one.held, one.ended) == (True, "stopped"), one


# ------------------------------------------------------------------------------------------------------ kept programs


def build_and_run(root: Path, kept: Path) -> tuple[int, str]:
    """Build a kept program with the commands in its own comment, and run it."""
    text = kept.read_text("utf-8")
    commands = re.findall(rf"^ \*   ({HOST} .*)$", text, re.MULTILINE)
    assert commands
    for command in commands:
        subprocess.run(command.split(), cwd=root, check=True, capture_output=True)
    done = subprocess.run([str(root / kept.stem)], cwd=root, capture_output=True, text=True, timeout=60, check=False)
    return done.returncode, done.stderr


MENDED = {
    "bounds": ("    q->slots[q->head]", "    if (q->head >= 4) return 0;\n    q->slots[q->head]"),
    "result": ("return q->head - q->tail;", "return (q->head - q->tail + 4) % 4;"),
    "value": ("    weight_at++;", "    weight_at = (weight_at + 1) & 7;"),
    "overflow": ("grams * 1000", "(int)(grams * 1000LL / 1000)"),
    "two units": ("(percent - 50)", "(percent - 49)"),
}


@needs_host
@pytest.mark.parametrize("name", MENDED)
def test_a_kept_program_stops_until_the_defect_is_mended(project: Path, name: str) -> None:
    given = witnesses(project)[name]
    keep = project / "checks"
    (one,) = judged(project, given, wishes=Wishes(keep=keep))
    assert one.kept is not None
    status, messages = build_and_run(project, one.kept)
    assert status != 0
    if name == "bounds":
        assert "(void)feed_put(&q, 20); /* with head 3 */" in one.kept.read_text("utf-8")
    assert re.search(rf"src/queue\.c:{given.ending.where.line}\b", messages)
    source = project / QUEUE
    before, after = MENDED[name]
    text = source.read_text("utf-8")
    assert before in text
    source.write_text(text.replace(before, after), "utf-8")
    assert build_and_run(project, one.kept) == (0, "")


@needs_host
def test_kept_programs_say_nothing_of_the_machine_and_are_the_same_twice(project: Path, tmp_path: Path) -> None:
    given = [witnesses(project)[name] for name in ("bounds", "value", "two units")]
    first = [one.kept for one in judged(project, *given, wishes=Wishes(keep=project / "checks"))]
    texts = [kept.read_text("utf-8") for kept in first if kept]
    assert len(texts) == len(given)
    assert not any(str(tmp_path) in text for text in texts)
    again = [one.kept for one in judged(project, *given, wishes=Wishes(keep=project / "checks"))]
    assert again == first
    assert [kept.read_text("utf-8") for kept in again if kept] == texts


def test_two_findings_on_one_line_are_kept_apart(project: Path) -> None:
    if HOST is None:
        pytest.skip("no C compiler is on PATH to build programs with")
    other = replace(bounds(project), assumed=())
    both = judged(project, bounds(project), other, wishes=Wishes(keep=project / "checks"))
    assert both[0].kept != both[1].kept


# ------------------------------------------------------------------------------------------------- what does not hold


def test_a_witness_that_does_not_hold_gives_exit_code_one(project: Path, capsys: Any) -> None:
    good = bounds(project)
    wrong = replace(good, start=(StartValue("q", ".head", 0),))
    log = log_of(project, [good, wrong])
    assert main(["replay", str(log)]) == 1
    out = capsys.readouterr().out
    assert "not replayed: nothing undefined happens: it returns 1." in out
    assert "2 witnesses: 1 replayed in the interpreter" in out
    if HOST is not None:
        assert "did not stop at the line: it runs to its end." in out


@needs_host
def test_a_program_that_stops_elsewhere_or_with_another_value_is_said(project: Path) -> None:
    elsewhere = replace(bounds(project), ending=undefined(project, "q->head = q->head + 1", "bounds"))
    other = replace(
        witnesses(project)["result"],
        ending=Ending("result", at(project, "q->head - q->tail"), None, "", "-3", "2"),
    )
    first, second = judged(project, elsewhere, other)
    assert (first.held, first.ended) == (False, "did not stop")
    assert "it stops at src/queue.c, line" in first.program_why
    assert (second.held, second.ended) == (False, "did not stop")
    assert "another value comes out (feed_count returns -2; 2 is due)" in second.program_why


@needs_host
def test_a_program_that_does_not_end_is_stopped(project: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    import stepring.replaying as replaying

    slow = witness(Ending("result", at(project, "return rounds"), None, "", "10", "0"), ("feed_wait", ()))
    run = driver_build.run_program
    monkeypatch.setattr(replaying, "run_program", lambda *given: run(*given, seconds=1.0))
    (one,) = judged(project, slow)
    assert (one.held, one.ended) == (False, "did not stop")
    assert "did not end within 1 s" in one.program_why


def changed(project: Path, old: str, new: str, file: str = QUEUE) -> None:
    path = project / file
    text = path.read_text("utf-8")
    assert old in text
    path.write_text(text.replace(old, new), "utf-8")


def test_a_change_of_the_source_is_said(project: Path, capsys: Any) -> None:
    log = log_of(project, [bounds(project)])
    changed(project, "q->slots[q->head].grams", "if (q->head < 4) q->slots[q->head].grams")
    assert main(["replay", str(log), "--no-programs"]) == 1
    captured = capsys.readouterr()
    assert "stepring: src/queue.c has changed since the log was written" in captured.err
    assert "not replayed: nothing undefined happens" in captured.out


def test_a_function_that_is_gone_is_said(project: Path, capsys: Any) -> None:
    log = log_of(project, [bounds(project)])
    changed(project, "feed_put", "feed_store")
    assert main(["replay", str(log), "--no-programs"]) == 1
    assert "not replayed: no unit defines feed_put." in capsys.readouterr().out


# ------------------------------------------------------------------------------------------- what cannot be a program


def not_possible(project: Path) -> Iterator[tuple[str, Witness]]:
    yield (
        "the code reads the device register at 0xc6",
        witness(
            Ending("result", at(project, "0xc6"), None, "", "300", "0 to 255"),
            calls=(WitnessCall("scale_raw", (), (OutsideValue("0xc6", 44),)),),
        ),
    )
    where = at(project, "calls; calls++")
    counted = f"{project}/{QUEUE}:counted:calls@{where.line}.{where.column}"
    yield (
        "calls is static in a function and cannot be reached from outside it",
        witness(
            Ending("result", at(project, "static uint8_t calls"), None, "", "0", "256"),
            ("counted", ()),
            start=(StartValue(counted, "", 255),),
        ),
    )
    yield (
        "the compiler's checks do not look for a value read before it was set",
        witness(undefined(project, "return rounds", "uninitialised"), ("feed_wait", ())),
    )
    yield (
        "feed_put has a body, which would run in place of the witness's value",
        replace(
            bounds(project),
            calls=(WitnessCall("feed_count", (Reference("q"),), (OutsideValue("feed_put", 1),)),),
        ),
    )
    yield (
        "the type struct feed_heap is not in the program",
        replace(bounds(project), made=(Made("q", "struct feed_heap", 1),)),
    )


@needs_host
def test_what_cannot_be_a_program_is_said(project: Path) -> None:
    cases = list(not_possible(project))
    for (words, _), one in zip(cases, judged(project, *(one for _, one in cases)), strict=True):
        assert one.ended == "not possible", one.program_why
        assert words in one.program_why


@needs_host
def test_another_data_model_is_no_program_for_this_host(project: Path) -> None:
    level = replace(bounds(project), model="IP16")
    log = read_log(log_of(project, [level], use_compiler=False, data_model="IP16"))
    (one,) = replay_log(log, project, Wishes())
    assert one.held, one.why
    assert one.ended == "not possible"
    assert "the witness is for the data model IP16" in one.program_why
    assert one.replayed


@needs_host
def test_a_source_that_the_compiler_rejects_is_no_program(project: Path) -> None:
    changed(
        project,
        "static int rounds;",
        'static int rounds;\nvoid pump(void) { __asm__("feed_auger %0" : : "m"(rounds)); }',
    )
    (one,) = judged(project, bounds(project))
    assert one.held
    assert one.ended == "not possible"


@pytest.mark.parametrize("name", ["no-such-compiler", "/no/such/cc"])
def test_a_compiler_that_is_not_there_is_said(project: Path, name: str, capsys: Any) -> None:
    log = log_of(project, [bounds(project)])
    assert main(["replay", str(log), "--compiler", name]) == 0
    out = capsys.readouterr().out
    assert f"Program      not possible: --compiler {name}" in out


def test_a_path_without_any_compiler_leaves_the_interpreter(project: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    log = read_log(log_of(project, [bounds(project)], use_compiler=False, data_model="LP64"))
    monkeypatch.setenv("PATH", str(project / "empty"))
    (one,) = replay_log(log, project, Wishes())
    assert one.held
    assert one.ended == "not possible"
    assert "no C compiler is on PATH" in one.program_why


@needs_host
def test_a_compiler_inside_the_inspected_tree_is_not_run(project: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    tools = project / "tools"
    tools.mkdir()
    for name in driver_build.COMPILERS:
        (tools / name).write_text(f"#!/bin/sh\ntouch {project}/was-run\n", "utf-8")
        (tools / name).chmod(0o755)
    monkeypatch.setenv("PATH", f"{tools}{os.pathsep}{os.environ['PATH']}")
    (one,) = judged(project, bounds(project))
    assert one.ended == "stopped"
    assert not (project / "was-run").exists()


# ---------------------------------------------------------------------------------------------------------- bad input


def refused(capsys: Any, *arguments: str) -> str:
    """The one sentence on standard error of a replay that cannot be done."""
    assert main(["replay", *arguments]) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    (line,) = captured.err.splitlines()
    return str(line)


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "is no JSON"),
        ("{", "is no JSON"),
        ("[" * 100_000, "is no JSON"),
        ("\xff\xfe", "is no JSON"),
        ("[]", "is no SARIF 2.1.0 log"),
        ('{"version": "2.1.0"}', "is no SARIF 2.1.0 log"),
        ('{"version": "1.0", "runs": []}', "is no SARIF 2.1.0 log"),
        ('{"version": "2.1.0", "runs": []}', "does not say how its inspection was asked for"),
        ('{"version": "2.1.0", "runs": [3, {"properties": 1}]}', "does not say how its inspection was asked for"),
        ('{"version": "2.1.0", "runs": [{"properties": {"inspection": {"folder": 3}}}]}', "does not say how"),
    ],
)
def test_a_file_that_is_no_log_of_an_inspection(project: Path, capsys: Any, text: str, words: str) -> None:
    (project / "log.sarif").write_text(text, "latin-1")
    assert words in refused(capsys, "log.sarif")


def test_a_log_that_is_not_there(project: Path, capsys: Any) -> None:
    assert "none.sarif cannot be read: No such file" in refused(capsys, "none.sarif")
    assert "src cannot be read: Is a directory" in refused(capsys, "src")


def test_a_log_without_a_witness(project: Path, capsys: Any) -> None:
    log_of(project, [])
    assert "log.sarif has no witness" in refused(capsys, "log.sarif")


def test_a_log_replayed_in_another_folder(project: Path, capsys: Any, tmp_path: Path) -> None:
    log = log_of(project, [bounds(project)])
    said = refused(capsys, str(log), "--root", str(tmp_path))
    assert "src/queue.c is not below" in said
    assert "run replay in the root of the inspected project" in said


def test_a_database_that_is_gone(project: Path, capsys: Any) -> None:
    log_of(project, [bounds(project)], compile_commands=project / "compile_commands.json")
    (project / "compile_commands.json").unlink()
    assert "could not be gathered" in refused(capsys, "log.sarif")


def test_keeping_programs_without_making_any(project: Path, capsys: Any) -> None:
    log_of(project, [bounds(project)])
    assert "leave one of them out" in refused(capsys, "log.sarif", "--keep", "checks", "--no-programs")


@needs_host
def test_a_folder_that_cannot_be_made(project: Path, capsys: Any) -> None:
    log_of(project, [bounds(project)])
    assert "could not be kept" in refused(capsys, "log.sarif", "--keep", f"{QUEUE}/checks")


@pytest.mark.parametrize(
    ("way", "value", "words"),
    [
        (("calls", 0, "function"), 4, "calls[0].function must be text"),
        (("made",), "all", "made must be an array"),
        (("ending", "kind"), "odd", "ending.kind must be one of"),
    ],
)
def test_a_malformed_witness_costs_itself(
    project: Path, capsys: Any, way: tuple[Any, ...], value: Any, words: str
) -> None:
    log = log_of(project, [bounds(project), bounds(project)])
    data = json.loads(log.read_text("utf-8"))
    holder = data["runs"][0]["results"][0]["properties"]["witness"]
    for step in way[:-1]:
        holder = holder[step]
    holder[way[-1]] = value
    log.write_text(json.dumps(data), "utf-8")
    assert main(["replay", str(log), "--no-programs"]) == 1
    out = capsys.readouterr().out
    assert words in out
    assert "2 witnesses: 1 replayed in the interpreter." in out


def test_the_help_says_what_is_run(capsys: Any) -> None:
    assert main(["replay", "--help"]) == 0
    text = " ".join(capsys.readouterr().out.split())
    assert "This command is the only one that runs anything of the inspected project" in text
