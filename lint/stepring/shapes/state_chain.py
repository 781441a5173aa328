"""What equality tests of a state variable say where no ``switch`` does: an ``if`` chain is a dispatch too.

All equality tests of one variable in one function are one dispatch: ``else if`` chains, repeated ``if``s and guards
that leave early differ in layout only. A final ``else`` is its default. (In a survey of public firmware about as many
machines were dispatched on this way as by ``switch``.)
"""

from stepring.meaning.types import Branch, Function, Jump
from stepring.places import Origin
from stepring.shapes.facts import DispatchFact, LabelFact
from stepring.shapes.names import constant_of
from stepring.shapes.state_default import Does, does, storing
from stepring.shapes.state_dispatch import is_packet
from stepring.shapes.state_scan import Scan, Seen, Work, blocks_from, is_carried


def chain_fact(work: Work, scan: Scan, seen: Seen) -> DispatchFact | None:
    """The dispatch that the equality tests of one key in one function are, or None where there is none."""
    if not seen.branches:
        return None
    function = scan.function
    labels: dict[int, LabelFact] = {}
    characters = False
    for block, number, _ in sorted(seen.branches, key=lambda one: one[0]):
        end = function.blocks[block].terminator
        assert isinstance(end, Branch)
        where = work.names.origin(end.position)
        constant = constant_of(work.names, number, where)
        characters = characters or constant.where.spelling.startswith(("'", "L'"))
        if number.value not in labels:
            labels[number.value] = LabelFact(constant, number.value, number.value, where, None, False, False)
    default, default_does = _final_else(work, scan, seen)
    first = min(labels.values(), key=lambda label: label.where)
    return DispatchFact(
        seen.key.key,
        seen.key.instance,
        function.identity,
        seen.key.shown,
        first.where,
        tuple(labels.values()),
        default,
        default_does,
        (),
        characters,
        False,
        seen.key.scope == "local" and any(is_carried(scan, seen, block) for block, _, _ in seen.branches),
        is_packet(function, seen.key),
        False,
        max(label.where.line for label in labels.values()),
        "if-chain",
    )


def _final_else(work: Work, scan: Scan, seen: Seen) -> tuple[Origin | None, Does]:
    """What stands in the last ``else`` of the longest chain of tests, if there is one."""
    function = scan.function
    tests = {block: equal for block, _, equal in seen.branches}
    following: dict[int, int] = {}
    for block, equal in tests.items():
        end = function.blocks[block].terminator
        assert isinstance(end, Branch)
        other = _after_jumps(function, end.otherwise if equal else end.then)
        if other in tests and other != block:
            following[block] = other
    chains: list[list[int]] = []
    for start in tests:
        if start in following.values():
            continue
        chain = [start]
        while chain[-1] in following and following[chain[-1]] not in chain:
            chain.append(following[chain[-1]])
        chains.append(chain)
    longest = max(chains, key=len, default=[])
    if len(longest) < 2:
        return None, "none"
    end = function.blocks[longest[-1]].terminator
    assert isinstance(end, Branch)
    last = end.otherwise if tests[longest[-1]] else end.then
    others: set[int] = set()
    for block in longest:
        end = function.blocks[block].terminator
        assert isinstance(end, Branch)
        others |= blocks_from(function, end.then if tests[block] else end.otherwise, longest[0])
    region = blocks_from(function, last, longest[0]) - others
    places = [statement.position for number in region for statement in function.blocks[number].statements]
    if not places:
        return None, "none"
    return work.names.origin(min(places)), does(storing(work, scan, seen), region)


def _after_jumps(function: Function, block: int) -> int:
    """The first block from here on that does something."""
    passed: set[int] = set()
    while block not in passed:
        passed.add(block)
        item = function.blocks[block]
        if item.statements or not isinstance(item.terminator, Jump):
            break
        block = item.terminator.target
    return block
