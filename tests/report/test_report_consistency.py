"""The two gates catch seeded faults: each test breaks a sound log in one way.

One table holds faults that the published schema sees; the other shows why the consistency checks are needed, since
there the schema sees nothing.
"""

import copy
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from log_checks import schema_errors
from report_samples import barge

from stepring.report.consistency import check_log
from stepring.report.sarif import sarif_log
from stepring.report.serialise import to_bytes

Log = dict[str, Any]
Breakage = Callable[[Log], object]


@pytest.fixture(scope="module")
def sound(tmp_path_factory: pytest.TempPathFactory) -> tuple[Log, Path]:
    root = tmp_path_factory.mktemp("barge")
    log: Log = json.loads(to_bytes(sarif_log(barge(root), ("fail", "open", "pass", "review"), 1)))
    assert not schema_errors(log)
    assert not check_log(log, root)
    return log, root


def run(log: Log) -> Log:
    return log["runs"][0]  # type: ignore[no-any-return]


def result(log: Log, number: int = 1) -> Log:
    """By place: 0 SM01 pass, 1 SM04 fail, 2 SM04 review, 3 RB04 open, 4 RB04 fail."""
    return run(log)["results"][number]  # type: ignore[no-any-return]


def place(log: Log, number: int = 1) -> Log:
    return result(log, number)["locations"][0]["physicalLocation"]  # type: ignore[no-any-return]


def steps(log: Log) -> list[Log]:
    return result(log, 4)["codeFlows"][0]["threadFlows"][0]["locations"]  # type: ignore[no-any-return]


def graph(log: Log) -> Log:
    return run(log)["graphs"][0]  # type: ignore[no-any-return]


def traversal(log: Log) -> Log:
    return result(log)["graphTraversals"][0]  # type: ignore[no-any-return]


def invocation(log: Log) -> Log:
    return run(log)["invocations"][0]  # type: ignore[no-any-return]


def driver(log: Log) -> Log:
    return run(log)["tool"]["driver"]  # type: ignore[no-any-return]


def text(log: Log, new: str) -> None:
    result(log)["message"]["text"] = new


