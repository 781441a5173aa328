"""How the tests of single language features work: C functions, and what calls of them give.

Every case says its values itself; they were worked out from the standard. The same text is then built by the host's
compiler, which must agree, so that a wrong expectation cannot pass either.
"""

import re
import shutil
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from tests.paths.host import call_all
from tests.support import lower_text

from stepring.paths.interpreter import Program, fresh, program, run


@dataclass(frozen=True)
class Case:
    """One feature: a text, and the values of calls such as ``weigh(3, 4)``. Calls share one memory, in order.

    Names are unique in a test module. ``host`` is False where the text has a meaning only here.
    """

    name: str
    text: str
    calls: Mapping[str, int | None]
    host: bool = True


def joined(case: Case, model: str = "LP64") -> Program:
    """The case's program."""
    unit = lower_text(case.text, model)
    assert not unit.notices, unit.notices
    return program([unit])


def check(case: Case, model: str = "LP64") -> None:
    """Run the case's calls; None as a value stands for undefined behaviour."""
    made = joined(case, model)
    memory = fresh(made)
    for call, wanted in case.calls.items():
        name, _, rest = call.partition("(")
        arguments = [int(item, 0) for item in rest.rstrip(")").split(",") if item.strip()]
        outcome = run(made, name, arguments, memory=memory)
        if wanted is None:
            assert outcome.kind == "undefined", (call, outcome)
        else:
            assert (outcome.kind, outcome.value) == ("returned", wanted), (call, outcome)


def host_agrees(cases: Sequence[Case], folder: Path) -> None:
    """Build all cases in one program with the host's compiler and compare."""
    if shutil.which("gcc") is None:
        return
    chosen = [case for case in cases if case.host]
    text = "\n".join(case.text for case in chosen)
    text = re.sub(r"__stepring_range\(([^,()]+), ([^,()]+)\)", r"\1 ... \2", text)
    text = text.replace("? __stepring_same :", "? :").replace("offsetof(", "__builtin_offsetof(")
    calls = [(case.name, call, wanted) for case in chosen for call, wanted in case.calls.items()]
    results = call_all(folder, text, [("0", call) for _, call, _ in calls])
    for (name, call, wanted), result in zip(calls, results, strict=True):
        assert (None if result is None else result[1]) == wanted, (name, call)
