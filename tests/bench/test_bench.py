"""The benchmark runs, and its figures fit together; how large they are is for people to look at."""

import json
import re
import subprocess
import sys
from pathlib import Path

from tests.bench.run import STAGES, Clock, half_of
from tests.marks import CORPUS

RUN = Path(__file__).with_name("run.py")
DATABASE = CORPUS / "barge_clean" / "compile_commands.json"


def test_it_prints_ratio_shares_and_growth() -> None:
    ended = subprocess.run([sys.executable, RUN, DATABASE], capture_output=True, text=True, check=True)
    found = re.search(r"\(a\) whole inspection +([\d.]+) s", ended.stdout)
    assert found and float(found[1]) > 0
    shares = re.findall(r"^ +([a-z]+) +[\d.]+ s +([\d.]+)%$", ended.stdout, re.MULTILINE)
    assert [name for name, _ in shares] == list(STAGES)
    assert abs(sum(float(share) for _, share in shares) - 100) < 1
    assert re.search(r"growth: 2\.00 times the units take [\d.]+ times the time", ended.stdout)
    assert re.search(r"machines [1-9]\d*, rings [1-9]", ended.stdout)
    assert "0 not parsed" in ended.stdout


def test_a_missing_database_is_said() -> None:
    ended = subprocess.run([sys.executable, RUN, "gone.json"], capture_output=True, text=True, check=False)
    assert ended.returncode == 1
    assert "gone.json is no file" in ended.stderr
    assert "Traceback" not in ended.stderr


def test_two_halves_make_the_whole(tmp_path: Path) -> None:
    halves = [json.loads(half_of(DATABASE, tmp_path, first).read_text()) for first in (0, 1)]
    files = sorted(entry["file"] for half in halves for entry in half)
    assert files == sorted(entry["file"] for entry in json.loads(DATABASE.read_text()))
    assert all(Path(entry["directory"]) == CORPUS / "barge_clean" for half in halves for entry in half)


def test_a_stage_inside_another_counts_for_itself() -> None:
    clock = Clock()
    with clock.stage("read"), clock.stage("rings"):
        sum(range(3_000_000))
    total = clock.total()
    assert abs(sum(clock.seconds.values()) - total) < 1e-6
    assert clock.seconds["rings"] > 10 * clock.seconds["read"]
