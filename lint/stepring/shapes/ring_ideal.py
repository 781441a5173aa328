"""What an ideal queue allows: plain comparisons of what a ring holds with what it should hold.

A ring's content is what taking out one element after another gives. The queue refuses what it has no room for, or drops
the oldest elements, and it does one of the two always.
"""

from collections.abc import Sequence
from typing import Literal, TypeAlias

Design: TypeAlias = Literal["refuses", "overwrites", "unchecked"]
"""What a put does on a full ring: says no (or waits, or asserts); drops the oldest; does not look."""
Content: TypeAlias = tuple[int, ...]


def is_suffix(part: Sequence[int], whole: Sequence[int]) -> bool:
    """Whether one row is the end of another."""
    return len(part) <= len(whole) and list(part) == list(whole[len(whole) - len(part) :])


def is_slice(part: Sequence[int], whole: Sequence[int]) -> bool:
    """Whether one row stands in another without gap."""
    size = len(part)
    return any(list(part) == list(whole[at : at + size]) for at in range(len(whole) - size + 1))


def design_of(held: Sequence[Content], put: Content, room: int) -> Design:
    """What the puts after the ``room``-th do, if none was refused: ``held[i]`` is the content after ``i`` puts."""
    for number in range(room + 1, len(held)):
        if len(held[number]) < max(1, room - 1) or not is_suffix(held[number], put[:number]):
            return "unchecked"
    return "overwrites"


def room_of(held: Sequence[Content], put: Content) -> int:
    """How many puts in a row are all kept in their order."""
    room = 0
    while room + 1 < len(held) and held[room + 1] == put[: room + 1]:
        room += 1
    return room


def after_put(now: Content, before: Content, added: Content, design: Design, room: int) -> bool:
    """Whether the content after a put of some elements is one that a queue may have."""
    for count in range(len(added) + 1):
        whole = before + added[:count]
        if now == whole:
            return True
        if design == "overwrites" and len(now) >= max(1, room - 1) and is_suffix(now, whole):
            return True
    return False


def linear(found: int, true: int, first: int | None, slots: int) -> bool:
    """Whether a number tells only the part up to the storage's end: ``first`` is the slot where the part starts."""
    return first is not None and 0 <= found <= true and found in (slots - first, slots - first - 1)
