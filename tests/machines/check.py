"""Compares what the inspection says of each generated machine with what is true of it, and prints the tables.

``python -m tests.machines.check COUNT [FIRST] [--keep DIR]`` makes, runs and inspects that many programs: exact graphs
by form, by place of the state and by family of constants, slips found by rule, and alarms that no slip explains.
"""

import argparse
import re
import sys
import tempfile
import time
from collections import Counter
from collections.abc import Callable, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import dataclass
from pathlib import Path

from tests.machines.host import differences
from tests.machines.programs import Made, make
from tests.machines.slips import REVIEWS
from tests.machines.style import PHASES
from tests.machines.tables import Edge
from tests.machines.written import event_function

from stepring.pipeline import Options, inspect
from stepring.rule import Obligation, load_rules
from stepring.shapes.types import Machine, Transition
from stepring_rules.machine_common import short

ZERO = "0"
"""Stands for a value that is no state and may be told: what storage starts as, a count, another's constant."""
OPTIONS = Options(use_compiler=False)
_NEGATED = re.compile(r"!\([^()]*\)|\w+ != \w+")
_EVENT = re.compile(r"\bEV_[A-Z0-9_]+\b")


@dataclass(frozen=True, slots=True)
class Compared:
    """One program's comparison. ``graph`` is empty where the graph is exact, else what is wrong with it in words.

    ``events`` is empty where every transition is told to be taken by its own event, too.
    ``found`` are the rules that spoke of the slip with the level or kind they gave it; ``alarms`` the errors and
    warnings that nothing explains, each as rule, line and sentence.
    """

    number: int
    form: str
    storage: str
    family: str
    states: int
    slip: str
    graph: str
    events: str
    found: tuple[str, ...]
    there: bool
    alarms: tuple[str, ...]
    notices: tuple[str, ...]
    seconds: float

    @property
    def missed(self) -> bool:
        return bool(self.slip) and self.there and not self.found


def compare(made: Made, folder: Path) -> Compared:
    """Inspect one program, alone in a folder of its own."""
    place = folder / made.name
    place.mkdir(exist_ok=True)
    (place / f"{made.name}.c").write_text(made.text, encoding="utf-8")
    began = time.perf_counter()
    outcome = inspect([place], OPTIONS)
    seconds = time.perf_counter() - began
    rules = {rule.id for rule in load_rules()}
    speaking = [one for one in outcome.obligations if one.kind in ("fail", "review")]
    about = [one for one in speaking if one.rule in made.rules and _is_about(made, one)]
    found = [one for one in about if one.kind == "fail" or one.rule in REVIEWS]
    loud = [one for one in speaking if one.kind == "fail" and one.level in ("error", "warning")]
    alarms = [one for one in loud if one not in about and one.rule not in made.follows]
    machines = list(outcome.program.machines)
    inside = [one for one in machines if one.variable == f"{made.table.noun}_push"]
    graph, events = nested_fault(made, inside), ""
    if not graph:
        machines = [one for one in machines if one not in inside]
        graph = state_fault(made, machines)
    if not graph:
        graph, events = edge_faults(made, machines[0])
    return Compared(
        made.number,
        made.label,
        made.style.storage,
        made.style.family,
        len(made.table.states),
        made.slip,
        graph,
        events,
        tuple(sorted({f"{one.rule} {one.level or one.kind}" for one in found})),
        bool(set(made.rules) & rules),
        tuple(f"{one.rule} {one.where.line} {one.what}" for one in alarms),
        tuple(notice.text for notice in outcome.notices),
        seconds,
    )


def _is_about(made: Made, item: Obligation) -> bool:
    if item.where.line in made.lines:
        return True
    spelled = {made.spelled(state) if state in made.table.states else state for state in made.about}
    return bool(spelled & set(item.states))


def nested_fault(made: Made, machines: Sequence[Machine]) -> str:
    """What is wrong with the machine inside a state, where there is one."""
    if not made.style.nested:
        return f"{machines[0].variable} is none" if machines else ""
    if len(machines) != 1:
        return "the machine inside a state is not found"
    names = [f"{made.table.noun.upper()}_PUSH_{phase}" for phase in PHASES]
    ring = {(name, names[(at + 1) % len(names)]) for at, name in enumerate(names)}
    told = {(step.source, step.target) for step in machines[0].transitions}
    return "" if told == ring else f"the machine inside a state has {sorted(told ^ ring)[0]}"


