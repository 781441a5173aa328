"""What a SARIF log must fulfil beyond its schema.

A schema looks at one object at a time; the standard also says how objects refer to each other, and published checkers
leave most of that out. ``check_log`` takes parsed JSON and gives one sentence for each breach, with the path to it. It
knows nothing of how stepring makes a log, so that it can find mistakes there; the section numbers are those of SARIF
2.1.0.
"""

import math
import re
from collections import Counter
from collections.abc import Iterable, Iterator, Mapping, Sequence
from itertools import pairwise
from pathlib import Path
from typing import Any

from stepring.report.consistency_places import check_place, check_source_text, place_key

_VERSIONED = re.compile(r"[^/]+(/[^/]+)*/v[0-9]+")
_HEX64 = re.compile(r"[0-9a-f]{64}")
_TIME = re.compile(r"[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}:[0-9]{2}(\.[0-9]+)?Z")
_GUID = re.compile(r"[0-9a-fA-F]{8}-[0-9a-fA-F]{4}-[1-5][0-9a-fA-F]{3}-[89abAB][0-9a-fA-F]{3}-[0-9a-fA-F]{12}")
_PLACEHOLDER = re.compile(r"\{([0-9]+)\}")
_LINK = re.compile(r"(?<!\\)\[((?:\\.|[^\\\[\]])*)\]\(([^()\s]*)\)")
_BARE_BRACKET = re.compile(r"(?<!\\)(?:\\\\)*[\[\]]")
_KINDS = {"pass", "open", "informational", "notApplicable", "review", "fail"}
_LEVELS = {"none", "note", "warning", "error"}

Found = Iterator[str]


def check_log(log: Mapping[str, Any], root: Path | None = None) -> list[str]:
    """All breaches in a log; with ``root`` regions and snippets are also compared with the files below it."""
    return [*_check_values(log, "$", False), *_check_top(log), *_check_runs(log, root)]


def _check_top(log: Mapping[str, Any]) -> Found:
    if log.get("version") != "2.1.0":
        yield "$.version: must be 2.1.0 (3.13)."
    if not str(log.get("$schema", "")).startswith("https://"):
        yield "$.$schema: must be an absolute URI (3.13.3)."
    if list(log)[:2] != ["$schema", "version"]:
        yield "$: $schema and version should come first (3.13)."
    if not isinstance(log.get("runs"), list) or not log["runs"]:
        yield "$.runs: there must be a run (3.13)."


def _check_runs(log: Mapping[str, Any], root: Path | None) -> Found:
    for number, run in enumerate(log.get("runs") or []):
        yield from check_run(run, f"$.runs[{number}]", root)


def check_run(run: Mapping[str, Any], path: str, root: Path | None) -> Found:
    """The breaches in one run."""
    results = run.get("results", [])
    if results and run.get("columnKind") not in ("utf16CodeUnits", "unicodeCodePoints"):
        yield f"{path}.columnKind: must be present where there are results (3.14.27)."
    yield from _check_bases(run, path)
    yield from _check_artifacts(run, path)
    yield from _check_logical(run, path)
    yield from _check_tool(run, path)
    yield from _check_invocations(run, path)
    for number, graph in enumerate(run.get("graphs", [])):
        yield from _check_graph(graph, f"{path}.graphs[{number}]")
    for where, location in _all_places(run, path):
        yield from check_place(location, run, where)
        if root is not None:
            yield from check_source_text(location, run, where, root)
    for number, result in enumerate(results):
        yield from _check_result(result, run, f"{path}.results[{number}]")
    yield from _check_all_results(results, path)


# ------------------------------------------------------------------------------------------------- every value


def _check_values(value: Any, path: str, in_bag: bool) -> Found:
    """UTF-8, no NaN, no null and no index of -1 outside property bags, well-formed times and GUIDs."""
    if isinstance(value, Mapping):
        for key, member in value.items():
            yield from _check_text(key, path)
            where = f"{path}.{key}"
            yield from _check_member(key, member, where, in_bag)
            yield from _check_values(member, where, in_bag or key == "properties")
    elif isinstance(value, list):
        for number, member in enumerate(value):
            yield from _check_values(member, f"{path}[{number}]", in_bag)
    elif isinstance(value, str):
        yield from _check_text(value, path)
    elif isinstance(value, float) and not math.isfinite(value):
        yield f"{path}: is no number that JSON knows."
    elif value is None and not in_bag:
        yield f"{path}: null is not allowed (3.7)."


