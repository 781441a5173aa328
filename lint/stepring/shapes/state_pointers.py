"""States behind a pointer parameter: ``switch (*state)`` is a dispatch on the variables whose addresses callers pass.

A function that only ever looks through its pointer, and whose every caller in the unit passes the address of a variable
with static storage, runs the machine of those variables. They all obey the same code, so they are one machine: in the
unit that is looked at for states, ``*state`` and the variables become one place. What is done with a pointer otherwise
(kept, moved on, read from memory) leaves everything as it is; it can be compared with no pointer at all.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, fields, is_dataclass, replace
from typing import Any

import networkx

from stepring.meaning.types import (
    AddressOf,
    Assign,
    Binary,
    Branch,
    Call,
    Const,
    DerefPlace,
    Function,
    FunctionName,
    IntType,
    Load,
    PointerType,
    TypedUnit,
    Unary,
    Variable,
    VariablePlace,
)
from stepring.places import Position
from stepring.shapes.keys import uncast

_SHOWN = 3  # variables named as one, at most


@dataclass(frozen=True, slots=True)
class _Use:
    """What a function hands on to a parameter (its identity): its own parameter, or a variable whose address it is."""

    function: str
    parameter: str
    variable: Variable


def with_pointers_followed(unit: TypedUnit) -> tuple[TypedUnit, frozenset[tuple[str, str]]]:
    """The unit with what pointer parameters lead to in place of the pointers, where that is known.

    The second are pairs of a function and a variable that stands for several: the function hands over their addresses,
    so that what it calls first for one says nothing of the state that it calls for next.
    """
    own = [function for function in unit.functions if function.own]
    parameters = {
        parameter.identity: parameter
        for function in own
        for parameter in function.parameters
        if isinstance(parameter.type, PointerType) and isinstance(parameter.type.to, IntType)
    }
    if not parameters:
        return unit, frozenset()
    good = _only_looked_through(own, parameters)
    uses, bad = _passed(own, good)
    graph: networkx.Graph[str] = networkx.Graph()
    variables = {use.variable.identity: use.variable for use in uses}
    graph.add_edges_from((use.parameter, use.variable.identity) for use in uses)
    standing: dict[str, Variable] = {}
    for members in networkx.connected_components(graph):
        passed = [variables[name] for name in members if name in variables and name not in parameters]
        if not passed or members & bad or members & parameters.keys() - good or len(_widths(passed)) > 1:
            continue
        stands = _one(passed)
        standing.update(dict.fromkeys(members, stands))
    if not standing:
        return unit, frozenset()
    functions = tuple(_rewritten(function, standing) if function.own else function for function in unit.functions)
    objects = tuple(
        replace(item, variable=standing[item.variable.identity]) if item.variable.identity in standing else item
        for item in unit.objects
    )
    several = {name for name, stands in standing.items() if variables.get(name, stands).name != stands.name}
    apart = {
        (use.function, standing[use.variable.identity].identity) for use in uses if use.variable.identity in several
    }
    return replace(unit, functions=functions, objects=objects), frozenset(apart)


def _widths(objects: Sequence[Variable]) -> set[int]:
    return {variable.type.width for variable in objects if isinstance(variable.type, IntType)}


def _one(objects: Sequence[Variable]) -> Variable:
    """A variable that stands for several: the first with all their names."""
    ordered = sorted(objects, key=lambda one: (one.position or Position("", 0), one.identity))
    names = [one.name for one in ordered]
    if len(names) == 1:
        return ordered[0]
    shown = names if len(names) <= _SHOWN else [*names[: _SHOWN - 1], f"{len(names) - _SHOWN + 1} more"]
    return replace(ordered[0], name=f"{', '.join(shown[:-1])} and {shown[-1]}")


def _only_looked_through(own: Sequence[Function], parameters: Mapping[str, Variable]) -> set[str]:
    """The pointer parameters that are never stored, moved, kept or stored into as pointers, and are looked through."""
    named = {function.name for function in own}
    bad: set[str] = set()
    looked: set[str] = set()
    for function in own:
        if not any(parameter.identity in parameters for parameter in function.parameters):
            continue
        for block in function.blocks:
            for statement in block.statements:
                parts: list[Any] = [statement]
                if isinstance(statement, Assign) and isinstance(statement.place, VariablePlace):
                    bad.add(statement.place.variable.identity)
                elif isinstance(statement, Call) and isinstance(statement.callee, FunctionName):
                    handed = statement.arguments if statement.callee.name in named else ()
                    parts = [argument for argument in statement.arguments if argument not in handed]
                    parts += [argument for argument in handed if _parameter(argument) is None]
                    looked.update(name for name in map(_parameter, handed) if name is not None)
                for part in parts:
                    _look(part, bad, looked)
            _look(block.terminator, bad, looked)
    return (looked & parameters.keys()) - bad


def _look(node: Any, bad: set[str], looked: set[str]) -> None:
    if isinstance(node, DerefPlace):
        inner = uncast(node.pointer)
        if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
            looked.add(inner.place.variable.identity)
            return
    if isinstance(node, Binary) and node.op in ("==", "!="):
        sides = (uncast(node.left), uncast(node.right))
        if any(isinstance(side, Const) for side in sides) and any(_parameter(side) is not None for side in sides):
            return  # whether there is an object at all
    if isinstance(node, Unary) and node.op == "!" and _parameter(node.operand) is not None:
        return
    if isinstance(node, Branch) and _parameter(node.condition) is not None:
        return
    if isinstance(node, VariablePlace):
        if isinstance(node.variable.type, PointerType):
            bad.add(node.variable.identity)
        return
    for part in _parts(node):
        _look(part, bad, looked)


def _parts(node: Any) -> Iterator[Any]:
    if isinstance(node, tuple):
        yield from node
    elif is_dataclass(node) and not isinstance(node, Position | Variable):
        yield from (getattr(node, field.name) for field in fields(node) if field.name not in ("type", "syntax"))


def _parameter(argument: Any) -> str | None:
    """The variable that an argument is the value of, if it is a pointer."""
    inner = uncast(argument)
    if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
        if isinstance(inner.place.variable.type, PointerType):
            return inner.place.variable.identity
    return None


def _passed(own: Sequence[Function], good: set[str]) -> tuple[list[_Use], set[str]]:
    """What callers pass for each parameter, and the parameters that get something else as well."""
    by_name = {function.name: function for function in own}
    uses: list[_Use] = []
    bad: set[str] = set()
    for function in own:
        for block in function.blocks:
            for call in block.statements:
                if not isinstance(call, Call) or not isinstance(call.callee, FunctionName):
                    continue
                callee = by_name.get(call.callee.name)
                for parameter, argument in zip(callee.parameters, call.arguments, strict=False) if callee else ():
                    inner = uncast(argument)
                    place = inner.place if isinstance(inner, AddressOf | Load) else None
                    variable = place.variable if isinstance(place, VariablePlace) else None
                    if parameter.identity not in good:
                        if variable is not None and variable.identity in good:
                            bad.add(variable.identity)
                    elif variable is None:
                        bad.add(parameter.identity)
                    elif variable.identity in good if isinstance(inner, Load) else _is_lasting(variable):
                        uses.append(_Use(function.identity, parameter.identity, variable))
                    else:
                        bad.add(parameter.identity)
    return uses, bad


def _is_lasting(variable: Variable) -> bool:
    return variable.lasting and isinstance(variable.type, IntType)


def _rewritten(function: Function, standing: Mapping[str, Variable]) -> Function:
    if not any(variable.identity in standing for variable in (*function.variables, *function.parameters)):
        return function
    blocks = tuple(_mapped(block, standing) for block in function.blocks)
    return replace(function, blocks=blocks)


def _mapped(node: Any, standing: Mapping[str, Variable]) -> Any:
    """A part of a function with the places replaced, and the addresses that were handed on no longer taken."""
    if isinstance(node, Variable | Position):
        return node
    if isinstance(node, DerefPlace):
        inner = uncast(node.pointer)
        if isinstance(inner, Load) and isinstance(inner.place, VariablePlace):
            stands = standing.get(inner.place.variable.identity)
            if stands is not None:
                return VariablePlace(stands)
    if isinstance(node, VariablePlace):
        stands = standing.get(node.variable.identity)
        return VariablePlace(stands) if stands is not None and not isinstance(node.variable.type, PointerType) else node
    if isinstance(node, Call):
        kept = tuple(_argument(argument, standing) for argument in node.arguments)
        node = replace(node, arguments=kept)
    if isinstance(node, tuple):
        mapped = tuple(_mapped(part, standing) for part in node)
        return node if all(a is b for a, b in zip(node, mapped, strict=True)) else mapped
    if not is_dataclass(node):
        return node
    changed = {
        field.name: new
        for field in fields(node)
        if field.name not in ("type", "syntax", "position")
        for old in [getattr(node, field.name)]
        for new in [_mapped(old, standing)]
        if new is not old
    }
    return replace(node, **changed) if changed else node  # type: ignore[type-var]


def _argument(argument: Any, standing: Mapping[str, Variable]) -> Any:
    inner = uncast(argument)
    if isinstance(inner, AddressOf) and isinstance(inner.place, VariablePlace):
        if inner.place.variable.identity in standing:
            return Const(0, inner.type)
    return argument
