"""A table that forgets what was not asked for longest, once it holds more than it may.

A run over many units must not keep every text and every tree; what headers share is asked for again and again and
stays, what belongs to one source file goes when others have taken its place.
"""

from collections import OrderedDict
from typing import Generic, TypeVar

K = TypeVar("K")
V = TypeVar("V")


class Kept(Generic[K, V]):
    """Values by key, each with a size; the least recently used go once the sizes exceed ``budget``."""

    def __init__(self, budget: int) -> None:
        self._budget = budget
        self._items: OrderedDict[K, tuple[V, int]] = OrderedDict()
        self._held = 0

    def __len__(self) -> int:
        return len(self._items)

    def get(self, key: K) -> V | None:
        """The value of a key, or None; asking keeps it longer."""
        found = self._items.get(key)
        if found is None:
            return None
        self._items.move_to_end(key)
        return found[0]

    def put(self, key: K, value: V, size: int) -> None:
        """Hold a value; the newest stays even if it alone is larger than the budget."""
        before = self._items.pop(key, None)
        self._held += size - (before[1] if before is not None else 0)
        self._items[key] = (value, size)
        while self._held > self._budget and len(self._items) > 1:
            _, (_, gone) = self._items.popitem(last=False)
            self._held -= gone
