"""Variables that stand for a state: copies that are read, working copies that are written back, parameters.

Code often takes a state out of its structure, dispatches on the copy and stores the copy again at the end, or hands the
state to a function and stores what that returns. What is dispatched on is then the state all the same.
"""

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

from stepring.meaning.types import (
    Assign,
    Call,
    Function,
    FunctionName,
    Load,
    Return,
    Switch,
    VariablePlace,
)
from stepring.shapes.keys import PlaceKey, is_integral, place_key, uncast


@dataclass(frozen=True, slots=True)
class Alias:
    """A function's variable (its identity) that stands for a state; ``anywhere``: whatever object's state it is."""

    variable: str
    key: PlaceKey
    anywhere: bool


def getters(functions: Iterable[Function]) -> dict[str, PlaceKey]:
    """Functions that only return a lasting place's value."""
    found: dict[str, PlaceKey] = {}
    for function in functions:
        if len(function.blocks) != 1 or function.blocks[0].statements:
            continue
        end = function.blocks[0].terminator
        if isinstance(end, Return) and end.value is not None:
            inner = uncast(end.value)
            if isinstance(inner, Load):
                key = place_key(inner.place, function.identity)
                if key is not None and key.scope == "lasting" and is_integral(inner.place):
                    found[function.name] = key
    return found


def copies(function: Function, known: Mapping[str, PlaceKey]) -> dict[str, PlaceKey]:
    """Variables that only ever hold a copy of one lasting place; ``known`` are the getters."""
    found: dict[str, PlaceKey | None] = {}
    for name, key in _definitions(function, known):
        if key is not None and key.scope != "lasting":
            key = found.get(key.instance)
        if name in found and found[name] != key:
            key = None
        found[name] = key
    return {name: key for name, key in found.items() if key is not None}


def _definitions(function: Function, known: Mapping[str, PlaceKey]) -> Iterator[tuple[str, PlaceKey | None]]:
    """Each store into a variable of the function: the variable, and the place whose value it is given (if one)."""
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Assign) and isinstance(statement.place, VariablePlace):
                if not statement.place.variable.lasting:
                    inner = uncast(statement.value)
                    key = place_key(inner.place, function.identity) if isinstance(inner, Load) else None
                    yield statement.place.variable.identity, key
            elif isinstance(statement, Call) and isinstance(statement.result, VariablePlace):
                name = statement.callee.name if isinstance(statement.callee, FunctionName) else ""
                yield statement.result.variable.identity, known.get(name)


def working_copies(function: Function) -> tuple[Alias, ...]:
    """Local variables that are loaded with one lasting integer, dispatched on, and stored into it again."""
    dispatched = _dispatched(function)
    if not dispatched:
        return ()
    sources: dict[str, set[PlaceKey]] = {}
    for name, key in _definitions(function, {}):
        if key is not None and key.scope == "lasting":
            sources.setdefault(name, set()).add(key)
    backs = set(_written_back(function))
    return tuple(
        Alias(name, key, False)
        for name, keys in sorted(sources.items())
        if name in dispatched and len(keys) == 1
        for key in keys
        if (name, key.key, key.instance) in backs and key.key not in dispatched
    )


def _dispatched(function: Function) -> set[str]:
    """The variables that the function dispatches on by their identity, and the keys of other such places."""
    found: set[str] = set()
    for block in function.blocks:
        if isinstance(block.terminator, Switch):
            inner = uncast(block.terminator.value)
            if isinstance(inner, Load) and is_integral(inner.place):
                key = place_key(inner.place, function.identity)
                if isinstance(inner.place, VariablePlace):
                    found.add(inner.place.variable.identity)
                if key is not None:
                    found.add(key.key)
    return found


def _written_back(function: Function) -> Iterator[tuple[str, str, str]]:
    """Variables whose value is stored in a lasting integer: the variable, the place's key and instance."""
    for block in function.blocks:
        for statement in block.statements:
            if isinstance(statement, Assign) and is_integral(statement.place):
                inner = uncast(statement.value)
                if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
                    key = place_key(statement.place, function.identity)
                    if key is not None and key.scope == "lasting":
                        yield inner.place.variable.identity, key.key, key.instance


def working_parameters(functions: Iterable[Function]) -> dict[str, tuple[Alias, ...]]:
    """Parameters that are dispatched on and get a state, where the state is given the call's result or is stored into
    by the function itself; by the identity of the function."""
    functions = tuple(functions)
    by_name = {function.name: function for function in functions}
    asked = {function.identity: _dispatched(function) for function in functions}
    found: dict[str, dict[Alias, None]] = {}
    for function in functions:
        backs: set[tuple[str, str, str]] | None = None
        copied: dict[str, PlaceKey] | None = None
        for block in function.blocks:
            for call in block.statements:
                if not isinstance(call, Call) or not isinstance(call.callee, FunctionName):
                    continue
                callee = by_name.get(call.callee.name)
                if callee is None or not asked[callee.identity]:
                    continue
                for parameter, argument in zip(callee.parameters, call.arguments, strict=False):
                    inner = uncast(argument)
                    if parameter.identity not in asked[callee.identity] or not isinstance(inner, Load):
                        continue
                    copied = copies(function, {}) if copied is None else copied
                    backs = set(_written_back(function)) if backs is None else backs
                    key = _state_handed(function, inner, copied)
                    if key is not None and (_takes_result(function, call, key, backs) or _stores(callee, key)):
                        found.setdefault(callee.identity, {})[Alias(parameter.identity, key, True)] = None
    return {identity: tuple(aliases) for identity, aliases in found.items()}


def _state_handed(function: Function, value: Load, copied: Mapping[str, PlaceKey]) -> PlaceKey | None:
    if not is_integral(value.place):
        return None
    if isinstance(value.place, VariablePlace) and value.place.variable.identity in copied:
        return copied[value.place.variable.identity]
    key = place_key(value.place, function.identity)
    return key if key is not None and key.scope == "lasting" else None


def _takes_result(function: Function, call: Call, key: PlaceKey, backs: set[tuple[str, str, str]]) -> bool:
    if call.result is None:
        return False
    found = place_key(call.result, function.identity)
    if found is not None and (found.key, found.instance) == (key.key, key.instance):
        return True
    return isinstance(call.result, VariablePlace) and (call.result.variable.identity, key.key, key.instance) in backs


def _stores(function: Function, key: PlaceKey) -> bool:
    return any(
        isinstance(statement, Assign)
        and (found := place_key(statement.place, function.identity)) is not None
        and found.key == key.key
        for block in function.blocks
        for statement in block.statements
    )