def _check_text(text: str, path: str) -> Found:
    try:
        text.encode("utf-8")
    except UnicodeEncodeError:
        yield f"{path}: holds a lone surrogate, which UTF-8 cannot (3.1)."


def _check_member(key: str, member: Any, where: str, in_bag: bool) -> Found:
    if in_bag:
        return
    if key.lower().endswith(("index", "rank")) and member == -1:
        yield f"{where}: -1 means absent and should be left out (3.7)."
    if key.endswith("TimeUtc") and not (isinstance(member, str) and _TIME.fullmatch(member)):
        yield f"{where}: is no UTC date and time (3.9)."
    if key.lower().endswith("guid") and not (isinstance(member, str) and _GUID.fullmatch(member)):
        yield f"{where}: is no GUID (3.5)."


def _all_places(value: Any, path: str) -> Iterator[tuple[str, Mapping[str, Any]]]:
    """Every physical location below, with its path."""
    if isinstance(value, Mapping):
        for key, member in value.items():
            if key == "physicalLocation":
                yield f"{path}.{key}", member
            if key != "properties":
                yield from _all_places(member, f"{path}.{key}")
    elif isinstance(value, list):
        for number, member in enumerate(value):
            yield from _all_places(member, f"{path}[{number}]")


def _twice(values: Iterable[Any]) -> list[Any]:
    return [value for value, times in Counter(values).items() if times > 1]


def _at(members: Sequence[Any], index: Any) -> Any:
    """The member at an index; None where the index is no index of it."""
    return members[index] if isinstance(index, int) and 0 <= index < len(members) else None


# ------------------------------------------------------------------------------------------------- what a run lists


def _check_bases(run: Mapping[str, Any], path: str) -> Found:
    for name, location in run.get("originalUriBaseIds", {}).items():
        uri = location.get("uri")
        where = f"{path}.originalUriBaseIds.{name}"
        if uri is None:
            continue
        if not uri.endswith("/") or "?" in uri or "#" in uri or "/../" in uri:
            yield f"{where}: must end in a slash, without query, fragment or '..' (3.14.14)."
        if ":" not in uri.split("/")[0] and "uriBaseId" not in location:
            yield f"{where}: a relative URI needs a base (3.14.14)."


def _check_artifacts(run: Mapping[str, Any], path: str) -> Found:
    artifacts = run.get("artifacts", [])
    for number, artifact in enumerate(artifacts):
        where = f"{path}.artifacts[{number}]"
        location = artifact.get("location", {})
        if location.get("index", number) != number:
            yield f"{where}.location.index: is not the artifact's own index (3.24)."
        yield from check_place({"artifactLocation": location}, run, where)
        hashes = artifact.get("hashes", {})
        if "sha-256" in hashes and not _HEX64.fullmatch(hashes["sha-256"]):
            yield f"{where}.hashes: sha-256 must be 64 hexadecimal digits (3.24.11)."
        if any(name != name.lower() or name in ("sha256", "sha1") for name in hashes):
            yield f"{where}.hashes: names must be those of the IANA registry (3.24.11)."
        if artifact.get("sourceLanguage", "c") != artifact.get("sourceLanguage", "c").lower():
            yield f"{where}.sourceLanguage: must be lower case (3.24)."
    for key in _twice(place_key(artifact.get("location", {})) for artifact in artifacts):
        yield f"{path}.artifacts: {key} is listed twice (3.24)."


