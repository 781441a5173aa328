"""Witnesses as plain JSON, for a log that another machine reads.

Every member of ``Witness`` is a member of the JSON object under the same name. A pointer is an object with ``to``,
``at`` and ``path``, a null pointer is ``null``; an integer that not every JSON reader keeps exactly (RFC 7493
section 2.2: beyond 2^53 - 1) is written as text. Files stand relative to the project's root, also inside identities, so
that a log says nothing about the machine that it comes from. Reading is strict: what is missing, of another kind or not
known is refused with one sentence that says where.
"""

import re
from collections.abc import Callable, Mapping
from typing import Any, TypeVar, get_args

from stepring.paths.types import Fault
from stepring.paths.witness import Ending, Made, OutsideValue, Reference, StartValue, Value, Witness, WitnessCall
from stepring.places import Origin

_EXACT = (1 << 53) - 1
_NUMBER = re.compile(r"-?(0|[1-9][0-9]{0,39})")
_ENDINGS = ("undefined", "result", "value", "endless")
_MOST_ELEMENTS = 1 << 24

Item = TypeVar("Item")


class BadWitness(ValueError):
    """JSON that is no witness; the text is a clause that says where and why."""


# ------------------------------------------------------------------------------------------------------------ writing


def witness_to_json(witness: Witness, root: str = "") -> dict[str, Any]:
    """The witness as JSON data; ``root`` is the folder that files are written relative to."""
    return {
        "model": witness.model,
        "made": [
            {"name": made.name, "type": without_root(made.type, root), "elements": made.elements}
            for made in witness.made
        ],
        "start": [
            {
                "object": without_root(start.object, root),
                "path": start.path,
                "value": _value_to_json(start.value, root),
            }
            for start in witness.start
        ],
        "calls": [
            {
                "function": without_root(call.function, root),
                "arguments": [_value_to_json(value, root) for value in call.arguments],
                "outside": [{"name": given.name, "value": _value_to_json(given.value, root)} for given in call.outside],
            }
            for call in witness.calls
        ],
        "ending": _ending_to_json(witness.ending, root),
        "watched": [
            {"shown": shown, "object": without_root(item, root), "path": path} for shown, item, path in witness.watched
        ],
        "assumed": list(witness.assumed),
    }


def _ending_to_json(ending: Ending, root: str) -> dict[str, Any]:
    where = ending.where
    return {
        "kind": ending.kind,
        "where": {
            "file": without_root(where.file, root),
            "line": where.line,
            "column": where.column,
            "endColumn": where.end_column,
            "spelling": where.spelling,
        },
        "fault": ending.fault,
        "place": without_root(ending.place, root),
        "found": ending.found,
        "expected": ending.expected,
    }


def _value_to_json(value: Value, root: str) -> Any:
    if isinstance(value, Reference):
        return {"to": without_root(value.to, root), "at": value.at, "path": value.path}
    return str(value) if value is not None and abs(value) > _EXACT else value


def without_root(identity: str, root: str) -> str:
    """A file name or an identity (``file:name``, ``struct tag@file:line:column``) without the root's path."""
    prefix = root.rstrip("/") + "/"
    if not root:
        return identity
    if identity.startswith(prefix):
        return identity[len(prefix) :]
    return identity.replace("@" + prefix, "@", 1)


def with_root(identity: str, root: str) -> str:
    """The opposite of ``without_root`` for an identity."""
    prefix = root.rstrip("/") + "/"
    before, separator, place = identity.partition("@")
    if not root:
        return identity
    if ":" in before:
        return identity if identity.startswith("/") else prefix + identity
    if separator and ":" in place and not place.startswith("/"):
        return f"{before}@{prefix}{place}"
    return identity


# ------------------------------------------------------------------------------------------------------------ reading


def witness_from_json(data: Any, root: str = "") -> Witness:
    """The witness that JSON data describes, with identities under ``root``. ``BadWitness`` if it is none."""
    _members(data, "the witness", ("model", "made", "start", "calls", "ending", "watched", "assumed"))

    def place(text: str) -> str:
        return with_root(text, root)

    return Witness(
        model=_text(data, "model", ""),
        made=_all(data, "made", "", lambda item, at: _made(item, at, place)),
        start=_all(data, "start", "", lambda item, at: _start(item, at, place)),
        calls=_all(data, "calls", "", lambda item, at: _call(item, at, place)),
        ending=_ending(data["ending"], place, root),
        watched=_all(data, "watched", "", lambda item, at: _watched(item, at, place)),
        assumed=_all(data, "assumed", "", _plain_text),
    )


_Placer = Callable[[str], str]


def _made(item: Any, at: str, place: _Placer) -> Made:
    _members(item, at, ("name", "type", "elements"))
    elements = _whole(item, "elements", at, 1, _MOST_ELEMENTS)
    name = _text(item, "name", at)
    if not name.isidentifier():
        raise BadWitness(f"{at}.name must be a name, and is {name!r}")
    return Made(name, place(_text(item, "type", at)), elements)


