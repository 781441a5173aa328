"""Generated machines against what is true of them: their graphs, the slips in them, and nothing else.

Each program is compiled and run first, so that the truth is what the program does and not what was meant. An ordinary
run makes some dozen programs of each form; with ``STEPRING_MANY=1`` there are 2,000, and shares are held instead.
"""

import os
import re
from collections.abc import Sequence
from dataclasses import replace
from pathlib import Path

import pytest
from tests.machines.check import Compared, compare, compare_numbers
from tests.machines.host import COMPILER, differences
from tests.machines.programs import LABELS, Made, make
from tests.machines.slips import SLIPS
from tests.machines.to_come import FORMS_TO_COME, GRAPHS_TO_COME, PAIRS_TO_COME, SLIPS_TO_COME, STORAGES_TO_COME, params
from tests.machines.written import FORMS

MANY = bool(os.environ.get("STEPRING_MANY"))
COUNT = 2000 if MANY else 152


@pytest.fixture(scope="module")
def made() -> list[Made]:
    return [make(number) for number in range(COUNT)]


@pytest.fixture(scope="module")
def compared(tmp_path_factory: pytest.TempPathFactory) -> list[Compared]:
    return compare_numbers(range(COUNT), tmp_path_factory.mktemp("machines"))


def holds(right: Sequence[bool], share: float) -> bool:
    """All of an ordinary run's; of many, at least a share."""
    return len(right) > 0 and (sum(right) >= share * len(right) if MANY else all(right))


def sound(one: Compared) -> bool:
    """Whether nothing that is to come stands in the way of the graph, besides the form."""
    return placed(one) and one.slip not in GRAPHS_TO_COME


def placed(one: Compared) -> bool:
    """Whether a program's state is in a place where its form is found."""
    return one.storage not in STORAGES_TO_COME and (one.form, one.storage) not in PAIRS_TO_COME


def kept(one: Compared) -> bool:
    """Whether a program is of a form and place that are found."""
    return one.form not in FORMS_TO_COME and placed(one)


@pytest.mark.skipif(COMPILER is None, reason="no compiler to run the programs with")
def test_programs_do_what_their_tables_say(made: list[Made], tmp_path: Path) -> None:
    assert differences(made, tmp_path) == {}


@pytest.mark.skipif(COMPILER is None, reason="no compiler to run the programs with")
@pytest.mark.parametrize("form", FORMS)
def test_a_program_that_does_something_else_is_noticed(form: str, made: list[Made], tmp_path: Path) -> None:
    program = next(one for one in made if one.form == form and not one.slip)
    table = program.table
    step = next(edge for edge in sorted(table.edges()) if edge[0] == table.initial)
    other = next(state for state in table.states if state not in (step[2], table.initial))
    cells = {**table.cells}
    cells[step[:2]] = tuple(
        replace(one, target=other) if one.target == step[2] else one for one in table.cells[step[:2]]
    )
    assert set(differences([replace(program, table=replace(table, cells=cells))], tmp_path)) == {program.number}


@pytest.mark.parametrize("form", params(LABELS, FORMS_TO_COME))
def test_the_graph_is_the_one_that_was_made(form: str, compared: list[Compared]) -> None:
    mine = [one for one in compared if one.form == form and sound(one)]
    wrong = [f"{one.number}: {one.graph}" for one in mine if one.graph]
    assert holds([not one.graph for one in mine], 0.99), wrong


@pytest.mark.parametrize("form", params(LABELS, FORMS_TO_COME))
def test_each_transition_is_told_with_its_event(form: str, compared: list[Compared]) -> None:
    mine = [one for one in compared if one.form == form and sound(one)]
    wrong = [f"{one.number}: {one.graph or one.events}" for one in mine if one.graph or one.events]
    assert holds([not (one.graph or one.events) for one in mine], 0.99), wrong


@pytest.mark.parametrize("storage", params(["pointer"], STORAGES_TO_COME))
def test_the_graph_where_the_state_is_kept_otherwise(storage: str, compared: list[Compared]) -> None:
    mine = [one for one in compared if one.storage == storage and one.form not in FORMS_TO_COME]
    mine = [one for one in mine if (one.form, one.storage) not in PAIRS_TO_COME]
    assert holds([not one.graph for one in mine], 0.99)


@pytest.mark.parametrize("slip", params(["other enumeration"], GRAPHS_TO_COME))
def test_a_slip_does_not_spoil_the_graph(slip: str, tmp_path: Path) -> None:
    """Looked for among plain numbers, where constants say least."""
    numbers = iter(range(1, 10_000, 2))
    mine: list[Compared] = []
    while len(mine) < 6:
        made = make(next(numbers))
        if made.slip == slip and made.style.family == "numbers" and made.style.storage not in STORAGES_TO_COME:
            mine.append(compare(made, tmp_path))
    assert not [f"{one.number}: {one.graph}" for one in mine if one.graph]


@pytest.mark.parametrize("slip", params(SLIPS, SLIPS_TO_COME))
def test_the_slip_is_found(slip: str, compared: list[Compared]) -> None:
    mine = [one for one in compared if one.slip == slip and kept(one)]
    assert holds([bool(one.found) for one in mine], 0.98), [one.number for one in mine if not one.found]


def test_nothing_else_is_said_at_error_or_warning(compared: list[Compared]) -> None:
    alarms = [f"{one.number}: {alarm}" for one in compared for alarm in one.alarms]
    assert holds([not one.alarms for one in compared], 0.99), alarms


def test_every_program_is_read_whole(compared: list[Compared]) -> None:
    assert not [notice for one in compared for notice in one.notices]


def test_programs_read_like_firmware(made: list[Made]) -> None:
    """No tool's or generator's traces are left in a text, and lines are as long as people write them."""
    for program in made:
        assert not re.search("[^\\x20-\\x7e\n]", program.text)
        assert max(map(len, program.text.splitlines())) <= 130
