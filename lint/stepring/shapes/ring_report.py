"""How a disagreement of a ring with the ideal becomes a witness that is run again, and its steps.

The one idea: whatever the search believes, only a run from nothing that ends as it claims is reported. Where the fault
lies is told by the stores of the run: the last one into an index, or what left an index out of its range before.
"""

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from typing import Any

from stepring.meaning.types import IntType
from stepring.paths.replay import replay
from stepring.paths.types import Event
from stepring.paths.witness import Ending, Reference, Value, Witness, WitnessCall
from stepring.places import Origin, Position
from stepring.shapes.ring_calls import Effect
from stepring.shapes.ring_ideal import Content
from stepring.shapes.ring_parameters import GIVEN, STORAGE, TAKEN
from stepring.shapes.ring_types import Disagreement, Doubt
from stepring.shapes.ring_uses import (
    Probe,
    Use,
    perform,
)
from stepring.shapes.ring_world import World
from stepring.shapes.types import OrbitStep

SHOWN = 12
TRIES = 2
"""How many witnesses of one kind may turn out not to hold."""
Placer = Callable[[Position], Origin]


@dataclass(frozen=True, slots=True)
class Made:
    """One call of a run, with the indices' values after it."""

    call: WitnessCall
    name: str
    values: tuple[Any, ...]
    result: str = ""


@dataclass(frozen=True, slots=True)
class Suspect:
    """A call that left an index where no plain put or take leaves it: if harm comes of it, this call is to blame."""

    position: Position
    function: str
    what: str


@dataclass(frozen=True, slots=True)
class State:
    """A memory with the run that leads to it, what the ideal queue holds then, and the next element to be given.

    ``blame``: the call before, where what comes now only brings to light what it did.
    """

    saved: Any
    held: Content
    run: tuple[Made, ...]
    token: int
    suspect: Suspect | None = None
    blame: Suspect | None = None


@dataclass(slots=True, eq=False)
class Search:
    """One exploration under way. ``found`` keeps the first disagreement of each kind and function.

    ``far`` are the counters' places with where they start, in the search just before their ``overflow``.
    """

    probe: Probe
    origin: Placer
    base: Witness
    put: Use | None = None
    take: Use | None = None
    uses: list[Use] = field(default_factory=list)
    room: int = 0
    overflow: bool = False
    far: tuple[tuple[str, int], ...] = ()
    ranges: tuple[tuple[int, int] | None, ...] = ()
    odd: Suspect | None = None
    found: dict[tuple[Doubt, str], Disagreement] = field(default_factory=dict)
    failed: dict[tuple[Doubt, str], int] = field(default_factory=dict)

    @property
    def world(self) -> World:
        return self.probe.world

    @property
    def spent(self) -> bool:
        return self.probe.purse.left <= 0


def made_of(search: Search, effect: Effect) -> tuple[Made, ...]:
    """The call (and the one before it) as part of a run."""
    name = search.world.group.functions[effect.call.function].name
    made = Made(effect.call, name, effect.after, _result_text(effect))
    return (made,) if effect.prior is None else (*made_of(search, effect.prior), made)


def shown(held: Sequence[int]) -> str:
    if not held:
        return "nothing"
    shown = ", ".join("no element" if value < 0 else str(value) for value in held[:8])
    return shown + (f" and {len(held) - 8} more" if len(held) > 8 else "")


def moved_text(search: Search, effect: Effect) -> str:
    parts = [
        f"{place[0]} goes from {old} to {new}"
        for place, old, new in zip(search.world.places, effect.before, effect.after, strict=True)
        if old != new
    ]
    return " and ".join(parts) or "a slot is cleared"


def _events(search: Search, state: State, use: Use, given: dict[str, Any]) -> list[Event]:
    events: list[Event] = []
    search.world.load(state.saved)
    given = {"token": state.token, **given}
    perform(search.world, use, search.probe.purse, watch=events, **given)
    return events


def index_store(search: Search, state: State, use: Use, given: dict[str, Any]) -> tuple[Position, str]:
    """The place of the last store into an index, and its function; else the function's own place."""
    names = {place[0] for place in search.world.places}
    for event in reversed(_events(search, state, use, given)):
        if event.kind == "store" and event.text.replace("->", ".").rsplit(".", 1)[-1] in names:
            return event.position, event.function
    return use.operation.function.position, use.name


def return_position(search: Search, state: State, use: Use, **given: Any) -> Position:
    for event in reversed(_events(search, state, use, given)):
        if event.kind == "return" and event.function == use.name:
            return event.position
    return use.operation.function.position


