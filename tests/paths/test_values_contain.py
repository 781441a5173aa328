"""Random programs run by the interpreter: whatever is seen lies in what the values engine found."""

import os
import random

import pytest
from tests.paths.contained import watch
from tests.paths.programs import LIBRARY, program_text
from tests.support import lower_text

from stepring.paths.interpreter import fresh, program, run

BATCH = 25
BATCHES = 200 if os.environ.get("STEPRING_MANY") else 2
ARGUMENTS = ((0, 0), (1, -1), (7, 300), (-128, 2147483647))
STEPS = 20_000_000


@pytest.mark.parametrize("seed", range(BATCHES))
def test_batch(seed: int) -> None:
    seen = 0
    for number in range(BATCH):
        text = program_text(random.Random(seed * BATCH + number), str(number))
        unit = lower_text((LIBRARY + text).replace("KEEP(", "("))
        watched = watch(unit)
        made = program([unit])
        memory = fresh(made)
        watched.look(memory)
        for arguments in ARGUMENTS:
            outcome = run(made, f"run_{number}", arguments, steps=STEPS, memory=memory, observe=watched.observe)
            if outcome.kind != "returned":
                break  # what the memory holds now is not determined
            watched.look(memory)
        assert not watched.broken, f"{watched.broken[:5]} in\n{text}"
        seen += watched.seen
    assert seen > 100 * BATCH