def _check_logical(run: Mapping[str, Any], path: str) -> Found:
    logical = run.get("logicalLocations", [])
    for number, one in enumerate(logical):
        where = f"{path}.logicalLocations[{number}]"
        if one.get("index", number) != number:
            yield f"{where}.index: is not its own index (3.33)."
        parent = one.get("parentIndex")
        if parent is not None and (_at(logical, parent) is None or parent == number):
            yield f"{where}.parentIndex: leads nowhere (3.33)."
        if parent is None and one.get("name") != one.get("fullyQualifiedName", one.get("name")):
            yield f"{where}: a top-level name must equal its qualified name (3.33)."
    for key in _twice((one.get("fullyQualifiedName"), one.get("kind")) for one in logical):
        yield f"{path}.logicalLocations: {key} is listed twice (3.33)."
    yield from _check_logical_uses(run.get("results", []), logical, f"{path}.results")


def _check_logical_uses(value: Any, logical: Sequence[Mapping[str, Any]], path: str) -> Found:
    if isinstance(value, Mapping):
        for key, member in value.items():
            if key == "logicalLocations":
                for one in member:
                    if _at(logical, one.get("index")) is None:
                        yield f"{path}.{key}: has no index into the run's (3.33)."
                    elif any(logical[one["index"]].get(name) != text for name, text in one.items()):
                        yield f"{path}.{key}: differs from the run's entry (3.33)."
            elif key != "properties":
                yield from _check_logical_uses(member, logical, f"{path}.{key}")
    elif isinstance(value, list):
        for number, member in enumerate(value):
            yield from _check_logical_uses(member, logical, f"{path}[{number}]")


def _check_tool(run: Mapping[str, Any], path: str) -> Found:
    driver = run.get("tool", {}).get("driver", {})
    rules, taxonomies = driver.get("rules", []), run.get("taxonomies", [])
    for identity in _twice(rule.get("id") for rule in rules):
        yield f"{path}.tool.driver.rules: {identity} is listed twice (3.19)."
    for number, rule in enumerate(rules):
        where = f"{path}.tool.driver.rules[{number}]"
        for relation in rule.get("relationships", []):
            yield from _check_target(relation.get("target", {}), taxonomies, where)
        for text in rule.get("messageStrings", {}).values():
            yield from _check_escapes(text.get("text", ""), where, set(), 10)
    for number, taxonomy in enumerate(taxonomies):
        if "rules" in taxonomy or "notifications" in taxonomy:
            yield f"{path}.taxonomies[{number}]: a taxonomy has no rules (3.14.8)."
        for identity in _twice(taxon.get("id") for taxon in taxonomy.get("taxa", [])):
            yield f"{path}.taxonomies[{number}]: {identity} is listed twice (3.19)."
    for reference in driver.get("supportedTaxonomies", []):
        found = _at(taxonomies, reference.get("index"))
        if found is None or found.get("name") != reference.get("name"):
            yield f"{path}.tool.driver.supportedTaxonomies: leads to no taxonomy (3.19)."
        if not any(rule.get("relationships") for rule in rules):
            yield f"{path}.tool.driver.supportedTaxonomies: no rule has a relationship (3.19)."


def _check_target(target: Mapping[str, Any], taxonomies: Sequence[Mapping[str, Any]], where: str) -> Found:
    component = target.get("toolComponent", {})
    taxonomy = _at(taxonomies, component.get("index"))
    if taxonomy is None or taxonomy.get("name") != component.get("name"):
        yield f"{where}.relationships: names no taxonomy of the run (3.53)."
        return
    taxon = _at(taxonomy.get("taxa", []), target.get("index"))
    if taxon is None or taxon.get("id") != target.get("id"):
        yield f"{where}.relationships: id and index do not lead to one taxon (3.53)."


def _check_invocations(run: Mapping[str, Any], path: str) -> Found:
    descriptors = run.get("tool", {}).get("driver", {}).get("notifications", [])
    for number, invocation in enumerate(run.get("invocations", [])):
        where = f"{path}.invocations[{number}]"
        notices = [
            *invocation.get("toolExecutionNotifications", []),
            *invocation.get("toolConfigurationNotifications", []),
        ]
        for notice in notices:
            descriptor = notice.get("descriptor", {})
            listed = _at(descriptors, descriptor.get("index"))
            if listed is None or listed.get("id") != descriptor.get("id"):
                yield f"{where}: a notification's descriptor is not the one at its index (3.58)."
            if notice.get("level", "warning") == "error" and invocation.get("executionSuccessful"):
                yield f"{where}: successful in spite of an error notification (3.58)."
            yield from _check_escapes(notice.get("message", {}).get("text", ""), where, set(), 0)