def return_place(search: Search, state: State, use: Use, **given: Any) -> Origin:
    return search.origin(return_position(search, state, use, **given))


def suspected(search: Search, state: State, use: Use, effect: Effect, given: dict[str, Any]) -> Suspect | None:
    """Whether a call leaves an index out of the range that plain use keeps."""
    for at, (limits, value) in enumerate(zip(search.ranges, effect.after, strict=False)):
        if search.world.places[at][3] == "count":
            continue  # too many are counted where there was no room: that is said of the room
        if limits is not None and isinstance(value, int) and not limits[0] <= value <= limits[1]:
            position, function = index_store(search, state, use, given)
            what = f"{use.name} leaves {search.world.places[at][0]} at {value}"
            return Suspect(position, function, f"{what}; its range is {limits[0]} to {limits[1]}")
    return None


def output_report(
    search: Search, state: State, use: Use, effect: Effect, doubt: Doubt, what: str, due: Content, **given: Any
) -> None:
    """A call that gives other elements than are due."""
    position, function = index_store(search, state, use, given)
    if function == use.name and effect.before == effect.after:
        position = return_position(search, state, use, **given)
    out = effect.outputs.get(use.channel, ())
    at = next((n for n, value in enumerate(due) if out[n : n + 1] != (value,)), len(due))
    ending = _output_ending(search, use, effect, at, due, search.origin(position))
    report(search, state, effect, doubt, what, position, function, ending)


def _output_ending(search: Search, use: Use, effect: Effect, at: int, due: Content, where: Origin) -> Ending:
    """An ending by the element at a position of what came out."""
    wanted = str(due[at]) if at < len(due) else "nothing"
    if use.channel == "result" and isinstance(effect.outcome.value, int):
        return Ending("result", where, None, "", str(effect.outcome.value), wanted)
    if use.channel == "buffer" and search.world.element in (1, 2, 4) and search.world.parts == 1:
        out = effect.outputs.get("buffer", ())
        return Ending("value", where, None, f"{TAKEN}[{at}]", str(out[at] if at < len(out) else 0), wanted)
    return index_ending(search, effect, where, f"where the call hands out {wanted}")


def index_ending(search: Search, effect: Effect, where: Origin, due: str) -> Ending:
    """An ending by the index that moved, or by the first one."""
    moved = [at for at, (old, new) in enumerate(zip(effect.before, effect.after, strict=True)) if old != new]
    at = moved[0] if moved else 0
    _, name, path, _ = search.world.places[at]
    value = effect.after[at]
    type_ = search.world.readers[at][2]
    if not isinstance(type_, IntType):
        return Ending("value", where, None, name + path, f"&{STORAGE}" + (f" + {value} bytes" if value else ""), due)
    return Ending("value", where, None, name + path, str(value), due)


def index_report(search: Search, state: State, use: Use, effect: Effect, doubt: Doubt, what: str) -> None:
    position, function = index_store(search, state, use, {})
    at = next((n for n, (old, new) in enumerate(zip(effect.before, effect.after, strict=True)) if old != new), 0)
    ending = index_ending(search, effect, search.origin(position), str(effect.before[at]))
    report(search, state, effect, doubt, what, position, function, ending)


def content_report(
    search: Search,
    state: State,
    use: Use,
    doubt: Doubt,
    what: str,
    due: Content,
    now: Content,
    **given: Any,
) -> None:
    """What the ring holds after a call is not what is due: shown by taking out up to the first wrong element."""
    if search.overflow:
        doubt = "overflow"
    take = search.take
    assert take is not None
    position, function = index_store(search, state, use, given)
    search.world.load(state.saved)
    full = {"token": state.token, **given}
    effect = perform(search.world, use, search.probe.purse, **full)
    run = (*state.run, *made_of(search, effect))
    place = search.origin(position)
    for number in range(len(due) + search.world.slots + 2):
        before = State(search.world.save(), due, run, state.token, state.suspect, state.blame)
        last = perform(search.world, take, search.probe.purse)
        out = last.outputs.get(take.channel, ())[:1]
        wanted = due[number : number + 1]
        if last.refused and not wanted:
            break
        if last.refused or out != wanted:
            if search.overflow and last.refused and wanted:
                # What was stored is there, by the counters' difference; who takes does not see it.
                position, function = return_position(search, before, take), take.name
                place = search.origin(position)
            ending = (
                _output_ending(search, take, last, 0, wanted, place)
                if wanted
                else index_ending(search, last, place, "unchanged, the ring being empty")
            )
            report(search, before, last, doubt, what, position, function, ending)
            return
        if state.suspect is None:
            now_saved = search.world.save()
            state = replace(state, suspect=suspected(search, before, take, last, {}))
            search.world.load(now_saved)
        run = (*run, *made_of(search, last))


