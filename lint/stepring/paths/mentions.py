"""Which functions and lasting objects a function's body mentions, for those who put a program together from units."""

from collections.abc import Mapping
from dataclasses import fields, is_dataclass
from typing import Any

from stepring.meaning.types import CType, Function, FunctionName


def functions_mentioned(function: Function) -> dict[str, CType]:
    """The functions that a body names, called or not, with their types as declared there."""
    return named_in(function.blocks)


def named_in(root: Any) -> dict[str, CType]:
    """The functions that a piece of IR names, with their types."""
    found: dict[str, CType] = {}
    stack: list[Any] = [root]
    while stack:
        node = stack.pop()
        if isinstance(node, FunctionName):
            found.setdefault(node.name, node.type)
        elif isinstance(node, tuple):
            stack.extend(reversed(node))
        elif is_dataclass(node) and not isinstance(node, type):
            stack.extend(getattr(node, name) for name in reversed(_members(node)))
    return found


def objects_mentioned(function: Function) -> Mapping[str, str]:
    """The objects with static storage that a body names: their identities with their names."""
    return {variable.identity: variable.name for variable in function.variables if variable.lasting}


_MEMBERS: dict[type, tuple[str, ...]] = {}


def _members(node: Any) -> tuple[str, ...]:
    """The members that can lead to an expression; types and variables do not."""
    kind = type(node)
    known = _MEMBERS.get(kind)
    if known is None:
        known = tuple(item.name for item in fields(kind) if item.name not in ("type", "variable", "position", "syntax"))
        _MEMBERS[kind] = known
    return known