def _check_graph(graph: Mapping[str, Any], path: str) -> Found:
    nodes = list(_nodes(graph.get("nodes", [])))
    for identity in _twice(nodes):
        yield f"{path}.nodes: {identity!r} is there twice (3.40)."
    for identity in _twice(edge.get("id") for edge in graph.get("edges", [])):
        yield f"{path}.edges: {identity!r} is there twice (3.41)."
    for edge in graph.get("edges", []):
        for end in ("sourceNodeId", "targetNodeId"):
            if edge.get(end) not in nodes:
                yield f"{path}.edges: {edge.get('id')!r} has a {end} that is no node (3.41)."


def _nodes(nodes: Iterable[Mapping[str, Any]]) -> Iterator[str]:
    for node in nodes:
        yield node["id"]
        yield from _nodes(node.get("children", []))


# ------------------------------------------------------------------------------------------------- results


def _check_all_results(results: Sequence[Mapping[str, Any]], path: str) -> Found:
    for member in ("suppressions", "baselineState"):
        having = sum(member in result for result in results)
        if having not in (0, len(results)):
            yield f"{path}.results: {member} must be in all results or in none (3.27.23, 3.27.24)."
    prints = [pair for result in results for pair in result.get("partialFingerprints", {}).items()]
    for pair in _twice(prints):
        yield f"{path}.results: the fingerprint {pair} is there twice."


def _check_result(result: Mapping[str, Any], run: Mapping[str, Any], path: str) -> Found:
    yield from _check_verdict(result, path)
    rules = run.get("tool", {}).get("driver", {}).get("rules", [])
    rule = _at(rules, result.get("ruleIndex"))
    if "ruleId" not in result:
        yield f"{path}.ruleId: is missing (3.27.5)."
    if rule is None or rule.get("id") != result.get("ruleId"):
        yield f"{path}.ruleIndex: does not lead to the rule of ruleId (3.27.6)."
    if not result.get("locations"):
        yield f"{path}.locations: a result should have one (3.27.12)."
    ids = [location["id"] for location in _locations(result) if "id" in location]
    for identity in _twice(ids):
        yield f"{path}: the location id {identity} is there twice (3.28.2)."
    yield from _check_message(result.get("message", {}), rule or {}, f"{path}.message", ids)
    for location in _locations(result):
        text = location.get("message", {}).get("text")
        if text is not None:
            yield from _check_escapes(text, f"{path} (a location's message)", set(ids), 0)
    for key in result.get("partialFingerprints", {}):
        if not _VERSIONED.fullmatch(key):
            yield f"{path}.partialFingerprints: {key!r} has no version (3.27.17)."
    if "fingerprints" in result:
        yield f"{path}.fingerprints: are for systems that manage results (3.27.17)."
    for number, flow in enumerate(result.get("codeFlows", [])):
        yield from _check_flow(flow, f"{path}.codeFlows[{number}]")
    for number, traversal in enumerate(result.get("graphTraversals", [])):
        yield from _check_traversal(traversal, result, run, f"{path}.graphTraversals[{number}]")
    yield from _check_fixes(result, path)


def _check_verdict(result: Mapping[str, Any], path: str) -> Found:
    kind, level = result.get("kind", "fail"), result.get("level")
    if kind not in _KINDS or (level is not None and level not in _LEVELS):
        yield f"{path}: kind {kind!r} or level {level!r} is no word of the format (3.27.9, 3.27.10)."
    if kind == "fail" and level == "none":
        yield f"{path}.level: a failure with level none says nothing (3.27.10)."
    if kind != "fail" and level not in (None, "none"):
        yield f"{path}.level: only a failure has a level (3.27.10)."
    if "rank" in result and kind != "fail":
        yield f"{path}.rank: only a failure has a rank (3.27.25)."


def _locations(value: Any) -> Iterator[Mapping[str, Any]]:
    """Every location object inside a result."""
    if isinstance(value, Mapping):
        if "physicalLocation" in value or "logicalLocations" in value:
            yield value
        for key, member in value.items():
            if key != "properties":
                yield from _locations(member)
    elif isinstance(value, list):
        for member in value:
            yield from _locations(member)


