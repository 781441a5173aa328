"""Outputs that cannot be written: one sentence, nothing half-written, exit code 2, and the rest of the work done."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

SAMPLES = Path(__file__).parents[1] / "report"

_PROGRAM = """
import sys
sys.path.insert(0, {samples!r})
from pathlib import Path
from report_samples import barge
from stepring import pipeline
from stepring.cli import main
def inspect(paths, options, progress):
    return barge(Path("barge").absolute())
pipeline.inspect = inspect
sys.exit(main())
"""


def run(folder: Path, shell: str, *arguments: str) -> subprocess.CompletedProcess[str]:
    """Run the commands on the sample outcome in ``folder``; ``shell`` runs ``"$@"`` and says where its output goes."""
    program = [sys.executable, "-c", _PROGRAM.format(samples=str(SAMPLES)), *arguments]
    return subprocess.run(
        ["bash", "-c", shell, "bash", *program], cwd=folder, capture_output=True, text=True, check=False
    )


def sentences(ended: subprocess.CompletedProcess[str]) -> list[str]:
    """What was said beside the sample's own three notices."""
    own = ("could not be parsed", "not on PATH", "was not found")
    return [line for line in ended.stderr.splitlines() if not any(words in line for words in own)]


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="this system has no device that is always full")
@pytest.mark.parametrize("arguments", [["inspect"], ["inspect", "--sarif", "-"], ["inventory"], ["rule"]])
def test_a_full_disk_behind_standard_output(tmp_path: Path, arguments: list[str]) -> None:
    ended = run(tmp_path, '"$@" > /dev/full', *arguments)
    assert ended.returncode == 2
    assert sentences(ended) == ["stepring: standard output could not be written: No space left on device."]


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="this system has no device that is always full")
def test_a_full_disk_behind_the_log(tmp_path: Path) -> None:
    ended = run(tmp_path, '"$@"', "inspect", "--sarif", "/dev/full")
    assert ended.returncode == 2
    assert "AUGER_JAM" in ended.stdout
    assert sentences(ended) == [
        "stepring: error: The SARIF log could not be written to /dev/full: No space left on device."
    ]


def test_a_closed_standard_output(tmp_path: Path) -> None:
    ended = run(tmp_path, '"$@" >&-', "inspect", "--sarif", "log.sarif")
    assert ended.returncode == 1
    assert sentences(ended) == []
    assert (tmp_path / "log.sarif").stat().st_size > 1000
    ended = run(tmp_path, '"$@" >&-', "inspect", "--sarif", "-")
    assert ended.returncode == 2
    assert sentences(ended) == ["stepring: standard output could not be written: it is closed."]


def test_a_reader_that_has_gone(tmp_path: Path) -> None:
    for arguments in (["inspect"], ["inspect", "--sarif", "-"], ["inventory"]):
        ended = run(tmp_path, '"$@" | true', *arguments)
        assert sentences(ended) == []


@pytest.mark.skipif(os.geteuid() == 0, reason="the superuser may write everywhere")
def test_a_folder_that_may_not_be_written(tmp_path: Path) -> None:
    locked = tmp_path / "locked"
    locked.mkdir(mode=0o555)
    ended = run(tmp_path, '"$@"', "inspect", "--sarif", "locked/log.sarif")
    assert ended.returncode == 2
    assert sentences(ended) == [
        "stepring: error: The SARIF log could not be written to locked/log.sarif: Permission denied."
    ]


@pytest.mark.parametrize("target", ["missing/log.sarif", "barge", "x" * 300 + ".sarif", "loop", ""])
def test_a_target_that_is_no_place_for_a_file(tmp_path: Path, target: str) -> None:
    (tmp_path / "loop").symlink_to("loop")
    ended = run(tmp_path, '"$@"', "inspect", "--sarif", target)
    assert ended.returncode == 2
    assert len(sentences(ended)) == 1
    assert "could not be written" in sentences(ended)[0]
    assert "AUGER_JAM" in ended.stdout
    assert sorted(path.name for path in tmp_path.iterdir()) == ["barge", "loop"]


def test_a_log_may_replace_an_older_one_and_go_into_a_pipe(tmp_path: Path) -> None:
    (tmp_path / "log.sarif").write_text("old")
    assert run(tmp_path, '"$@"', "inspect", "--sarif", "log.sarif").returncode == 1
    whole = (tmp_path / "log.sarif").read_text()
    piped = run(
        tmp_path, 'mkfifo pipe; cat pipe > copy & "$@"; code=$?; wait; exit $code', "inspect", "--sarif", "pipe"
    )
    assert piped.returncode == 1
    assert (tmp_path / "copy").read_text() == whole