UNSEEN_BY_THE_SCHEMA: dict[str, tuple[Breakage, str]] = {
    "schema address relative": (lambda log: log.update({"$schema": "sarif.json"}), "absolute URI"),
    "version last": (lambda log: log.update(version=log.pop("version")), "come first"),
    "no column kind": (lambda log: run(log).pop("columnKind"), "columnKind"),
    "lone surrogate": (lambda log: text(log, "caf\udce9."), "surrogate"),
    "surrogate in a key": (lambda log: steps(log)[0]["state"].update({"\udcff": {"text": "1"}}), "surrogate"),
    "not a number": (lambda log: run(log)["properties"].update(ratio=float("nan")), "JSON knows"),
    "rank of an open one": (lambda log: result(log, 3).update(rank=20.0), "rank"),
    "pass with a level": (lambda log: result(log, 0).update(level="warning"), "level"),
    "failure with level none": (lambda log: result(log).update(level="none"), "level none"),
    "rule index of another rule": (lambda log: result(log).update(ruleIndex=0), "ruleIndex"),
    "rule index out of range": (lambda log: result(log).update(ruleIndex=99), "ruleIndex"),
    "no rule id": (lambda log: result(log).pop("ruleId"), "ruleId"),
    "rule twice": (lambda log: driver(log)["rules"].append({"id": "SM01"}), "listed twice"),
    "empty message": (lambda log: text(log, ""), "empty"),
    "single brace": (lambda log: text(log, "Set {1, 2}."), "brace"),
    "placeholder without argument": (lambda log: text(log, "The state {7}."), "placeholder"),
    "subscript not escaped": (lambda log: text(log, "slots[head] is read."), "bracket"),
    "link to nowhere": (lambda log: text(log, "See [there](9)."), "link"),
    "unknown message id": (lambda log: result(log)["message"].update(id="none"), "no such message"),
    "general message lacks arguments": (lambda log: result(log)["message"].pop("arguments"), "placeholder"),
    "brace in a step": (lambda log: steps(log)[0]["location"]["message"].update(text="a { b"), "brace"),
    "brace in a notice": (
        lambda log: invocation(log)["toolExecutionNotifications"][0]["message"].update(text="{"),
        "brace",
    ),
    "no location": (lambda log: result(log).pop("locations"), "locations"),
    "location id twice": (lambda log: result(log)["locations"][0].update(id=1), "id 1"),
    "region without start": (lambda log: place(log)["region"].pop("startLine"), "no start"),
    "region ends before it starts": (lambda log: place(log)["region"].update(endColumn=2), "ends before"),
    "context no wider": (
        lambda log: place(log).update(contextRegion={**place(log)["region"]}),
        "not wider",
    ),
    "context without region": (lambda log: place(log).pop("region"), "without a region"),
    "line past the end": (lambda log: place(log)["region"].update(startLine=15, endLine=99), "no line 99"),
    "column past the end": (lambda log: place(log)["region"].update(endColumn=99), "no column"),
    "wrong snippet": (lambda log: place(log)["region"]["snippet"].update(text="AUGER_IDLE"), "snippet"),
    "wrong context": (lambda log: place(log)["contextRegion"]["snippet"].update(text="else"), "snippet"),
    "blank in a URI": (lambda log: run(log)["artifacts"][1]["location"].update(uri="shore commands"), "URI reference"),
    "backslash in a URI": (
        lambda log: run(log)["artifacts"][1]["location"].update(uri="feed\\auger.c"),
        "URI reference",
    ),
    "artifact index of another file": (lambda log: place(log)["artifactLocation"].update(index=1), "different"),
    "artifact index out of range": (lambda log: place(log)["artifactLocation"].update(index=7), "leads nowhere"),
    "artifact twice": (
        lambda log: run(log)["artifacts"].append({"location": {"uri": "feed/auger.c", "uriBaseId": "SRCROOT"}}),
        "listed twice",
    ),
    "artifact's own index wrong": (lambda log: run(log)["artifacts"][0]["location"].update(index=1), "own index"),
    "unknown base": (lambda log: place(log)["artifactLocation"].update(uriBaseId="ROOT"), "not defined"),
    "relative without base": (lambda log: place(log)["artifactLocation"].pop("uriBaseId"), "needs a base"),
    "absolute with base": (lambda log: place(log)["artifactLocation"].update(uri="file:///auger.c"), "has none"),
    "upward URI": (lambda log: place(log)["artifactLocation"].update(uri="../auger.c"), "upwards"),
    "rooted URI": (lambda log: place(log)["artifactLocation"].update(uri="/auger.c"), "not relative"),
    "base without slash": (
        lambda log: run(log)["originalUriBaseIds"].update(TOP={"uri": "file:///barge"}),
        "end in a slash",
    ),
    "relative base without base": (lambda log: run(log)["originalUriBaseIds"].update(TOP={"uri": "barge/"}), "a base"),
    "hash name": (lambda log: run(log)["artifacts"][0].update(hashes={"sha256": "00"}), "registry"),
    "hash not hexadecimal": (lambda log: run(log)["artifacts"][0]["hashes"].update({"sha-256": "0x1"}), "hexadecimal"),
    "language in capitals": (lambda log: run(log)["artifacts"][0].update(sourceLanguage="C"), "lower case"),
    "logical index of another": (
        lambda log: result(log)["locations"][0]["logicalLocations"][0].update(index=1),
        "differs",
    ),
    "logical without index": (lambda log: result(log)["locations"][0]["logicalLocations"][0].pop("index"), "no index"),
    "logical parent nowhere": (lambda log: run(log)["logicalLocations"][0].update(parentIndex=44), "leads nowhere"),
    "logical twice": (
        lambda log: run(log)["logicalLocations"].append({**run(log)["logicalLocations"][0], "index": 5}),
        "listed twice",
    ),
    "logical own index": (lambda log: run(log)["logicalLocations"][0].update(index=1), "its own index"),
    "qualified top level": (
        lambda log: run(log)["logicalLocations"][0].update(fullyQualifiedName="feed::auger_poll"),
        "top-level",
    ),
    "taxon of another number": (
        lambda log: driver(log)["rules"][0]["relationships"][0]["target"].update(index=1),
        "one taxon",
    ),
    "relationship without taxonomy": (
        lambda log: driver(log)["rules"][0]["relationships"][0]["target"].pop("toolComponent"),
        "no taxonomy",
    ),
    "taxonomy with rules": (lambda log: run(log)["taxonomies"][0].update(rules=[{"id": "478"}]), "has no rules"),
    "taxon twice": (lambda log: run(log)["taxonomies"][0]["taxa"].append({"id": "128"}), "listed twice"),
    "supported taxonomy missing": (lambda log: run(log).pop("taxonomies"), "no taxonomy"),
    "supported without relationships": (
        lambda log: [rule.pop("relationships") for rule in driver(log)["rules"]],
        "no rule has",
    ),
    "success in spite of an error": (
        lambda log: invocation(log)["toolExecutionNotifications"][0].update(level="error"),
        "in spite of",
    ),
    "notice of another kind": (
        lambda log: invocation(log)["toolExecutionNotifications"][0]["descriptor"].update(index=0),
        "at its index",
    ),
    "time without zone": (lambda log: invocation(log).update(startTimeUtc="2024-05-01T10:00:00"), "date and time"),
    "node twice": (lambda log: graph(log)["nodes"].append({"id": "AUGER_IDLE", "label": {"text": "x"}}), "twice"),
    "edge twice": (lambda log: graph(log)["edges"][1].update(id="t1"), "twice"),
    "edge to nowhere": (lambda log: graph(log)["edges"][0].update(targetNodeId="AUGER_GONE"), "no node"),
    "edge from nowhere": (lambda log: graph(log)["edges"][0].update(sourceNodeId="AUGER_GONE"), "no node"),
    "walk over no edge": (lambda log: traversal(log)["edgeTraversals"][0].update(edgeId="t99"), "does not exist"),
    "walk that jumps": (lambda log: traversal(log)["edgeTraversals"].pop(1), "end to end"),
    "walk in no graph": (lambda log: traversal(log).update(runGraphIndex=5), "graph does not exist"),
    "step order falls": (lambda log: steps(log)[2].update(executionOrder=1), "does not rise"),
    "state without text": (lambda log: steps(log)[0]["state"]["slot"].update(text=""), "no text"),
    "thread flow twice": (
        lambda log: result(log, 4)["codeFlows"][0].update(
            threadFlows=[{"id": "main", "locations": steps(log)[:1]}, {"id": "main", "locations": steps(log)[1:]}]
        ),
        "twice",
    ),
    "some suppressed, others unknown": (lambda log: result(log).update(suppressions=[]), "suppressions"),
    "some compared, others not": (lambda log: result(log).update(baselineState="new"), "baselineState"),
    "fingerprint twice": (
        lambda log: result(log).update(partialFingerprints=result(log, 0)["partialFingerprints"]),
        "fingerprint",
    ),
    "fingerprint without version": (lambda log: result(log).update(partialFingerprints={"mine": "1"}), "no version"),
    "fingerprint of a result system": (lambda log: result(log).update(fingerprints={"a/v1": "1"}), "fingerprints"),
    "fix that changes a file twice": (
        lambda log: result(log).update(fixes=[{"artifactChanges": [change(), change(1)]}]),
        "two places",
    ),
}