def _check_message(message: Mapping[str, Any], rule: Mapping[str, Any], path: str, ids: Sequence[int]) -> Found:
    if not message.get("text") and "id" not in message:
        yield f"{path}: needs a text or an id (3.11)."
    if message.get("text") == "":
        yield f"{path}.text: is empty (3.11)."
    arguments = message.get("arguments", [])
    if "id" in message:
        general = rule.get("messageStrings", {}).get(message["id"])
        if general is None:
            yield f"{path}.id: the rule has no such message (3.11)."
        else:
            yield from _check_escapes(general.get("text", ""), path, set(), len(arguments))
    yield from _check_escapes(message.get("text", ""), path, set(ids), len(arguments))


def _check_escapes(text: str, path: str, ids: set[int], arguments: int) -> Found:
    """Braces doubled or placeholders with an argument; brackets escaped or links that lead somewhere (3.11)."""
    rest = text.replace("{{", "").replace("}}", "")
    if any(int(number) >= arguments for number in _PLACEHOLDER.findall(rest)):
        yield f"{path}: a placeholder has no argument (3.11)."
    if re.search(r"[{}]", _PLACEHOLDER.sub("", rest)):
        yield f"{path}: a brace is not doubled (3.11)."
    for _, target in _LINK.findall(text):
        if target.isdigit() and int(target) not in ids:
            yield f"{path}: the link to {target} leads to no location of the result (3.11)."
    if _BARE_BRACKET.search(_LINK.sub("", text)):
        yield f"{path}: a square bracket is not escaped (3.11)."


def _check_flow(flow: Mapping[str, Any], path: str) -> Found:
    threads = flow.get("threadFlows", [])
    if not threads:
        yield f"{path}: has no thread flow (3.36)."
    for identity in _twice(thread["id"] for thread in threads if "id" in thread):
        yield f"{path}: the thread flow {identity!r} is there twice (3.37)."
    for thread in threads:
        steps = thread.get("locations", [])
        if not steps:
            yield f"{path}: a thread flow has no location (3.37)."
        orders = [step["executionOrder"] for step in steps if "executionOrder" in step]
        if orders != sorted(set(orders)):
            yield f"{path}: the execution order does not rise (3.38.11)."
        states = [
            thread.get("initialState", {}),
            thread.get("immutableState", {}),
            *(s.get("state", {}) for s in steps),
        ]
        if any(not text.get("text") for state in states for text in state.values()):
            yield f"{path}: a state value has no text (3.38.9)."


def _check_traversal(
    traversal: Mapping[str, Any], result: Mapping[str, Any], run: Mapping[str, Any], path: str
) -> Found:
    if ("resultGraphIndex" in traversal) == ("runGraphIndex" in traversal):
        yield f"{path}: needs exactly one graph (3.42)."
        return
    graphs = result.get("graphs", []) if "resultGraphIndex" in traversal else run.get("graphs", [])
    graph = _at(graphs, traversal.get("resultGraphIndex", traversal.get("runGraphIndex")))
    if graph is None:
        yield f"{path}: its graph does not exist (3.42)."
        return
    edges = {edge["id"]: edge for edge in graph.get("edges", [])}
    walked = [edges.get(step.get("edgeId")) for step in traversal.get("edgeTraversals", [])]
    if None in walked:
        yield f"{path}: an edge does not exist (3.43)."
        return
    ends = [(edge["sourceNodeId"], edge["targetNodeId"]) for edge in walked if edge is not None]
    if any(here[1] != there[0] for here, there in pairwise(ends)):
        yield f"{path}: its edges do not connect end to end (3.42)."


def _check_fixes(result: Mapping[str, Any], path: str) -> Found:
    for fix in result.get("fixes", []):
        changes = fix.get("artifactChanges", [])
        if not changes or any(not change.get("replacements") for change in changes):
            yield f"{path}.fixes: a fix changes nothing (3.55)."
        for key in _twice(place_key(change.get("artifactLocation", {})) for change in changes):
            yield f"{path}.fixes: {key} is changed in two places of one fix (3.55)."
