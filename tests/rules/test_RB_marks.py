"""The ring rules against the marked C: every mark is found on its line, and nothing else is."""

from pathlib import Path

import pytest
from tests.rules.marks import RING_RULES, found, marks
from tests.shapes.ring_support import read_files

ROOT = Path(__file__).parents[2]
PAIRS = [ROOT / "corpus" / f"RB0{number}" / f"{kind}.c" for number in range(1, 8) for kind in ("wrong", "right")]
SLOTS = sorted((ROOT / "tests" / "data" / "four_slots").glob("*.c"))


@pytest.mark.parametrize("path", PAIRS + SLOTS, ids=lambda path: f"{path.parent.name}/{path.stem}")
def test_exactly_the_marks_are_found(path: Path) -> None:
    program = read_files([path]).program()
    assert program.rings
    obligations = [item for rule in RING_RULES for item in rule.check(program)]
    assert found(obligations) == sorted(marks([path]))
    assert all(item.level is None for item in obligations if item.kind != "fail")
    if path.stem.startswith(("wrong", "slip")):
        assert marks([path])


@pytest.mark.parametrize("name", ["barge_clean", "barge_flawed"])
def test_a_whole_firmware(name: str) -> None:
    folder = ROOT / "corpus" / name
    sources = sorted((folder / "src").glob("*.c"))
    program = read_files(sources, [folder / "include"]).program()
    obligations = [item for rule in RING_RULES for item in rule.check(program)]
    assert found(obligations) == sorted(marks(sources))
    assert {ring.storage for ring in program.rings} >= {
        "struct auger.current",
        "queue.slot",
        "minutes",
        "hours",
        "struct job_queue.grams",
        "struct telemetry.data",
        "trace",
        "raw",
        "window",
        "struct fir.line",
    }


def test_errors_come_with_the_steps_that_lead_there() -> None:
    program = read_files([ROOT / "corpus" / "RB01" / "wrong.c"]).program()
    item = next(item for item in RING_RULES[0].check(program) if item.kind == "fail")
    assert [step.values for step in item.witness] == [
        *((("weight_head", str(value)),) for value in range(1, 9)),
        (("subscript", "8"),),
    ]
    assert "weights has 8 slots" in item.what and "accessed at 8" in item.what
