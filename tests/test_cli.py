"""The commands from outside: what goes where, exit codes, and that nothing ends in a traceback."""

import io
import json
import os
import pty
import subprocess
import sys
from collections.abc import Callable, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from rich.console import Console

sys.path.insert(0, str(Path(__file__).parent / "report"))

from log_checks import assert_sound
from report_samples import barge

from stepring import cli, pipeline
from stepring.cli import last_resort, main
from stepring.places import Notice
from stepring.report.types import Outcome

Inspect = Callable[[Sequence[Path], pipeline.Options, Any], Outcome]


@pytest.fixture
def outcome(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Outcome:
    """The sample outcome, which every run of these tests finds; the current folder is its root."""
    made = barge(tmp_path)
    monkeypatch.chdir(tmp_path)
    answer_with(monkeypatch, made)
    return made


def answer_with(monkeypatch: pytest.MonkeyPatch, made: Outcome) -> list[tuple[Sequence[Path], pipeline.Options]]:
    """Let the pipeline give that outcome; the list fills with what it was asked."""
    asked: list[tuple[Sequence[Path], pipeline.Options]] = []

    def inspect(paths: Sequence[Path], options: pipeline.Options, progress: Any = None) -> Outcome:
        asked.append((paths, options))
        progress(0, 2, "feed/auger.c")
        return made

    monkeypatch.setattr(pipeline, "inspect", inspect)
    return asked


def fail_with(monkeypatch: pytest.MonkeyPatch, error: BaseException) -> None:
    def inspect(paths: Sequence[Path], options: pipeline.Options, progress: Any = None) -> Outcome:
        progress(1, 2, "feed/auger.c")
        raise error

    monkeypatch.setattr(pipeline, "inspect", inspect)


# ------------------------------------------------------------------------------------------------- exit codes


@pytest.mark.parametrize(
    ("levels", "fail_level", "code"),
    [
        (["error"], None, 1),
        (["warning"], None, 1),
        (["note"], None, 0),
        (["note"], "note", 1),
        (["warning"], "error", 0),
        (["warning", "error"], "error", 1),
        (["error"], "none", 0),
        ([], "note", 0),
    ],
)
def test_the_exit_code_follows_the_fail_level(
    outcome: Outcome, monkeypatch: pytest.MonkeyPatch, levels: list[Any], fail_level: str | None, code: int
) -> None:
    found = tuple(replace(outcome.obligations[0], level=level, what=f"Finding {level}") for level in levels)
    answer_with(monkeypatch, replace(outcome, obligations=found))
    option = [] if fail_level is None else ["--fail-level", fail_level]
    assert main(["inspect", *option]) == code


def test_the_settings_of_a_project_give_the_fail_level_unless_the_command_line_does(
    outcome: Outcome, monkeypatch: pytest.MonkeyPatch
) -> None:
    answer_with(monkeypatch, replace(outcome, fail_level="none"))
    assert main(["inspect"]) == 0
    assert main(["inspect", "--fail-level", "error"]) == 1


@pytest.mark.parametrize("kind", ["open", "pass", "review"])
def test_only_failures_make_the_exit_code(outcome: Outcome, monkeypatch: pytest.MonkeyPatch, kind: Any) -> None:
    found = replace(outcome.obligations[0], kind=kind, level=None)
    answer_with(monkeypatch, replace(outcome, obligations=(found,)))
    assert main(["inspect", "--fail-level", "note"]) == 0


def test_failures_count_whatever_verdicts_are_written(outcome: Outcome) -> None:
    assert main(["inspect", "--kind", "pass", "--report", "none"]) == 1


def test_work_that_could_not_be_done_is_two(outcome: Outcome, monkeypatch: pytest.MonkeyPatch) -> None:
    failed = replace(outcome, notices=(Notice("nothing-to-read", "error", "No C was found"),))
    answer_with(monkeypatch, failed)
    assert main(["inspect"]) == 2


def test_the_inventory_is_no_judgement(outcome: Outcome) -> None:
    assert main(["inventory"]) == 0
    assert main(["inventory", "--fail-level", "error", "--report", "none"]) == 1


@pytest.mark.parametrize("identity", ["RB01", "RB03"])
def test_the_page_of_a_ring_rule_states_what_its_verdicts_rest_on(
    identity: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["rule", identity]) == 0
    page = capsys.readouterr().out
    assert "## Assumptions" in page
    assert "- Functions of the C library do what ISO C says of them." in page
    assert main(["rule", "SM01"]) == 0
    assert "## Assumptions" not in capsys.readouterr().out


def test_limits_and_doing_without_the_solver_reach_the_pipeline(
    outcome: Outcome, monkeypatch: pytest.MonkeyPatch
) -> None:
    asked = answer_with(monkeypatch, outcome)
    main(["inspect", "--report", "none"])
    main(["inspect", "--report", "none", "--no-proofs", "--query-limit", "5000", "--time-limit", "2.5"])
    plain, limited = (options for _, options in asked)
    assert (plain.proofs, plain.query_limit, plain.time_limit) == (True, None, None)
    assert (limited.proofs, limited.query_limit, limited.time_limit) == (False, 5000, 2.5)


@pytest.mark.parametrize("given", [("--query-limit", "0"), ("--time-limit", "0"), ("--time-limit", "soon")])
def test_a_limit_that_is_none_is_refused(
    outcome: Outcome, given: tuple[str, str], capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["inspect", *given]) == 2
    (line,) = capsys.readouterr().err.splitlines()
    assert given[0] in line


# ------------------------------------------------------------------------------------------------- what goes where


def test_the_report_is_on_standard_output_and_notices_on_standard_error(
    outcome: Outcome, capsys: pytest.CaptureFixture[str]
) -> None:
    main(["inspect", "--kind", "fail,open"])
    shown = capsys.readouterr()
    assert "The state AUGER_JAM of auger_state is never left." in shown.out
    assert "left open" in shown.out
    assert "Functional-safety standards" in shown.out
    assert shown.err.splitlines() == [
        "stepring: warning: feed/auger.c, line 3: A declaration could not be parsed.",
        f"stepring: warning: The compiler of {outcome.root}/feed/auger.c is not on PATH.",
        "stepring: note: shore commands#1.c, line 1: barge{1}.h was not found.",
    ]


def test_lines_are_for_tools(outcome: Outcome, capsys: pytest.CaptureFixture[str]) -> None:
    main(["inspect", "--report", "lines"])
    assert capsys.readouterr().out.splitlines() == [
        "feed/auger.c:14:14: error, rule SM04: The state AUGER_JAM of auger_state is never left",
        "shore commands#1.c:5:14: error, rule RB04: "
        "After head passes 255, q->slots[head % 10] goes from slot 5 to slot 0",
    ]


def test_no_report_is_no_output(outcome: Outcome, capsys: pytest.CaptureFixture[str]) -> None:
    main(["inspect", "--report", "none"])
    assert capsys.readouterr().out == ""


def test_the_log_goes_to_a_file_beside_the_report(outcome: Outcome, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["inspect", "--sarif", "log.sarif", "--kind", "fail,pass"]) == 1
    log = json.loads(Path("log.sarif").read_text(encoding="utf-8"))
    assert_sound(log, outcome.root)
    assert {one["kind"] for one in log["runs"][0]["results"]} == {"fail", "pass"}
    assert log["runs"][0]["invocations"][0]["exitCode"] == 1
    assert "shown to fail" in capsys.readouterr().out


def test_a_log_on_standard_output_is_alone_there(outcome: Outcome, capsys: pytest.CaptureFixture[str]) -> None:
    main(["inspect", "--sarif", "-"])
    assert_sound(json.loads(capsys.readouterr().out), outcome.root)
    main(["inspect", "--sarif", "-", "--report", "lines"])
    shown = capsys.readouterr()
    assert_sound(json.loads(shown.out), outcome.root)
    assert "feed/auger.c:14:14: error" in shown.err


def test_options_reach_the_pipeline(outcome: Outcome, monkeypatch: pytest.MonkeyPatch) -> None:
    asked = answer_with(monkeypatch, outcome)
    options = [
        "--compile-commands",
        "db.json",
        "--jobs",
        "3",
        "--compiler",
        "cc",
        "--no-compiler",
        "--data-model",
        "LP64",
    ]
    main(["inspect", "feed", "a.c", *options])
    main(["inspect", "--jobs", "1"])
    assert asked[0] == (
        (Path("feed"), Path("a.c")),
        pipeline.Options(Path("db.json"), "LP64", 3, ("cc",), False),
    )
    assert asked[1] == ((), pipeline.Options(None, None, 1, (), True))


def test_the_inventory_shows_machines_and_rings(outcome: Outcome, capsys: pytest.CaptureFixture[str]) -> None:
    main(["inventory"])
    shown = capsys.readouterr().out
    assert "State machine auger_state" in shown
    assert "Ring struct queue.slots" in shown
    main(["inventory", "--report", "lines", "--sarif", "log.sarif"])
    assert capsys.readouterr().out.splitlines() == [
        "feed/auger.c:3: state machine auger_state, 3 states, 5 transitions",
        "shore commands#1.c:1: ring struct queue.slots, capacity 10, difference, wrap by free-running",
    ]
    assert len(json.loads(Path("log.sarif").read_text())["runs"][0]["graphs"]) == 1


# ------------------------------------------------------------------------------------------------- bad input


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["inspect", "--kind", "fail,maybe"], "'maybe' names no verdict"),
        (["inspect", "--kind", ","], "an empty list"),
        (["inspect", "--fail-level", "fatal"], "'fatal' is not one of"),
        (["inspect", "--jobs", "0"], "0 is not in the range"),
        (["inspect", "--jobs", "many"], "'many' is not a valid integer"),
        (["inspect", "--data-model", "PDP11"], "'PDP11' is not one of"),
        (["inspect", "--frob"], "no such option"),
        (["frob"], "no such command"),
        (["rule", "SM99"], "there is no rule 'SM99'"),
        (["rule", "\x1b[31m\udcff"], "there is no rule"),
        (["inspect", "--sarif"], "requires an argument"),
    ],
)
def test_a_wrong_option_is_one_sentence(
    outcome: Outcome, capsys: pytest.CaptureFixture[str], arguments: list[str], words: str
) -> None:
    assert main(arguments) == 2
    shown = capsys.readouterr()
    assert shown.out == ""
    assert shown.err.startswith("stepring: ")
    assert shown.err.count("\n") == 1
    assert words in shown.err


