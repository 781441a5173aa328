"""What a SARIF log says of its witnesses: the findings that have one, what was asked for, and the files' hashes.

A log is data from outside. What it holds is taken apart member by member, and what is missing or of another kind gives
one sentence, never more.
"""

import hashlib
import json
import re
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from urllib.parse import unquote

from stepring.meaning.models import MODELS
from stepring.report.text import clean, unescape_message
from stepring.report.types import Inspection


class BadLog(Exception):
    """The log cannot be replayed; the text is one sentence that says why and what to do."""


@dataclass(frozen=True, slots=True)
class Claim:
    """One finding of a log that has a witness: its rule, its sentence, its place, and the witness as JSON data."""

    rule: str
    text: str
    file: str
    line: int
    data: Any


@dataclass(frozen=True, slots=True)
class Log:
    """What a log holds that matters here: the witnesses, how the inspection was asked for, and the files' hashes."""

    claims: tuple[Claim, ...]
    inspection: Inspection
    hashes: Mapping[str, str]


def read_log(path: Path) -> Log:
    """The witnesses of a log. ``BadLog`` where there is none that can be replayed."""
    name = clean(str(path))
    try:
        data = json.loads(path.read_bytes())
    except OSError as trouble:
        raise BadLog(f"{name} cannot be read: {trouble.strerror or trouble}") from None
    except (ValueError, RecursionError):
        raise BadLog(f"{name} is no JSON; name a SARIF log that `stepring inspect --sarif` wrote") from None
    runs = data.get("runs") if isinstance(data, Mapping) else None
    if not isinstance(runs, list) or data.get("version") != "2.1.0":
        raise BadLog(f"{name} is no SARIF 2.1.0 log; name one that `stepring inspect --sarif` wrote")
    for run in runs:
        properties = _member(run, "properties")
        asked = _inspection(_member(properties, "inspection"))
        if asked is not None:
            claims = tuple(_claims(run))
            if not claims:
                text = f"{name} has no witness; only failures that were shown by a run have one"
                raise BadLog(f"{text} (`--kind fail` must be among the verdicts written)")
            return Log(claims, asked, dict(_hashes(run)))
    raise BadLog(
        f"{name} does not say how its inspection was asked for; write it again with `stepring inspect --sarif`"
    )


def _member(item: Any, *names: str | int) -> Any:
    """A member of nested JSON data, or None where there is no such thing."""
    for name in names:
        if isinstance(item, Mapping):
            item = item.get(name)
        elif isinstance(item, list) and isinstance(name, int) and name < len(item):
            item = item[name]
        else:
            return None
    return item


def _inspection(data: Any) -> Inspection | None:
    if not isinstance(data, Mapping):
        return None
    folder, paths, named = data.get("folder"), data.get("paths"), data.get("compilers")
    database, model = data.get("compileCommands"), data.get("dataModel")
    whole = isinstance(folder, str) and isinstance(data.get("useCompiler"), bool)
    lists = isinstance(paths, list) and isinstance(named, list) and all(isinstance(x, str) for x in (*paths, *named))
    options = (database is None or isinstance(database, str)) and (model is None or model in MODELS)
    if not (whole and lists and options):
        return None
    return Inspection(str(folder), tuple(paths or ()), database, model, tuple(named or ()), bool(data["useCompiler"]))


def _claims(run: Any) -> Iterator[Claim]:
    results = _member(run, "results")
    for result in results if isinstance(results, list) else ():
        data = _member(result, "properties", "witness")
        if data is not None:
            place = _member(result, "locations", 0, "physicalLocation")
            uri, line = _member(place, "artifactLocation", "uri"), _member(place, "region", "startLine")
            text = _member(result, "message", "text")
            yield Claim(
                str(_member(result, "ruleId") or "no rule"),
                _first_sentence(text) if isinstance(text, str) else "A finding.",
                unquote(uri) if isinstance(uri, str) else "",
                line if isinstance(line, int) else 0,
                data,
            )


def _first_sentence(text: str) -> str:
    return re.split(r"(?<=[.!?]) ", unescape_message(text), maxsplit=1)[0]


def _hashes(run: Any) -> Iterator[tuple[str, str]]:
    """The files below the root with the hash that they had."""
    artifacts = _member(run, "artifacts")
    for artifact in artifacts if isinstance(artifacts, list) else ():
        uri, known = _member(artifact, "location", "uri"), _member(artifact, "hashes", "sha-256")
        if _member(artifact, "location", "uriBaseId") == "SRCROOT" and isinstance(uri, str) and isinstance(known, str):
            yield unquote(uri), known


def changed_files(log: Log, root: Path) -> Iterator[str]:
    """A sentence for each file with a finding that is not as it was; ``BadLog`` where one is not there at all."""
    for file in dict.fromkeys(claim.file for claim in log.claims):
        path = root / file
        try:
            now = hashlib.sha256(path.read_bytes()).hexdigest()
        except (OSError, ValueError):
            text = f"{clean(file)} is not below {clean(str(root))}"
            raise BadLog(f"{text}; run replay in the root of the inspected project, or name it with --root") from None
        if log.hashes.get(file, now) != now:
            yield f"{clean(file)} has changed since the log was written; its witnesses may no longer fit."
