"""From sarif-om objects to the bytes of a SARIF file.

The object model (attrs classes, each attribute carrying its SARIF name as metadata) brings no serialiser. The one here
walks the classes: it leaves out what is absent or has its default, because most defaults of the model (an index of -1,
for one) may not stand in a file; and it keeps the few defaults that would change a meaning if left out. Property bags
and other plain dictionaries are written as they are.
"""

import json
import os
import tempfile
from collections.abc import Mapping
from contextlib import suppress
from pathlib import Path
from typing import Any, TypeAlias

import attr
import sarif_om as om

JSON: TypeAlias = "bool | int | float | str | list[JSON] | dict[str, JSON] | None"

SCHEMA = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json"

# Members that are written although they equal the model's default: leaving them out would mean something else, or would
# let a rule's own configuration decide (2.1.0 sections 3.27.9, 3.27.10 and 3.58).
_ALWAYS = {
    (om.Result, "level"),
    (om.Result, "kind"),
    (om.Notification, "level"),
    (om.ReportingConfiguration, "level"),
    (om.ReportingDescriptorRelationship, "kinds"),
}


@attr.s
class Suppression(om.Suppression):  # type: ignore[misc]
    """A suppression with the member ``status`` of the standard (3.35), which the object model calls ``state``."""

    status: str | None = attr.ib(default=None, metadata={"schema_property_name": "status"})


def to_json(value: Any) -> JSON:
    """A sarif-om object, or anything made of them, as plain JSON data."""
    if value is None or isinstance(value, bool | int | float | str):
        return value
    if isinstance(value, Mapping):
        return {str(key): to_json(member) for key, member in value.items()}
    if isinstance(value, list | tuple):
        return [to_json(member) for member in value]
    return _object_to_json(value)


def _object_to_json(value: Any) -> dict[str, JSON]:
    written: dict[str, JSON] = {}
    for field in attr.fields(type(value)):
        member = getattr(value, field.name)
        if member is None:
            continue
        if member == _default(field) and (type(value), field.name) not in _ALWAYS:
            continue
        written[field.metadata["schema_property_name"]] = to_json(member)
    return written


def _default(field: Any) -> Any:
    return field.default.factory() if hasattr(field.default, "factory") else field.default


def log_to_json(log: Any) -> dict[str, JSON]:
    """A ``SarifLog`` as JSON data with ``$schema`` and ``version`` first (3.13)."""
    members = _object_to_json(log)
    first = {"$schema": members.pop("$schema", SCHEMA), "version": members.pop("version", "2.1.0")}
    return first | members


def to_bytes(log: Mapping[str, JSON]) -> bytes:
    """The file's bytes: UTF-8 without byte order mark, two blanks of indent. A lone surrogate or NaN is an error."""
    return (json.dumps(log, indent=2, ensure_ascii=False, allow_nan=False) + "\n").encode("utf-8")


def write_whole(path: Path, data: bytes) -> None:
    """Write a file whole or not at all: into a new file beside it, flushed to disk, then renamed over it.

    Raises ``OSError`` where that cannot be done; then the old file, if any, is untouched. A path that is no regular
    file (a pipe, a device) is written directly, since renaming over it would replace it.
    """
    if path.exists() and not path.is_file() and not path.is_dir():
        path.write_bytes(data)
        return
    target = _behind_link(path) if path.is_symlink() else path
    handle, name = tempfile.mkstemp(prefix=f".{target.name[:100]}.", suffix=".part", dir=target.parent)
    beside = Path(name)
    try:
        with os.fdopen(handle, "wb") as file:
            file.write(data)
            file.flush()
            os.fsync(file.fileno())
        beside.chmod(_mode_for(target))
        beside.replace(target)
    except BaseException:
        beside.unlink(missing_ok=True)
        raise


def _behind_link(path: Path) -> Path:
    """What a link leads to, whether it exists or not; a circle of links is an ``OSError``."""
    with suppress(FileNotFoundError):
        path.stat()
    return Path(os.path.realpath(path))


def _mode_for(target: Path) -> int:
    """The permissions that the old file had, or what the process's mask gives a new one."""
    try:
        return target.stat().st_mode & 0o7777
    except FileNotFoundError:
        mask = os.umask(0)
        os.umask(mask)
        return 0o666 & ~mask
