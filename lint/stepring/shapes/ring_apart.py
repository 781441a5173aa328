"""Variables of one name in several programs, told apart by the files that define them.

The one idea: a folder often holds more than one firmware, each with its own ``queue_head``. C allows one definition of
an external name in a program (6.9p5), so two definitions in different files are two variables. Each file's functions
mean their own.
"""

from collections import defaultdict
from collections.abc import Mapping, Sequence
from dataclasses import fields, is_dataclass, replace
from typing import Any

from stepring.meaning.types import Function, Object, Variable


def told_apart(
    functions: Sequence[Function], objects: Sequence[Object]
) -> tuple[Sequence[Function], Sequence[Object]]:
    """The same functions and objects, external variables with several definitions renamed in the files of these."""
    several = defined_often(objects)
    if not several:
        return functions, objects
    renamed = []
    for function in functions:
        file = function.position.file
        mine = {name: f"{file}:{name}" for name, where in several.items() if file in where}
        used = any(variable.identity in mine for variable in function.variables)
        renamed.append(_renamed(function, mine) if used else function)
    moved = [
        replace(
            item,
            variable=replace(item.variable, identity=f"{item.position.file}:{item.variable.identity}"),
        )
        if item.variable.identity in several
        else item
        for item in objects
    ]
    return renamed, moved


def defined_often(objects: Sequence[Object]) -> dict[str, frozenset[str]]:
    """The external variables with several definitions, and the files of these."""
    files: dict[str, set[str]] = defaultdict(set)
    for item in objects:
        if item.variable.storage == "global":
            files[item.variable.identity].add(item.position.file)
    return {identity: frozenset(where) for identity, where in files.items() if len(where) > 1}


def _renamed(node: Any, names: Mapping[str, str]) -> Any:
    """A piece of IR with the identities of some variables replaced."""
    if isinstance(node, Variable):
        return replace(node, identity=names[node.identity]) if node.identity in names else node
    if isinstance(node, tuple):
        items = [_renamed(item, names) for item in node]
        return node if all(new is old for new, old in zip(items, node, strict=True)) else tuple(items)
    if not is_dataclass(node) or isinstance(node, type):
        return node
    changed = {}
    for field in fields(node):
        old = getattr(node, field.name)
        new = _renamed(old, names)
        if new is not old:
            changed[field.name] = new
    return replace(node, **changed) if changed else node