def change(line: int = 2) -> Log:
    return {
        "artifactLocation": {"uri": "feed/auger.c", "uriBaseId": "SRCROOT"},
        "replacements": [{"deletedRegion": {"startLine": line}}],
    }


SEEN_BY_THE_SCHEMA: dict[str, Breakage] = {
    "version": lambda log: log.update(version="2.0.0"),
    "no runs": lambda log: log.pop("runs"),
    "unknown member": lambda log: result(log).update(verdict="fail"),
    "null": lambda log: result(log).update(relatedLocations=None),
    "kind": lambda log: result(log).update(kind="failed"),
    "level": lambda log: result(log).update(level="fatal"),
    "rank": lambda log: result(log).update(rank=101),
    "column zero": lambda log: place(log)["region"].update(startColumn=0),
    "line as text": lambda log: place(log)["region"].update(startLine="14"),
    "line as a fraction": lambda log: place(log)["region"].update(startLine=14.0),
    "region without any start": lambda log: place(log).update(region={"snippet": {"text": "x"}}),
    "empty flow": lambda log: result(log, 4)["codeFlows"][0].update(threadFlows=[]),
    "state as text": lambda log: steps(log)[0]["state"].update(slot="5"),
    "importance": lambda log: steps(log)[0].update(importance="high"),
    "label as text": lambda log: graph(log)["edges"][1].update(label="always"),
    "edge without end": lambda log: graph(log)["edges"][0].pop("targetNodeId"),
    "two graphs": lambda log: traversal(log).update(resultGraphIndex=0),
    "no graph": lambda log: traversal(log).pop("runGraphIndex"),
    "column kind": lambda log: run(log).update(columnKind="bytes"),
    "suppression's old member": lambda log: result(log).update(
        suppressions=[{"kind": "external", "state": "accepted"}]
    ),
    "guid": lambda log: result(log).update(guid="1"),
    "fingerprint as a number": lambda log: result(log).update(partialFingerprints={"a/v1": 1}),
    "no message": lambda log: result(log).pop("message"),
    "no success": lambda log: invocation(log).pop("executionSuccessful"),
    "results null": lambda log: run(log).update(results=None),
    "role": lambda log: run(log)["artifacts"][0].update(roles=["source"]),
    "same related place twice": lambda log: result(log).update(relatedLocations=result(log)["relatedLocations"] * 2),
}