def _start(item: Any, at: str, place: _Placer) -> StartValue:
    _members(item, at, ("object", "path", "value"))
    return StartValue(
        place(_text(item, "object", at)),
        _text(item, "path", at, empty=True),
        _value(item["value"], f"{at}.value", place),
    )


def _call(item: Any, at: str, place: _Placer) -> WitnessCall:
    _members(item, at, ("function", "arguments", "outside"))
    return WitnessCall(
        place(_text(item, "function", at)),
        _all(item, "arguments", at, lambda value, where: _value(value, where, place)),
        _all(item, "outside", at, lambda value, where: _outside(value, where, place)),
    )


def _outside(item: Any, at: str, place: _Placer) -> OutsideValue:
    _members(item, at, ("name", "value"))
    return OutsideValue(_text(item, "name", at), _value(item["value"], f"{at}.value", place))


def _watched(item: Any, at: str, place: _Placer) -> tuple[str, str, str]:
    _members(item, at, ("shown", "object", "path"))
    return _text(item, "shown", at), place(_text(item, "object", at)), _text(item, "path", at, empty=True)


def _ending(item: Any, place: _Placer, root: str) -> Ending:
    at = "ending"
    _members(item, at, ("kind", "where", "fault", "place", "found", "expected"))
    kind, fault = item["kind"], item["fault"]
    if kind not in _ENDINGS:
        raise BadWitness(f"{at}.kind must be one of {', '.join(_ENDINGS)}, and is {_shown(kind)}")
    if fault is not None and fault not in get_args(Fault):
        raise BadWitness(f"{at}.fault must be null or one of {', '.join(get_args(Fault))}, and is {_shown(fault)}")
    return Ending(
        kind,
        _origin(item["where"], f"{at}.where", root),
        fault,
        place(_text(item, "place", at, empty=True)),
        _text(item, "found", at, empty=True),
        _text(item, "expected", at, empty=True),
    )


def _origin(item: Any, at: str, root: str) -> Origin:
    _members(item, at, ("file", "line", "column", "endColumn", "spelling"))
    file = _text(item, "file", at)
    line, column, end = (_whole(item, name, at, 0, _EXACT) for name in ("line", "column", "endColumn"))
    whole = file if not root or file.startswith("/") else f"{root.rstrip('/')}/{file}"
    return Origin(whole, line, column, end, _text(item, "spelling", at, empty=True))


def _value(item: Any, at: str, place: _Placer) -> Value:
    if item is None or (isinstance(item, int) and not isinstance(item, bool)):
        return item
    if isinstance(item, str) and _NUMBER.fullmatch(item):
        return int(item)
    if not isinstance(item, Mapping):
        raise BadWitness(f"{at} must be an integer, null or a pointer's object, and is {_shown(item)}")
    _members(item, at, ("to", "at", "path"))
    return Reference(
        place(_text(item, "to", at)), _whole(item, "at", at, -_EXACT, _EXACT), _text(item, "path", at, empty=True)
    )


def _members(item: Any, at: str, names: tuple[str, ...]) -> None:
    """Refuse what is no object with exactly these members."""
    if not isinstance(item, Mapping):
        raise BadWitness(f"{at} must be an object, and is {_shown(item)}")
    for name in names:
        if name not in item:
            raise BadWitness(f"{at} has no member {name!r}")
    for name in item:
        if name not in names:
            raise BadWitness(f"{at} has the member {name!r}, which is not known")


def _text(item: Mapping[str, Any], name: str, at: str, *, empty: bool = False) -> str:
    text = item[name]
    if not isinstance(text, str) or not (text or empty):
        raise BadWitness(f"{_joined(at, name)} must be {'text' if empty else 'text that is not empty'}")
    return text


def _plain_text(item: Any, at: str) -> str:
    if not isinstance(item, str):
        raise BadWitness(f"{at} must be text, and is {_shown(item)}")
    return item


def _whole(item: Mapping[str, Any], name: str, at: str, low: int, high: int) -> int:
    number = item[name]
    if not isinstance(number, int) or isinstance(number, bool) or not low <= number <= high:
        raise BadWitness(f"{_joined(at, name)} must be an integer from {low} to {high}, and is {_shown(number)}")
    return number


def _all(item: Mapping[str, Any], name: str, at: str, one: Callable[[Any, str], Item]) -> tuple[Item, ...]:
    listed = item[name]
    if not isinstance(listed, list):
        raise BadWitness(f"{_joined(at, name)} must be an array, and is {_shown(listed)}")
    return tuple(one(entry, f"{_joined(at, name)}[{number}]") for number, entry in enumerate(listed))


def _joined(at: str, name: str) -> str:
    return f"{at}.{name}" if at else name


def _shown(item: Any) -> str:
    text = "null" if item is None else "an object" if isinstance(item, Mapping) else repr(item)
    return text if len(text) <= 60 else text[:57] + "..."
