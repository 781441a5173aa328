"""Every place that a piece of IR mentions, so that a summary can carry the way back to the source for just those."""

from collections.abc import Iterable, Iterator
from dataclasses import fields, is_dataclass
from typing import Any

from stepring.meaning.types import Function, Object, Variable
from stepring.places import Position


def positions_of(functions: Iterable[Function], objects: Iterable[Object]) -> frozenset[Position]:
    """The positions in functions and objects, each once."""
    found: set[Position] = set()
    for item in (*functions, *objects):
        found.update(_positions(item))
    return frozenset(position for position in found if position.line)


def _positions(root: Any) -> Iterator[Position]:
    stack = [root]
    variables: set[str] = set()
    while stack:
        node = stack.pop()
        if isinstance(node, Position):
            yield node
        elif isinstance(node, Variable):
            if node.identity not in variables and node.position is not None:
                variables.add(node.identity)
                yield node.position
        elif isinstance(node, tuple):
            stack.extend(node)
        elif is_dataclass(node):
            stack.extend(getattr(node, name) for name in _fields(node))


_FIELDS: dict[str, tuple[str, ...]] = {}


def _fields(node: Any) -> tuple[str, ...]:
    """The members that can lead to a position, worked out once for each kind of node; types do not."""
    kind = node.__class__.__qualname__
    known = _FIELDS.get(kind)
    if known is None:
        known = tuple(item.name for item in fields(node) if item.name not in ("type", "value_type", "attributes"))
        _FIELDS[kind] = known
    return known