def test_an_output_that_cannot_be_written_is_said_and_the_report_still_comes(
    outcome: Outcome, capsys: pytest.CaptureFixture[str]
) -> None:
    for target in ("no/such/folder/log.sarif", ".", "nul\0.sarif"):
        assert main(["inspect", "--sarif", target]) == 2
        shown = capsys.readouterr()
        assert "AUGER_JAM" in shown.out
        sentences = [line for line in shown.err.splitlines() if "could not be written" in line]
        assert len(sentences) == 1
        assert sentences[0].startswith("stepring: error: The SARIF log could not be written to ")
    assert sorted(path.name for path in outcome.root.iterdir()) == ["feed", "shore commands#1.c"]


@pytest.mark.parametrize(
    "error",
    [
        ValueError("broken"),
        RecursionError("too deep"),
        MemoryError(),
        KeyError("a\nb"),
        UnicodeDecodeError("utf-8", b"x", 0, 1, "x"),
    ],
)
def test_no_failure_of_a_stage_makes_a_traceback(
    outcome: Outcome, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], error: Exception
) -> None:
    fail_with(monkeypatch, error)
    assert main(["inspect"]) == 2
    shown = capsys.readouterr()
    assert shown.out == ""
    assert shown.err.count("\n") == 1
    assert "feed/auger.c" in shown.err
    assert type(error).__name__ in shown.err


