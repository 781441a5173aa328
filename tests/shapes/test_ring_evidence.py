"""Both engines' answers come together, and neither's end costs the other's."""

import os
import signal
from pathlib import Path
from typing import Any

import pytest
from tests.marks import CORPUS

from stepring.pipeline import Options, inspect
from stepring.shapes import ring_evidence

FILE = CORPUS / "RB09" / "wrong.c"


def test_runs_and_proofs_are_in_every_inspection() -> None:
    outcome = inspect([FILE], Options(use_compiler=False))
    (found,) = [item for item in outcome.obligations if item.rule == "RB09"]
    assert found.evidence is not None and found.evidence.calls


def test_without_proofs_nothing_is_run() -> None:
    outcome = inspect([FILE], Options(use_compiler=False, proofs=False))
    assert not [item for item in outcome.obligations if item.evidence is not None]


def test_a_solver_that_ends_costs_the_proofs_only(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    def ends(*_given: Any, **_named: Any) -> Any:
        os.kill(os.getpid(), signal.SIGKILL)

    monkeypatch.setattr(ring_evidence, "prove_rings", ends)
    monkeypatch.setattr(ring_evidence, "_unsettled", lambda _ring: True)
    outcome = inspect([FILE], Options(use_compiler=False))
    assert [notice.text for notice in outcome.notices if "ended the solver" in notice.text]
    assert [item for item in outcome.obligations if item.rule == "RB09" and item.kind == "fail"]
