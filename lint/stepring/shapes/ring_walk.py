"""Walks that only read: what hands all stored elements to the outside, oldest first, and changes nothing.

The one idea: a function that prints, sends or sums up the stored elements one by one is compared with what is stored,
if it gives all of them in most states; what it gives elsewhere must be their beginning at least. That it gives nothing,
or not the oldest first, is seen of any look; here the rest of what it gives counts, as where a walk wraps wrongly.
"""

from dataclasses import dataclass

from stepring.shapes.ring_calls import Effect, Purse
from stepring.shapes.ring_compare import call_from
from stepring.shapes.ring_ideal import Content
from stepring.shapes.ring_pair import LEAST, filled_to
from stepring.shapes.ring_report import Search, State, output_report, shown
from stepring.shapes.ring_uses import Use

BUDGET = 200_000
"""Interpreter steps for one function."""
MOST_SLOTS = 32
_NO_WALK = ("result", "slot", "buffer")


@dataclass(frozen=True, slots=True)
class _Row:
    """What one call of a walk gives from a state."""

    state: State
    effect: Effect

    def gives(self, channel: str) -> Content:
        return self.effect.outputs.get(channel, ())


def walks(search: Search) -> None:
    """Report functions that hand out all stored elements in most states and other ones in some."""
    put, take, world = search.put, search.take, search.world
    if put is None or take is None or world.slots > MOST_SLOTS or put.kind != "put" or take.first is not None:
        return
    known = {use.operation.function.identity for use in search.uses if use.kind not in ("look", "tell")}
    before = search.probe.purse
    for operation in world.operations:
        plain = all(item.role in ("ring", "bound") for item in operation.parameters)
        if operation.helper or not plain or operation.function.identity in known:
            continue
        search.probe.purse = Purse(BUDGET)
        _judge(search, Use(operation, "look"))
    search.probe.purse = before


def _judge(search: Search, use: Use) -> None:
    rows: list[_Row] = []
    slots, room = search.world.slots, search.room
    for lead in dict.fromkeys((0, 1, slots // 2, slots - 1)):
        for level in dict.fromkeys((1, 2, room // 2, room - 1, room)):
            search.probe.back()
            made = filled_to(search, lead, level, 0)
            if made is None:
                return
            held, run, token = made
            state = State(search.world.save(), held, run, token)
            effect = call_from(search, state, use)
            if not effect.returned or not effect.refused or search.spent:
                return
            rows.append(_Row(state, effect))
    channels = {name for row in rows for name in row.effect.outputs if name not in _NO_WALK}
    for channel in sorted(channels):
        whole = [row for row in rows if row.gives(channel) == row.state.held]
        if sum(len(row.state.held) > 1 for row in whole) < LEAST or 2 * len(whole) <= len(rows):
            continue
        for row in rows:
            given, held = row.gives(channel), row.state.held
            if not given or given != held[: len(given)]:
                what = f"{use.name} goes through {shown(given)} where {shown(held)} is stored"
                output_report(
                    search, row.state, Use(use.operation, "look", channel=channel), row.effect, "order", what, held
                )
                return