def _names(made: Made, machine: Machine) -> dict[str, str]:
    """The table's name of each state found, empty where it has none."""
    states = (*made.table.states.items(), *made.table.foreign.items())
    if made.form in ("function pointer", "goto"):
        known = {made.spelled(state): state for state, _ in states}
        return {one.name: known.get(one.name, "") for one in machine.states}
    values = {value: state for state, value in states}
    if made.slip == "zero is no state":
        values[0] = ZERO
    if made.style.counted:
        values[len(made.table.states)] = ZERO  # how many there are
    if made.slip == "other enumeration":
        values[61] = ZERO  # what it is compared with
    return {one.name: values.get(one.value, "") for one in machine.states}


def state_fault(made: Made, machines: Sequence[Machine]) -> str:
    """Nothing, or the first way in which the states found are not those of the one machine that was made."""
    if not machines:
        return "not found"
    if len(machines) > 1:
        return f"{len(machines)} machines: {', '.join(machine.variable for machine in machines)}"
    (machine,) = machines
    ours = _names(made, machine)
    if odd := [name for name, state in ours.items() if not state]:
        return f"{odd[0]} is no state"
    if missing := set(made.table.states) - set(ours.values()):
        return f"states missing: {', '.join(sorted(missing))}"
    if made.slip != "zero is no state" and machine.initial != (made.spelled(made.table.initial),):
        return f"initial {machine.initial}"
    return ""


def edge_faults(made: Made, machine: Machine) -> tuple[str, str]:
    """What is wrong with the transitions of a machine whose states are right: as such, and with their events."""
    names = _names(made, machine)
    wanted, loose = made.edges(), made.may_be_told()
    known, pairs = wanted | loose, {(source, target) for source, _, target in wanted - loose}
    possible = {(source, target) for source, _, target in known}
    told: set[Edge] = set()
    events = ""
    for step in machine.transitions:
        if names[step.source] == ZERO:
            continue
        source, target = names[step.source], names[step.target]
        said = f"{step.source} to {step.target} ({step.function}, {step.guard!r})"
        if (source, target) not in possible:
            return f"{said} is no transition", ""
        whole = all((source, event, target) in known for event in made.table.events)
        for event in events_of(made, step):
            edge = (source, event, target)
            told.add(edge)
            free = {edge, (source, "*", target)}
            if not free & known and not (event == "*" and whole):
                events = events or f"{said} is not taken by {event}"
            elif short(step.function) not in made.functions(edge) and not free & loose:
                return f"{said} is not taken by that function", ""
    if missing := pairs - {(source, target) for source, _, target in told}:
        return f"{' to '.join(min(missing))} is missing", ""
    for edge in sorted(wanted - loose - told):
        if edge[1] != "*" and not {(edge[0], "*", edge[2])} & (loose | told):
            events = events or f"{edge[0]} to {edge[2]} by {edge[1]} is missing"
    return "", events


def events_of(made: Made, step: Transition) -> set[str]:
    """The events that a transition is told to be taken by; ``*`` for any."""
    if made.form == "event functions":
        function = short(step.function)
        for event in made.table.events:
            if function == event_function(made.style, event):
                return {event}
    for text in (step.event, _NEGATED.sub("", step.guard)):
        if found := set(_EVENT.findall(text)):
            return found
    return {"*"}


def compare_numbers(numbers: Sequence[int], folder: Path) -> list[Compared]:
    return [compare(make(number), folder) for number in numbers]


def compare_all(count: int, first: int, folder: Path, jobs: int = 1) -> tuple[list[Compared], dict[int, str]]:
    """Compare the programs of some numbers, and say which do not do what their tables say."""
    numbers = range(first, first + count)
    wrong = differences([make(number) for number in numbers], folder)
    if jobs == 1:
        return compare_numbers(numbers, folder), wrong
    with ProcessPoolExecutor(jobs) as pool:
        parts = [numbers[at::jobs] for at in range(jobs)]
        results = pool.map(compare_numbers, parts, [folder] * jobs)
        return sorted((one for part in results for one in part), key=lambda one: one.number), wrong


# ---------------------------------------------------------------------------------------------------------- tables