def test_the_last_resort_names_the_stage() -> None:
    try:
        cli.shown_path(7)  # type: ignore[arg-type]
    except TypeError as error:
        assert last_resort(error, "").startswith("the stage report failed by a defect of stepring itself (TypeError: ")


def test_the_traceback_is_there_for_those_who_ask(
    outcome: Outcome, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setenv("STEPRING_TRACEBACK", "1")
    fail_with(monkeypatch, ValueError("broken"))
    assert main(["inspect"]) == 2
    assert "Traceback" in capsys.readouterr().err


def test_an_interrupt_from_the_keyboard_is_one_sentence(
    outcome: Outcome, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    fail_with(monkeypatch, KeyboardInterrupt())
    assert main(["inspect"]) == 2
    assert capsys.readouterr().err.strip() == "stepring: stopped before the work was done."


# ------------------------------------------------------------------------------------------------- rules, version


def test_a_rule_in_a_pipe_is_its_markdown_page(capsys: pytest.CaptureFixture[str]) -> None:
    from stepring.rule import load_rules

    page = next(rule for rule in load_rules() if rule.id == "SM01").page()
    for spelling in ("SM01", "sm01"):
        assert main(["rule", spelling]) == 0
        assert capsys.readouterr().out.rstrip("\n") == page.strip()


def test_a_rule_on_a_terminal_is_rendered(monkeypatch: pytest.MonkeyPatch) -> None:
    screen = io.StringIO()
    monkeypatch.setattr(cli, "_console", lambda: Console(file=screen, force_terminal=True, no_color=True, width=70))
    assert main(["rule", "SM01"]) == 0
    assert screen.getvalue().strip()
    assert not any(line.startswith("#") for line in screen.getvalue().splitlines())


def test_without_an_id_all_rules_are_listed(capsys: pytest.CaptureFixture[str]) -> None:
    from stepring.rule import load_rules

    assert main(["rule"]) == 0
    lines = capsys.readouterr().out.splitlines()
    assert [line.split()[0] for line in lines] == [rule.id for rule in load_rules()]
    assert all(line.endswith(".") for line in lines)


def test_help_and_version_are_no_errors(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--version"]) == 0
    assert capsys.readouterr().out.startswith("stepring, version ")
    assert main(["inspect", "--help"]) == 0
    assert "--fail-level" in capsys.readouterr().out
    assert main([]) == 2
    assert "inventory" in capsys.readouterr().err


# ------------------------------------------------------------------------------------------------- real processes

_PROGRAM = """
import sys
sys.path.insert(0, {tests!r})
from pathlib import Path
from report_samples import barge
from stepring import pipeline
from stepring.cli import main
def inspect(paths, options, progress):
    progress(0, 2, "feed/auger.c")
    return barge(Path.cwd())
pipeline.inspect = inspect
sys.exit(main())
"""


def program(*arguments: str) -> list[str]:
    """A process that runs the commands on the sample outcome."""
    text = _PROGRAM.format(tests=str(Path(__file__).parent / "report"))
    return [sys.executable, "-c", text, *arguments]


def test_a_reader_that_goes_away_is_no_trouble(tmp_path: Path) -> None:
    ended = subprocess.run(
        ["bash", "-c", '"$@" | true; echo "${PIPESTATUS[0]}"', "bash", *program("inspect", "--sarif", "-")],
        cwd=tmp_path,
        capture_output=True,
        text=True,
        check=True,
    )
    assert "Traceback" not in ended.stderr
    assert "Exception" not in ended.stderr


@pytest.mark.parametrize("encoding", ["ascii", "latin-1", "utf-8"])
def test_any_output_encoding_will_do(tmp_path: Path, encoding: str) -> None:
    environment = {**os.environ, "PYTHONIOENCODING": encoding, "PYTHONUTF8": "0"}
    ended = subprocess.run(program("inspect"), cwd=tmp_path, capture_output=True, env=environment, check=False)
    assert ended.returncode == 1
    assert b"AUGER_JAM" in ended.stdout
    assert b"Traceback" not in ended.stderr
    assert b"\x1b" not in ended.stdout


def on_terminal(tmp_path: Path, *arguments: str, **environment: str) -> str:
    """What a terminal of 80 columns would get, standard output and error together."""
    near, far = pty.openpty()
    settings = {**os.environ, "TERM": "xterm-256color", "COLUMNS": "80", **environment}
    settings.pop("NO_COLOR", None) if "NO_COLOR" not in environment else None
    with subprocess.Popen(
        program(*arguments), cwd=tmp_path, stdin=far, stdout=far, stderr=far, env=settings, close_fds=True
    ) as process:
        os.close(far)
        shown = b""
        while True:
            try:
                piece = os.read(near, 65536)
            except OSError:  # the other side has been closed
                break
            if not piece:
                break
            shown += piece
        process.wait()
    os.close(near)
    return shown.decode("utf-8")


def test_colour_is_for_terminals_and_can_be_refused(tmp_path: Path) -> None:
    colourful = on_terminal(tmp_path, "inspect")
    assert "\x1b[1;31m" in colourful
    plain = on_terminal(tmp_path, "inspect", NO_COLOR="1")
    assert ";31m" not in plain
    assert "[31m" not in plain
    assert "shown to fail (error)" in plain
