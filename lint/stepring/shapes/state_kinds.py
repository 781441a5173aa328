"""Which variables are states: what sorts machines from flags, error codes, modes, counters and cursors.

The criteria are those that separated machines from other dispatches on a hand-labelled sample of public firmware. A
``switch`` on a stored value is a machine if the value survives until the next evaluation, constants of the labels' own
group are stored in it, and it is no character, cursor or value mapped in place. A chain of comparisons says less than a
``switch`` does, so more is asked of it: a step that depends on the state, constants of one group or a name that says
state, and no name that says something else.
"""

import re
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field

from stepring.places import Origin
from stepring.shapes.facts import (
    CallFact,
    Constant,
    DispatchFact,
    Family,
    KeyFact,
    StoreFact,
    TestFact,
    TransitionFact,
)
from stepring.shapes.names import STATE_NAME

MOST_STATES = 512
# How errors, results and kinds of things are named, mapped in place and replied to (the same survey).
_OTHER_NAME = re.compile(
    r"err|status_?code|result|\Are?t?[cv]?(?:al)?\Z|type|code|flags?\Z|cmd|command|kind|class|encoding|version|len|count|"
    r"index|idx|port|addr",
    re.IGNORECASE,
)
# Names that are given to states and to settings alike.
_STAGE_NAME = re.compile(r"(?:status|mode|step|activity|progress)[^.]*\Z", re.IGNORECASE)
# How results are named: constants of a group that says how something went.
_RESULT_NAME = re.compile(r"(?:^|_)(?:ok|err|error|fail|failed|failure|success)(?:_|$)", re.IGNORECASE)


@dataclass(slots=True)
class Gathered:
    """All facts about one key."""

    key: KeyFact
    dispatches: list[DispatchFact] = field(default_factory=list)
    tests: list[TestFact] = field(default_factory=list)
    stores: list[StoreFact] = field(default_factory=list)
    transitions: list[TransitionFact] = field(default_factory=list)
    exposed: list[Origin] = field(default_factory=list)
    bounded: bool = False
    initials: list[Constant] = field(default_factory=list)
    starts_zero: bool = False
    setters: list[tuple[StoreFact, CallFact, Constant]] = field(default_factory=list)
    # Calls of setters with a value that is not known.
    unknown: list[CallFact] = field(default_factory=list)
    # The family of each constant's name in the units that speak of the key; other units can have the same names.
    named: dict[str, Family] = field(default_factory=dict)


def is_machine(group: Gathered) -> bool:
    """Whether a key is a state."""
    return is_switched(group) or is_chained(group) or is_tabled(group)


def is_switched(group: Gathered) -> bool:
    """Whether a key that a ``switch`` is on is a state."""
    named = group.named
    dispatches = [one for one in group.dispatches if not one.line_numbers and one.form == "switch"]
    if not dispatches or group.key.scope == "parameter":
        return False
    if all(dispatch.characters for dispatch in dispatches):
        return False
    if group.key.scope == "local" and not any(dispatch.carried for dispatch in dispatches):
        return False
    labels = {
        value
        for dispatch in dispatches
        for label in dispatch.labels
        for value in range(label.constant.value, min(label.high, label.constant.value + MOST_STATES) + 1)
    }
    label_families = {
        named[label.constant.name].identity
        for dispatch in dispatches
        for label in dispatch.labels
        if label.constant.name is not None and label.constant.name in named
    }
    if _says_error(group):
        return False
    unnamed = all(label.constant.name is None for dispatch in dispatches for label in dispatch.labels)
    if unnamed and all(dispatch.working for dispatch in dispatches):
        return False  # a level that is turned up or down: a gain, a speed
    targets: set[int] = set()
    hits: set[int] = set()
    for constant in stored_constants(group):
        targets.add(constant.value)
        family = named.get(constant.name or "")
        if constant.value in labels or (family is not None and family.identity in label_families):
            hits.add(constant.value)
    targets.update(move.target.value for move in group.transitions)
    hits.update(targets & labels)
    if not hits or len(targets | labels) < 2 or all(dispatch.packet for dispatch in dispatches):
        return False
    return _moves_on(group, dispatches)


def _moves_on(group: Gathered, dispatches: Sequence[DispatchFact]) -> bool:
    """Whether code that knows the present state stores another one that is dispatched on or tested afterwards.

    A message's type or a configuration is stored from nowhere in particular; a value put into another coding in place
    goes to values that nothing looks at again.
    """
    labelled: dict[int, set[int]] = {}
    for number, dispatch in enumerate(dispatches):
        for label in dispatch.labels:
            for value in range(label.constant.value, min(label.high, label.constant.value + MOST_STATES) + 1):
                labelled.setdefault(value, set()).add(number)
    tested = {test.constant.value for test in group.tests}
    for move in group.transitions:
        # Told by a test alone, the source counts where the name says that this is a state; a mode is tested as well.
        told = move.dispatched or (move.source is not None and STATE_NAME.search(group.key.shown))
        if not told or move.source == move.target.value or move.source not in labelled:
            continue
        if move.target.value in tested:
            return True
        from_here = labelled[move.source]
        for number in labelled.get(move.target.value, ()):
            if number in from_here or dispatches[number].function != move.function:
                return True
    return False