def shares(title: str, every: Sequence[Compared], key: Callable[[Compared], str]) -> list[str]:
    head = f"| {title} | programs | graph exact | with its events | not found | else wrong |"
    lines = [head, "|---|---|---|---|---|---|"]
    for name in dict.fromkeys(sorted(key(one) for one in every)):
        mine = [one for one in every if key(one) == name]
        exact, gone = sum(not one.graph for one in mine), sum(one.graph == "not found" for one in mine)
        told = sum(not one.graph and not one.events for one in mine)
        lines.append(f"| {name} | {len(mine)} | {exact} | {told} | {gone} | {len(mine) - exact - gone} |")
    return lines


def by_slip(every: Sequence[Compared]) -> list[str]:
    lines = ["| slip | programs | found | missed | rule not there | as | missed in |", "|---|---|---|---|---|---|---|"]
    for slip in dict.fromkeys(one.slip for one in sorted(every, key=lambda one: one.number) if one.slip):
        mine = [one for one in every if one.slip == slip]
        found = [one for one in mine if one.found]
        away = sum(not one.there for one in mine)
        told = Counter(word for one in found for word in one.found)
        missed = Counter(one.form for one in mine if one.missed)
        lines.append(
            f"| {slip} | {len(mine)} | {len(found)} | {sum(one.missed for one in mine)} | {away} | "
            f"{', '.join(f'{word} {count}' for word, count in told.items())} | "
            f"{', '.join(f'{form} {count}' for form, count in missed.items())} |"
        )
    return lines


def report(every: Sequence[Compared], wrong: dict[int, str]) -> str:
    clean = [one for one in every if not one.slip]
    alarms = Counter(alarm.split()[0] for one in every for alarm in one.alarms)
    exact = sum(not one.graph for one in every)
    there = [one for one in every if one.slip and one.there]
    found = sum(bool(one.found) for one in there)
    placed = [one for one in every if one.form not in ("goto", "function pointer")]
    lines = [
        f"{len(every)} programs, {len(clean)} without a slip; {len(wrong)} do not do what their table says. "
        f"Graph exact: {exact} ({100 * exact / len(every):.1f} %). Slips found: {found} "
        f"of {len(there)} whose rule is there. Alarms in clean programs: {sum(bool(one.alarms) for one in clean)}; in "
        f"others besides the slip: {sum(bool(one.alarms) for one in every if one.slip)}. Longest inspection "
        f"{max(one.seconds for one in every):.2f} s, mean {sum(one.seconds for one in every) / len(every):.2f} s.",
        "",
        *shares("form", every, lambda one: one.form),
        "",
        *shares("place", placed, lambda one: one.storage),
        "",
        *shares("constants", every, lambda one: one.family),
        "",
        *by_slip(every),
        "",
        "Alarms by rule: " + (", ".join(f"{rule} {count}" for rule, count in sorted(alarms.items())) or "none"),
    ]
    return "\n".join(lines)


def faults(every: Sequence[Compared]) -> str:
    """Every program that something is wrong with, a line each."""
    lines = []
    for one in every:
        head = f"{one.number} {one.form}, {one.storage}, {one.family}, {one.states} states, {one.slip or 'no slip'}:"
        if one.graph:
            lines.append(f"{head} graph: {one.graph}")
        if one.events:
            lines.append(f"{head} events: {one.events}")
        if one.missed:
            lines.append(f"{head} missed")
        lines += [f"{head} alarm: {alarm}" for alarm in one.alarms]
        lines += [f"{head} notice: {notice}" for notice in one.notices]
    return "\n".join(lines)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("count", type=int)
    parser.add_argument("first", type=int, nargs="?", default=0)
    parser.add_argument("--keep", type=Path, help="where the C files stay")
    parser.add_argument("--jobs", type=int, default=1)
    parser.add_argument("--faults", action="store_true", help="every program that something is wrong with")
    given = parser.parse_args()
    with tempfile.TemporaryDirectory() as away:
        folder = given.keep or Path(away)
        folder.mkdir(parents=True, exist_ok=True)
        every, wrong = compare_all(given.count, given.first, folder, given.jobs)
    print(report(every, wrong))
    if given.faults:
        print(faults(every))
    sys.exit(bool(wrong))


if __name__ == "__main__":
    main()
