"""Logs of real runs: the corpus from its C to SARIF."""

import json
import shutil
from functools import cache
from pathlib import Path
from typing import Any

import pytest
from log_checks import assert_sound

from stepring import pipeline
from stepring.report.sarif import sarif_log
from stepring.report.serialise import to_bytes
from stepring.report.types import Outcome

CORPUS = Path(__file__).parents[2] / "corpus"
FOLDERS = sorted(path.name for path in CORPUS.iterdir() if path.is_dir())
EVERY_KIND = ("fail", "open", "review", "pass")


@cache
def inspected(folder: str) -> Outcome:
    return pipeline.inspect([CORPUS / folder], pipeline.Options(jobs=1))


def run_of(folder: str) -> dict[str, Any]:
    run: dict[str, Any] = json.loads(to_bytes(sarif_log(inspected(folder), EVERY_KIND)))["runs"][0]
    return run


@pytest.mark.parametrize("folder", FOLDERS)
def test_a_real_log_is_sound(folder: str) -> None:
    log = json.loads(to_bytes(sarif_log(inspected(folder), EVERY_KIND)))
    assert_sound(log, inspected(folder).root)
    assert log["runs"][0]["invocations"][0]["executionSuccessful"] is True
    coverage = log["runs"][0]["properties"]["coverage"]
    assert coverage["units"]["read"] == coverage["units"]["total"] > 0


@pytest.mark.parametrize("folder", FOLDERS)
def test_every_result_names_its_function_and_its_subject(folder: str) -> None:
    for result in run_of(folder)["results"]:
        kinds = [one["kind"] for one in result["locations"][0]["logicalLocations"]]
        assert kinds[0] == "function", result["message"]
        assert kinds[1] in ("variable", "member"), result["message"]


@pytest.mark.parametrize("folder", FOLDERS)
def test_every_place_has_columns_and_a_snippet(folder: str) -> None:
    for result in run_of(folder)["results"]:
        region = result["locations"][0]["physicalLocation"]["region"]
        assert region["endColumn"] > region["startColumn"], result["message"]
        assert region["snippet"]["text"].strip()


@pytest.mark.parametrize("folder", FOLDERS)
def test_a_trap_or_dead_state_has_a_walk(folder: str) -> None:
    for result in run_of(folder)["results"]:
        if result["ruleId"] == "SM04" and result["kind"] == "fail":
            assert result["graphTraversals"][0]["edgeTraversals"], result["message"]


def test_a_log_does_not_depend_on_where_the_tree_lies_or_how_many_work_on_it(tmp_path: Path) -> None:
    logs = set()
    for place, jobs in (("one", 1), ("a much longer name", 2)):
        tree = tmp_path / place / "barge"
        shutil.copytree(CORPUS / "barge_flawed", tree)
        logs.add(to_bytes(sarif_log(pipeline.inspect([tree], pipeline.Options(jobs=jobs)), EVERY_KIND)))
    assert len(logs) == 1
    assert str(tmp_path).encode() not in logs.pop()
