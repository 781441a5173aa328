"""Ring programs made from seed numbers: no verdict may contradict what running them shows.

An ordinary run takes 200 programs; ``STEPRING_MANY=1`` takes 3,000. The programs are the same each time.
"""

import os
from pathlib import Path

import pytest
from tests.rings.check import Compared, compare_all, table
from tests.rings.programs import make
from tests.rings.truth import ADDRESSES, GCC, run_all

OPEN_AT_MOST = 0.12
"""The share of obligations that may stay open; the aim is 0.05."""

FOUND_AT_LEAST = 0.3
"""The share of misbehaving programs with a finding. A third of what goes wrong leaves the storage; the rest shows only
beside an ideal queue."""

COUNT = 3000 if os.environ.get("STEPRING_MANY") else 200

pytestmark = pytest.mark.skipif(GCC is None or ADDRESSES is None, reason="no gcc to run the rings with")


@pytest.fixture(scope="module")
def compared(tmp_path_factory: pytest.TempPathFactory) -> list[Compared]:
    """All programs, made, run, inspected and compared."""
    found = compare_all(range(COUNT), tmp_path_factory.mktemp("rings"))
    print(table(found))
    return found


def _said(found: list[Compared], label: str) -> str:
    return "\n".join(f"program {item.number} ({item.slip}): {text}" for item in found for text in getattr(item, label))


def test_programs_are_the_same_each_time() -> None:
    assert [make(number).text for number in range(60)] == [make(number).text for number in range(60)]


def test_programs_without_a_slip_do_what_is_due(tmp_path: Path) -> None:
    """The driver and its ideal are right: what is written without a slip agrees with them."""
    sound = [item for item in map(make, range(120)) if item.plan.slip == "none"]
    truths = run_all(sound, tmp_path)
    wrong = [(item.number, truths[item.number].events) for item in sound if truths[item.number].verdict != "clean"]
    assert len(sound) > 30 and not wrong, wrong


def test_slips_do_harm_often_enough(compared: list[Compared]) -> None:
    """Without programs that misbehave nothing below would say much."""
    slipped = [item for item in compared if item.slip != "none"]
    assert sum(item.verdict == "broken" for item in slipped) > len(slipped) // 2
    assert sum(item.verdict == "clean" for item in compared) > len(compared) // 4


def test_no_pass_is_broken_by_the_run(compared: list[Compared]) -> None:
    assert not _said(compared, "wrong_passes"), "\n" + _said(compared, "wrong_passes")


def test_no_failure_of_a_program_that_never_misbehaves(compared: list[Compared]) -> None:
    assert not _said(compared, "wrong_errors"), "\n" + _said(compared, "wrong_errors")
    assert not _said(compared, "wrong_warnings"), "\n" + _said(compared, "wrong_warnings")


def test_every_error_has_evidence(compared: list[Compared]) -> None:
    bare = [item.number for item in compared if item.proved_by_run < item.errors]
    assert not bare, f"errors without a witness in programs {bare}"


def test_nothing_is_left_unread(compared: list[Compared]) -> None:
    assert not _said(compared, "notices"), "\n" + _said(compared, "notices")


def test_little_is_left_open(compared: list[Compared]) -> None:
    total = sum(sum(item.kinds.values()) for item in compared)
    assert sum(item.kinds["open"] for item in compared) <= OPEN_AT_MOST * total, "\n" + table(compared)


def test_what_misbehaves_is_found(compared: list[Compared]) -> None:
    broken = [item for item in compared if item.verdict == "broken"]
    assert sum(item.found for item in broken) >= FOUND_AT_LEAST * len(broken), "\n" + table(compared)
