"""Random programs run by the interpreter give what the host's compiler gives; where its checks stop, both stop."""

import os
import random
import shutil
from pathlib import Path

import pytest
from tests.paths.host import call_all
from tests.paths.programs import LIBRARY, program_text
from tests.support import lower_text

from stepring.paths.interpreter import fresh, program, run

BATCH = 25
BATCHES = 200 if os.environ.get("STEPRING_MANY") else 8
ARGUMENTS = ((0, 0), (1, -1), (7, 300), (-128, 2147483647))
STEPS = 20_000_000


@pytest.mark.skipif(shutil.which("gcc") is None, reason="the host has no gcc")
@pytest.mark.parametrize("seed", range(BATCHES))
def test_batch(seed: int, tmp_path: Path) -> None:
    texts = [program_text(random.Random(seed * BATCH + number), str(number)) for number in range(BATCH)]
    calls = [("0", f"run_{number}({a}, {b})") for number in range(BATCH) for a, b in ARGUMENTS]
    whole = LIBRARY + "\n".join(texts)
    host = iter(call_all(tmp_path, whole, calls))
    unit = lower_text(whole.replace("KEEP(", "("))
    assert not unit.notices
    made = program([unit])
    memory = fresh(made)
    returned = 0
    for number, text in enumerate(texts):
        results = [next(host) for _ in ARGUMENTS]
        for (a, b), wanted in zip(ARGUMENTS, results, strict=True):
            outcome = run(made, f"run_{number}", (a, b), steps=STEPS, memory=memory)
            if wanted is None:
                assert outcome.kind == "undefined", f"run_{number}({a}, {b}) of\n{text}"
                break  # what the memory holds now is not determined
            assert (outcome.kind, outcome.value) == ("returned", wanted[1]), f"{outcome} {text}"
            returned += 1
    assert returned > BATCH
