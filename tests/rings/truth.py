"""What ring programs really do: built with the host compiler's checks and run by the driver beside the ideal.

Many programs go into one binary, each in a unit of its own that includes the program's text unchanged; at run time
each has a process of its own. The compiler's bounds and integer checks call the driver's handlers, and every load and
store goes through its hooks, so that memory reached through pointers is checked as well.
"""

import shutil
import subprocess
from collections import defaultdict
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from tests.rings.programs import Made

HERE = Path(__file__).parent
GCC = shutil.which("gcc")
ADDRESSES = shutil.which("addr2line")
CHECKS = "bounds-strict,signed-integer-overflow,shift,integer-divide-by-zero,null,bool"
FLAGS = (
    *("-std=gnu11", "-O0", "-g1", "-w", "-fno-pie", "-no-pie", "-Dmemcpy=copied_", "-Dmemset=cleared_"),
    *(f"-fsanitize=kernel-address,{CHECKS}", "--param", "asan-instrumentation-with-call-threshold=0"),
    *("--param", "asan-stack=0", "--param", "asan-globals=1"),
)
BESIDE = 20
LIMIT = 120

PHYSICAL = ("past", "below", "outside", "undefined", "endless", "slots")


@dataclass(frozen=True, slots=True)
class Event:
    """Something that went wrong in a run.

    ``past``, ``below``, ``outside`` (far away, where past the end and wrapped round cannot be told apart) and
    ``undefined`` are at a ``line``; ``slots`` names the index in ``place`` and ``operation`` is what moved it. The
    others compare with the ideal: ``room``, ``refused``, ``data``, ``withheld``, ``value``, ``count``, ``room told``,
    ``empty``, ``full``, ``sample``, ``total``. ``numbers`` are what was found, what was due, and one more.
    """

    kind: str
    operation: str
    line: int
    place: str
    numbers: tuple[int, int, int]
    slots: int
    capacity: int


@dataclass(frozen=True, slots=True)
class Truth:
    """What running showed of one program.

    ``clean``: nothing ever went wrong. ``odd``: it behaves as a smaller ring than its storage, or leaves slots out, and
    nothing is lost. ``broken``: the rest.
    """

    number: int
    verdict: Literal["clean", "odd", "broken"]
    events: tuple[Event, ...]

    def lines(self, *kinds: str) -> frozenset[int]:
        """The lines with events of some kinds."""
        return frozenset(event.line for event in self.events if event.kind in kinds and event.line)

    def kinds(self) -> frozenset[str]:
        return frozenset(event.kind for event in self.events)


def run_all(made: Sequence[Made], folder: Path, jobs: int = 2) -> dict[int, Truth]:
    """The truth of each program, by number. ``folder`` is where they are written and built."""
    folder.mkdir(parents=True, exist_ok=True)
    for name in ("driver.c", "driver.h"):
        shutil.copy(HERE / name, folder / name)
    driver = folder / "driver.o"
    subprocess.run(
        [str(GCC), "-std=gnu11", "-O2", "-w", "-fno-pie", "-c", str(folder / "driver.c"), "-o", str(driver)], check=True
    )
    groups = [made[at : at + BESIDE] for at in range(0, len(made), BESIDE)]
    found: dict[int, Truth] = {}
    with ThreadPoolExecutor(jobs) as pool:
        for group in pool.map(lambda pair: _group(pair[1], folder / f"g{pair[0]}", driver), enumerate(groups)):
            found.update(group)
    return found


def program_folder(folder: Path, position: int, number: int) -> Path:
    """Where the program at a position of the list is written."""
    return folder / f"g{position // BESIDE}" / f"p{number}"