@pytest.mark.parametrize("name", UNSEEN_BY_THE_SCHEMA)
def test_the_checks_see_what_the_schema_does_not(sound: tuple[Log, Path], name: str) -> None:
    log, root = copy.deepcopy(sound[0]), sound[1]
    breakage, words = UNSEEN_BY_THE_SCHEMA[name]
    breakage(log)
    found = check_log(log, root)
    assert any(words in sentence for sentence in found), found


@pytest.mark.parametrize("name", SEEN_BY_THE_SCHEMA)
def test_the_schema_sees_these(sound: tuple[Log, Path], name: str) -> None:
    log = copy.deepcopy(sound[0])
    SEEN_BY_THE_SCHEMA[name](log)
    assert schema_errors(log)


def test_most_of_the_faults_pass_the_schema(sound: tuple[Log, Path]) -> None:
    """Otherwise the consistency checks would not be worth their lines."""
    unseen = 0
    for breakage, _ in UNSEEN_BY_THE_SCHEMA.values():
        log = copy.deepcopy(sound[0])
        breakage(log)
        unseen += not schema_errors(log)
    assert unseen > 0.8 * len(UNSEEN_BY_THE_SCHEMA)


def test_the_index_minus_one_is_no_index(sound: tuple[Log, Path]) -> None:
    log = copy.deepcopy(sound[0])
    place(log)["artifactLocation"]["index"] = -1
    result(log)["rank"] = -1
    assert sum("-1 means absent" in sentence for sentence in check_log(log)) == 2


def test_a_log_of_nothing_is_refused() -> None:
    assert check_log({})
    assert check_log({"$schema": "https://x", "version": "2.1.0", "runs": []})