def stored_constants(group: Gathered) -> Iterable[Constant]:
    for store in group.stores:
        yield from store.constants
    for _, _, constant in group.setters:
        yield constant


# ------------------------------------------------------------------------------------------------------ chains


@dataclass(frozen=True, slots=True)
class Evidence:
    """What is known of a key that comparisons alone speak of."""

    tested: frozenset[int]
    stored: frozenset[int]
    steps: frozenset[tuple[int, int]]
    grouped: bool
    named: int
    says_state: bool
    says_other: bool
    results: int
    carried: bool


def evidence(group: Gathered) -> Evidence:
    """Gather what speaks for and against a state."""
    chains = [one for one in group.dispatches if not one.line_numbers]
    tested = {label.constant.value for one in chains for label in one.labels}
    constants = [*stored_constants(group), *(label.constant for one in chains for label in one.labels)]
    stored = {constant.value for constant in stored_constants(group)} | {
        move.target.value for move in group.transitions
    }
    steps = {
        (move.source, move.target.value)
        for move in group.transitions
        if move.source is not None and move.source != move.target.value
    }
    families: dict[str, set[int]] = {}
    for constant in constants:
        family = group.named.get(constant.name or "")
        if family is not None:
            families.setdefault(family.identity, set()).add(constant.value)
    values = tested | stored
    named = max((len(one) for one in families.values()), default=0)
    words = [constant.name for constant in constants if constant.name is not None]
    saying = sum(bool(STATE_NAME.search(word)) for word in words)
    name = group.key.shown.rsplit(".", 1)[-1]
    of_type = bool(STATE_NAME.search((group.key.enum or "").split("@", 1)[0]))
    return Evidence(
        frozenset(tested),
        frozenset(stored),
        frozenset(steps),
        named == len(values),
        named,
        bool(STATE_NAME.search(name)) or (len(values) > 2 and (of_type or 3 * saying > 2 * len(constants))),
        bool(_OTHER_NAME.search(name)),
        len({word for word in words if _RESULT_NAME.search(word)}),
        any(one.carried for one in chains),
    )


def is_chained(group: Gathered) -> bool:
    """Whether a key that is only compared with constants is a state."""
    chains = [one for one in group.dispatches if not one.line_numbers and one.form in ("switch", "if-chain")]
    if not chains or group.key.scope == "parameter":
        return False
    if all(one.characters for one in chains) or all(one.packet for one in chains):
        return False
    if group.key.scope == "local" and not any(one.carried for one in chains):
        return False
    if group.key.low == 0 and group.key.high <= 1:
        return False
    found = evidence(group)
    values = found.tested | found.stored
    sources = {source for source, _ in found.steps}
    if not found.steps or len(values) < 2:
        return False
    if found.says_state:
        grouped = found.named >= 2 and 3 * found.named >= 2 * len(values)
        return grouped or (len(values) >= 3 and len(sources) >= 2 and len(values) <= MOST_STATES)
    if found.says_other or found.results > 1 or found.named < max(3, len(values)):
        return False
    targets = {target for _, target in found.steps}
    if len(targets) < 2 or len(sources) < (2 if _STAGE_NAME.search(group.key.shown) else 3):
        return False
    return sum(target in found.tested for _, target in found.steps) >= 2


def is_tabled(group: Gathered) -> bool:
    """Whether a key that is given its next value by tables or handlers is a state."""
    looking = [one for one in group.dispatches if one.form not in ("switch", "if-chain")]
    if not looking or group.key.scope == "parameter":
        return False
    if group.key.scope == "local" and not any(one.carried for one in looking):
        return False
    found = evidence(group)
    if len({source for source, _ in found.steps}) < 2 or len({target for _, target in found.steps}) < 2:
        return False
    # One number put for another is a translation; with names, an event or a name that says state it is a step.
    return found.says_state or found.named > 1 or any(move.event for move in group.transitions)


def _says_error(group: Gathered) -> bool:
    """Whether a variable and its constants are named for errors: one is mapped to another, but none is a state."""
    words = {label.constant.name or "" for one in group.dispatches for label in one.labels}
    saying = sum("err" in word.lower() for word in words)
    return "err" in group.key.shown.rsplit(".", 1)[-1].lower() and 2 * saying > len(words)


def dispatches_of(group: Gathered) -> list[DispatchFact]:
    """The dispatches that count: every ``switch``; the tests in a function that steps by them or tells states apart."""
    told = {(move.function, move.source) for move in group.transitions if move.source is not None}
    stepping = {function for function, _ in told}
    return [
        one
        for one in group.dispatches
        if not one.line_numbers and (one.form != "if-chain" or len(one.labels) > 1 or one.function in stepping)
    ]
