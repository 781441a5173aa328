"""State tables: what a machine should do, as data that C can be written from and that a run can be compared with.

A table maps (state, event) to steps, each with an optional guard; the first step whose guard holds is taken, and where
none is, the state stays. ``after`` says what a machine does; ``edges`` which transitions its code holds.
"""

import random
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Literal, TypeAlias

GuardKind: TypeAlias = Literal["over", "under", "shut", "late", "never"]
Inputs: TypeAlias = tuple[int, bool]

NOUNS = ["auger", "hopper", "blower", "spreader", "silo", "lift", "winch", "sluice", "feeder", "barge"]
_STATES = (
    "IDLE PRIME FILL WEIGH SETTLE DOSE BLOW PURGE RINSE DRAIN HEAT COOL MIX SIFT TARE RAMP CRUISE COAST REVERSE PARK "
    "LOAD UNLOAD SPREAD CALIBRATE VENT WARM SOAK SCRAPE RAISE LOWER TURN DWELL PROBE SAMPLE REFILL FLUSH SWEEP SHAKE "
    "CHARGE HOLD"
)
WORDS = _STATES.split()
EVENTS = ["START", "PAUSE", "FULL", "EMPTY", "JAM", "TICK", "RINSE", "LID"]
ACTIONS = ["motor_on", "motor_off", "gate_open", "gate_shut", "lamp_on", "lamp_off", "note_weight"]
INPUTS: tuple[Inputs, ...] = tuple((kg, shut) for kg in (-40, 5, 25, 45, 70, 2000) for shut in (False, True))
"""What a run is driven with: a weight on each side of every limit that guards use, and the lid open and shut."""


@dataclass(frozen=True, slots=True)
class Guard:
    """A condition on the inputs, as C writes it."""

    kind: GuardKind
    limit: int = 0

    @property
    def text(self) -> str:
        return {
            "over": f"kg > {self.limit}",
            "under": f"kg < {self.limit}",
            "shut": "lid_shut()",
            "late": "waited_ms() > 5000u",
            "never": f"kg > {self.limit} && kg < {self.limit - 20}",
        }[self.kind]

    def holds(self, kg: int, shut: bool) -> bool:
        # The host lets 100 ms pass for each kg, so that one input serves for both.
        late = kg * 100 > 5000
        return {"over": kg > self.limit, "under": kg < self.limit, "shut": shut, "late": late, "never": False}[
            self.kind
        ]

    @property
    def name(self) -> str:
        """A name for a function that tests it."""
        return {"shut": "lid_is_shut", "late": "waited_long"}.get(self.kind, f"{self.kind}_{self.limit}_kg")


@dataclass(frozen=True, slots=True)
class Step:
    """Where a cell leads. ``first`` is a state stored before and overwritten; ``lost``: worked out, not committed;
    ``leaves``: the function is left at once, and the busy flag cleared or forgotten; ``marked``: the slip is here."""

    target: str
    guard: Guard | None = None
    actions: tuple[str, ...] = ()
    first: str = ""
    lost: bool = False
    leaves: Literal["", "clears", "forgets"] = ""
    marked: bool = False


Cells: TypeAlias = dict[tuple[str, str], tuple[Step, ...]]
Edge: TypeAlias = tuple[str, str, str]


@dataclass(frozen=True, slots=True)
class Table:
    """States with their values, events in order, and the steps of some cells; ``initial`` is where it starts."""

    noun: str
    states: Mapping[str, int]
    events: tuple[str, ...]
    cells: Cells
    initial: str
    # Values that are stored though they are no states.
    foreign: Mapping[str, int] = field(default_factory=dict)

    def of(self, state: str) -> dict[str, tuple[Step, ...]]:
        """The steps of one state by event, in the order of the events."""
        return {event: self.cells[state, event] for event in self.events if (state, event) in self.cells}

    def after(self, state: str, event: str, inputs: Inputs) -> str:
        """The state that follows."""
        for step in self.cells.get((state, event), ()):
            if step.guard is None or step.guard.holds(*inputs):
                return state if step.lost else step.target
        return state

    def edges(self) -> Iterator[Edge]:
        """(state, event, next state) of every step that can be taken with some inputs."""
        for (state, event), steps in self.cells.items():
            for number, step in enumerate(steps):
                earlier = [one.guard for one in steps[:number]]
                can = any(
                    (step.guard is None or step.guard.holds(*inputs))
                    and not any(guard is None or guard.holds(*inputs) for guard in earlier)
                    for inputs in INPUTS
                )
                if can and not step.lost:
                    yield state, event, step.target

    def guarded(self) -> bool:
        return any(step.guard is not None for steps in self.cells.values() for step in steps)

    def actions(self) -> list[str]:
        """All actions, in order of first use."""
        return list(dict.fromkeys(act for steps in self.cells.values() for step in steps for act in step.actions))

    def without_guards(self) -> "Table":
        """The same table with the last step of each cell taken whatever the inputs are."""
        return replace(self, cells={cell: (replace(steps[-1], guard=None),) for cell, steps in self.cells.items()})


def random_table(dice: random.Random, count: int, sparse: bool) -> Table:
    """A table of ``count`` states in which every state is reached and left: a ring through all of them, and more.

    ``sparse`` allows values with gaps.
    """
    noun = dice.choice(NOUNS)
    words = ["IDLE", *dice.sample(WORDS[1:], count - 1)]
    values = sorted([0, *dice.sample(range(1, 60), count - 1)]) if sparse and dice.random() < 0.25 else range(count)
    states = {f"{noun.upper()}_{word}": value for word, value in zip(words, values, strict=True)}
    events = tuple(f"EV_{event}" for event in dice.sample(EVENTS, dice.randint(2, min(8, 2 + count // 3))))
    names = list(states)
    ring = [names[0], *dice.sample(names[1:], count - 1)]
    cells: Cells = {}
    for here, there in zip(ring, [*ring[1:], ring[0]], strict=True):
        cells[here, dice.choice(events)] = (Step(there),)
    for state in names:
        for event in events:
            if (state, event) not in cells and dice.random() < 0.4:
                cells[state, event] = (Step(dice.choice(names)),)
    table = Table(noun, states, events, {}, names[0])
    for cell in sorted(cells, key=lambda cell: (names.index(cell[0]), events.index(cell[1]))):
        table.cells[cell] = tuple(_dressed(dice, names, step) for step in cells[cell])
        first = table.cells[cell][0]
        if first.guard is not None and dice.random() < 0.4:
            table.cells[cell] = (first, replace(first, target=dice.choice(names), guard=None, actions=()))
    return table


def _dressed(dice: random.Random, names: list[str], step: Step) -> Step:
    guard = None
    if dice.random() < 0.35:
        kind: GuardKind = dice.choice(["over", "over", "under", "under", "shut", "late"])
        guard = Guard(kind, dice.choice([20, 40, 60]) if kind in ("over", "under") else 0)
    actions = tuple(dice.sample(ACTIONS, dice.choice([0, 0, 1, 1, 2])))
    return replace(step, guard=guard, actions=actions)


def reached(edges: Iterable[Edge], start: str) -> set[str]:
    """The states that can follow from one."""
    pairs = {(source, target) for source, _, target in edges}
    found = {start}
    while more := {target for source, target in pairs if source in found} - found:
        found |= more
    return found