def _group(group: Sequence[Made], folder: Path, driver: Path) -> dict[int, Truth]:
    folder.mkdir(exist_ok=True)
    units = []
    for item in group:
        home = folder / f"p{item.number}"
        home.mkdir(exist_ok=True)
        (home / item.name).write_text(item.text, "utf-8")
        unit = folder / f"u{item.number}.c"
        unit.write_text(item.joined, "utf-8")
        units.append(unit)
    table = folder / "table.c"
    declared = "".join(f"extern const struct ring_ops ops_{item.number};\n" for item in group)
    pointers = ", ".join(f"&ops_{item.number}" for item in group)
    table.write_text(
        f'#include "../driver.h"\n{declared}const struct ring_ops *const all_rings[] = {{{pointers}, 0}};\n'
    )
    binary = folder / "rings"
    built = subprocess.run(
        [str(GCC), *FLAGS, *map(str, units), str(table), str(driver), "-o", str(binary)], capture_output=True, text=True
    )
    assert built.returncode == 0, built.stderr[:4000]
    done = subprocess.run([str(binary)], capture_output=True, text=True, timeout=LIMIT)
    assert done.returncode == 0, done.stderr[:1000]
    rows = [line.split("\t") for line in done.stdout.splitlines()]
    lines = _lines(binary, sorted({row[4][3:] for row in rows if row[4].startswith("pc ")}))
    events: dict[int, list[Event]] = defaultdict(list)
    finished = set()
    for row in rows:
        if row[3] == "done":
            finished.add(int(row[0]))
            continue
        assert row[3] != "broke", f"the run of program {row[0]} broke off ({row[6]})"
        where = row[4]
        line = int(where[5:]) if where.startswith("line ") else lines[where[3:]] if where.startswith("pc ") else 0
        numbers = (int(row[6]), int(row[7]), int(row[8]))
        events[int(row[0])].append(Event(row[3], row[5], line, where, numbers, int(row[1]), int(row[2])))
    assert finished == {item.number for item in group}
    return {item.number: _truth(item, events[item.number]) for item in group}


def _lines(binary: Path, addresses: Sequence[str]) -> dict[str, int]:
    if not addresses:
        return {}
    done = subprocess.run([str(ADDRESSES), "-e", str(binary), *addresses], check=True, capture_output=True, text=True)
    texts = [line.split(":")[-1].split()[0] for line in done.stdout.splitlines()]
    return {address: int(text) if text.isdigit() else 0 for address, text in zip(addresses, texts, strict=True)}


def _truth(made: Made, events: Sequence[Event]) -> Truth:
    """The ideal that fits best is the one that the program is compared with: a ring may use fewer slots than it has."""
    if not events:
        return Truth(made.number, "clean", ())
    # What a smaller ideal says of slots is of no interest.
    most_of = {event: event.slots - (made.plan.scheme == "one_slot") for event in events}
    events = [event for event in events if event.kind != "slots" or event.capacity == most_of[event]]
    physical = {event for event in events if event.kind in PHYSICAL}
    kept: set[Event] = set(physical)
    smaller = False
    worst = "odd"
    if any(event.kind != "slots" for event in physical):
        worst = "broken"
    for slots in {event.slots for event in events}:
        here = [event for event in events if event.slots == slots]
        most = slots - (made.plan.scheme == "one_slot")
        logical: dict[int, list[Event]] = defaultdict(list)
        for event in here:
            if event.kind not in PHYSICAL:
                logical[event.capacity].append(event)
        tried = _tried(made, most, here)
        if not logical.get(most):
            continue
        fits = [capacity for capacity in tried if not logical.get(capacity)]
        if fits:
            smaller = True
        else:
            worst = "broken"
            kept.update(logical[most])
    if smaller and worst == "odd":
        return Truth(made.number, "odd", tuple(sorted(kept, key=_order)))
    return Truth(made.number, worst if kept else "odd", tuple(sorted(kept, key=_order)))  # type: ignore[arg-type]


def _tried(made: Made, most: int, events: Sequence[Event]) -> list[int]:
    """The capacities that the driver ran with: it goes on to the next as long as something is wrong."""
    if made.plan.kind == "history":
        return [most]
    capacities = [most, most - 1, most - 2]
    seen = {event.capacity for event in events}
    tried = []
    for capacity in capacities:
        if capacity < 1:
            break
        tried.append(capacity)
        if capacity not in seen:
            break
    else:
        other = made.plan.sibling - (made.plan.scheme == "one_slot")
        if made.plan.slip == "sibling":
            tried.append(other)
    return tried


def _order(event: Event) -> tuple[object, ...]:
    return (event.slots, event.kind, event.operation, event.line, event.place, event.numbers)