def report(
    search: Search,
    state: State,
    effect: Effect,
    doubt: Doubt,
    what: str,
    position: Position,
    function: str,
    ending: Ending,
) -> None:
    """Keep a disagreement if its witness, run from nothing, ends as it says."""
    if state.suspect is not None:
        doubt, position, function = "out of range", state.suspect.position, state.suspect.function
        what = f"{state.suspect.what}; then {what}"
        ending = replace(ending, where=ending.where if ending.kind == "undefined" else search.origin(position))
    elif search.odd is not None and doubt in ("order", "room", "data", "occupancy"):
        doubt, position, function = "slots", search.odd.position, search.odd.function
        what = f"{search.odd.what}; then {what}"
        ending = replace(ending, where=search.origin(position))
    elif state.blame is not None:
        position, function = state.blame.position, state.blame.function
        ending = replace(ending, where=search.origin(position))
    mark = (doubt, function)
    if mark in search.found or search.failed.get(mark, 0) >= TRIES:
        return
    run = (*state.run, *made_of(search, effect))
    base = search.base
    calls = (*base.calls, *(item.call for item in run))
    witness = _trimmed(replace(base, calls=calls, ending=ending))
    done = replay(search.world.group.program, witness, origin=search.origin)
    if not done.held:
        search.failed[mark] = search.failed.get(mark, 0) + 1
        return
    steps = _steps(search, run, ending)
    where = search.origin(position)
    search.found[mark] = Disagreement(doubt, where, function, what, witness, steps)


def _result_text(effect: Effect) -> str:
    value = effect.outcome.value
    return str(value) if isinstance(value, int) else ""


def _trimmed(witness: Witness) -> Witness:
    """The witness without objects that no call or start value mentions, and without elements that are not given."""
    named = {item.to for call_ in witness.calls for item in call_.arguments if isinstance(item, Reference)}
    named |= {item.value.to for item in witness.start if isinstance(item.value, Reference)}
    named |= {item.object for item in witness.start if item.object not in (GIVEN, TAKEN)}
    most = 16 * 8  # a call may use some elements from there on
    used = [item for call_ in witness.calls for item in call_.arguments if isinstance(item, Reference)]
    end = max((item.at for item in used if item.to == GIVEN), default=-1) + 1 + most
    start = tuple(
        item
        for item in witness.start
        if item.object != GIVEN or (GIVEN in named and int(item.path[1:].partition("]")[0]) < end)
    )
    return replace(witness, made=tuple(item for item in witness.made if item.name in named), start=start)


def _steps(search: Search, run: Sequence[Made], ending: Ending) -> tuple[OrbitStep, ...]:
    """The calls with the indices' values after each; the middle of a long run left out."""
    shown: list[OrbitStep] = []
    skipped = len(run) - SHOWN
    for number, item in enumerate(run):
        if skipped > 1 and 3 <= number < 3 + skipped:
            continue
        text = _call_text(search, item)
        if skipped > 1 and number == 3 + skipped:
            text += f" (after {skipped} more calls)"
        function = search.world.group.functions[item.call.function]
        where = search.origin(function.position) if number < len(run) - 1 else ending.where
        names = (place[0] for place in search.world.places)
        values = tuple((name, str(value)) for name, value in zip(names, item.values, strict=True))
        shown.append(OrbitStep(where, text, values))
    return tuple(shown)


def _call_text(search: Search, item: Made) -> str:
    parts = [_value_text(search, value) for value in item.call.arguments]
    told = dict.fromkeys((value.name, value.value) for value in item.call.outside)
    given = ", ".join(f"{name} gives {value}" for name, value in list(told)[:3])
    text = f"{item.name}({', '.join(parts)})"
    if item.result:
        text += f" returns {item.result}"
    return text + (f"; {given}" if given else "")


def _value_text(search: Search, value: Value) -> str:
    if value is None:
        return "NULL"
    if isinstance(value, Reference):
        name = value.to.rsplit(":", 1)[-1]
        if value.to == GIVEN:
            return f"element {search.world.tokens[value.at // search.world.parts]}"
        return f"&{name}{value.path}"
    return str(value)
