"""The log of a small outcome, member by member."""

import hashlib
import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest
from log_checks import assert_sound
from report_samples import AUGER_C, RULES, barge, spot

from stepring.places import Notice, Origin
from stepring.report.sarif import sarif_log
from stepring.report.serialise import to_bytes

EVERY_KIND = ("fail", "open", "pass", "review")


@pytest.fixture
def log(tmp_path: Path) -> dict[str, Any]:
    made: dict[str, Any] = json.loads(to_bytes(sarif_log(barge(tmp_path), EVERY_KIND, 1)))
    assert_sound(made, tmp_path)
    return made


def run_of(log: dict[str, Any]) -> dict[str, Any]:
    run: dict[str, Any] = log["runs"][0]
    return run


def result_of(log: dict[str, Any], rule: str, kind: str) -> dict[str, Any]:
    found: list[dict[str, Any]] = [
        one for one in run_of(log)["results"] if (one["ruleId"], one["kind"]) == (rule, kind)
    ]
    assert len(found) == 1
    return found[0]


def test_only_the_chosen_verdicts_are_results(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    made = run_of(sarif_log(outcome))
    assert [one["kind"] for one in made["results"]] == ["fail", "fail"]
    assert_sound(sarif_log(outcome), tmp_path)
    assert run_of(sarif_log(outcome, ("pass",)))["results"][0]["ruleId"] == "SM01"


def test_a_verdict_is_a_kind_and_only_a_failure_has_a_level(log: dict[str, Any]) -> None:
    given = {(one["kind"], one["level"]) for one in run_of(log)["results"]}
    assert given == {("fail", "error"), ("open", "none"), ("pass", "none"), ("review", "none")}


def test_results_stand_in_order(log: dict[str, Any]) -> None:
    places = [one["locations"][0]["physicalLocation"] for one in run_of(log)["results"]]
    keys = [
        (p["artifactLocation"]["uri"], p["region"]["startLine"], p["region"]["startColumn"], r["ruleId"])
        for p, r in zip(places, run_of(log)["results"], strict=True)
    ]
    assert keys == sorted(keys)


def test_the_same_outcome_gives_the_same_bytes_wherever_it_lies_and_in_any_order(tmp_path: Path) -> None:
    (tmp_path / "one").mkdir()
    (tmp_path / "another").mkdir()
    first, second = barge(tmp_path / "one"), barge(tmp_path / "another")
    shuffled = replace(second, obligations=second.obligations[::-1] + second.obligations)
    assert to_bytes(sarif_log(first, EVERY_KIND)) == to_bytes(sarif_log(shuffled, EVERY_KIND))
    assert str(tmp_path).encode() not in to_bytes(sarif_log(first, EVERY_KIND))


def test_a_location_shows_the_range_and_what_is_around_it(log: dict[str, Any]) -> None:
    place = result_of(log, "SM04", "fail")["locations"][0]["physicalLocation"]
    assert place["artifactLocation"]["uri"] == "feed/auger.c"
    region = place["region"]
    assert (region["startLine"], region["startColumn"], region["endColumn"]) == (14, 7, 16)
    assert region["snippet"]["text"] == "AUGER_JAM"
    assert place["contextRegion"]["snippet"]["text"] == "\n".join(AUGER_C.split("\n")[11:16])


def test_a_file_name_is_a_percent_encoded_uri(log: dict[str, Any]) -> None:
    uris = [one["location"]["uri"] for one in run_of(log)["artifacts"]]
    assert uris == ["feed/auger.c", "shore%20commands%231.c"]
    assert run_of(log)["artifacts"][0]["hashes"] == {"sha-256": hashlib.sha256(AUGER_C.encode()).hexdigest()}
    assert run_of(log)["artifacts"][0]["sourceLanguage"] == "c"


def test_logical_locations_name_function_and_subject(log: dict[str, Any]) -> None:
    names = [
        (one["kind"], one["name"], one["fullyQualifiedName"])
        for one in result_of(log, "RB04", "fail")["locations"][0]["logicalLocations"]
    ]
    assert names == [("function", "queue_put", "queue_put"), ("member", "slots", "struct queue.slots")]
    listed = run_of(log)["logicalLocations"]
    parent = next(one for one in listed if one["kind"] == "member")["parentIndex"]
    assert listed[parent]["fullyQualifiedName"] == "struct queue"
    named = result_of(log, "SM04", "fail")["locations"][0]["logicalLocations"]
    assert [one["kind"] for one in named] == ["function", "variable"]


def test_a_message_says_what_why_and_what_to_do_and_links_to_related_places(log: dict[str, Any]) -> None:
    text = result_of(log, "SM04", "fail")["message"]["text"]
    assert text == (
        "The state AUGER_JAM of auger_state is never left. Once the auger has jammed, the barge feeds no more. "
        "Store another state in the case of AUGER_JAM, or say why none is wanted. See [auger.c, line 12](1)."
    )
    assert r"q->slots\[head % 10\]" in result_of(log, "RB04", "fail")["message"]["text"]
    assert "This is left open: A caller of queue_put was not read." in result_of(log, "RB04", "open")["message"]["text"]


def test_related_locations_are_numbered_and_escaped(log: dict[str, Any]) -> None:
    related = result_of(log, "SM04", "fail")["relatedLocations"]
    assert [one["id"] for one in related] == [1]
    assert related[0]["message"]["text"] == r"Here the state is entered, at wanted\[0\] = {{1}}."


def test_a_witness_is_a_code_flow_with_values(log: dict[str, Any]) -> None:
    flow = result_of(log, "RB04", "fail")["codeFlows"][0]["threadFlows"][0]
    assert flow["initialState"] == {"q->head": {"text": "255"}}
    assert [step["executionOrder"] for step in flow["locations"]] == [1, 2, 3]
    assert [step.get("importance") for step in flow["locations"]] == [None, None, "essential"]
    assert flow["locations"][2]["state"] == {"q->head": {"text": "0"}, "slot": {"text": "0"}}
    assert flow["locations"][0]["location"]["message"]["text"] == "The command goes to slot 5"
    assert "codeFlows" not in result_of(log, "SM04", "fail")


def test_a_machine_is_a_graph(log: dict[str, Any]) -> None:
    graph = run_of(log)["graphs"][0]
    assert [node["id"] for node in graph["nodes"]] == ["AUGER_IDLE", "AUGER_FEEDING", "AUGER_JAM"]
    pairs = [(edge["sourceNodeId"], edge["targetNodeId"]) for edge in graph["edges"]]
    assert ("AUGER_JAM", "AUGER_JAM") in pairs
    assert len(pairs) == 5
    guarded = graph["edges"][1]
    assert guarded["label"]["text"] == r"wanted\[0\] > 2"
    assert guarded["properties"]["function"] == "auger_poll"
    properties = graph["properties"]
    assert properties["variable"] == "auger_state"
    assert properties["functions"] == ["auger_poll"]
    assert properties["initial"] == ["AUGER_IDLE"]
    assert (properties["form"], properties["uri"]) == ("switch", "feed/auger.c")
    assert properties["verdicts"] == {"pass": 1, "fail": 1, "open": 0, "review": 1}
    assert result_of(log, "SM04", "fail")["properties"]["machine"] == 0


def test_a_trap_is_a_walk_into_it(log: dict[str, Any]) -> None:
    traversal = result_of(log, "SM04", "fail")["graphTraversals"][0]
    assert traversal["runGraphIndex"] == 0
    edges = {edge["id"]: edge for edge in run_of(log)["graphs"][0]["edges"]}
    walked = [edges[step["edgeId"]] for step in traversal["edgeTraversals"]]
    assert [edge["targetNodeId"] for edge in walked] == ["AUGER_FEEDING", "AUGER_JAM", "AUGER_JAM"]
    assert traversal["initialState"] == {"auger_state": {"text": "AUGER_IDLE"}}
    assert traversal["edgeTraversals"][0]["message"]["text"] == (
        r"auger_poll goes from AUGER_IDLE to AUGER_FEEDING if wanted\[0\] > 2."
    )


def test_a_dead_state_is_a_walk_out_of_it(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    machine = outcome.program.machines[0]
    out_of_jam = replace(machine.transitions[4], target="AUGER_IDLE")
    dead = replace(machine, transitions=(*machine.transitions[:3], out_of_jam))
    changed = replace(outcome, program=replace(outcome.program, machines=(dead,)))
    made = sarif_log(changed)
    assert_sound(made, tmp_path)
    steps = result_of(made, "SM04", "fail")["graphTraversals"][0]["edgeTraversals"]
    assert [step["message"]["text"] for step in steps] == ["auger_poll goes from AUGER_JAM to AUGER_IDLE."]


def test_a_transition_to_a_name_that_is_no_state_gets_a_node(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    machine = outcome.program.machines[0]
    odd = replace(machine, transitions=(replace(machine.transitions[0], target="7"), *machine.transitions))
    made = sarif_log(replace(outcome, program=replace(outcome.program, machines=(odd,))))
    assert_sound(made, tmp_path)
    assert {"id": "7", "label": {"text": "7"}, "properties": {"listed": False}} in run_of(made)["graphs"][0]["nodes"]


def test_rings_and_coverage_stand_in_the_properties(log: dict[str, Any]) -> None:
    ring = run_of(log)["properties"]["rings"][0]
    assert ring["storage"] == "struct queue.slots"
    assert (ring["capacity"], ring["indices"]) == (10, ["head", "tail"])
    assert (ring["scheme"], ring["wrap"]) == ("difference", "free-running")
    assert (ring["uri"], ring["line"]) == ("shore%20commands%231.c", 1)
    assert ring["verdicts"] == {"pass": 0, "fail": 1, "open": 1}
    assert run_of(log)["properties"]["coverage"] == {
        "units": {"total": 2, "read": 2},
        "functions": {"total": 3, "read": 2},
    }


def test_rules_have_pages_messages_and_their_cwe_entries(log: dict[str, Any]) -> None:
    rules = run_of(log)["tool"]["driver"]["rules"]
    assert [rule["id"] for rule in rules] == ["RB04", "SM01", "SM04"]
    taxa = run_of(log)["taxonomies"][0]["taxa"]
    assert [taxon["id"] for taxon in taxa] == ["128", "478", "835", "1245"]
    kinds = {
        taxa[relation["target"]["index"]]["id"]: relation["kinds"]
        for rule in rules
        for relation in rule["relationships"]
    }
    assert kinds == {"128": ["superset"], "478": ["superset"], "835": ["superset"], "1245": ["relevant"]}
    assert rules[0]["defaultConfiguration"]["level"] == "error"
    assert rules[0]["shortDescription"]["text"].endswith("sequence {{a}}.")
    page = RULES[0].page()
    assert next(rule for rule in rules if rule["id"] == "SM01")["help"]["markdown"] == page.strip()


def test_notices_are_notifications_with_their_places(log: dict[str, Any]) -> None:
    invocation = run_of(log)["invocations"][0]
    assert invocation["executionSuccessful"] is True
    assert invocation["exitCode"] == 1
    texts = {one["descriptor"]["id"]: one["message"]["text"] for one in invocation["toolExecutionNotifications"]}
    assert texts == {
        "skipped-declaration": "A declaration could not be parsed.",
        "missing-header": "barge{{1}}.h was not found.",
    }
    place = invocation["toolExecutionNotifications"][0]["locations"][0]["physicalLocation"]
    assert (place["artifactLocation"]["uri"], place["region"]["startLine"]) == ("feed/auger.c", 3)
    configured = invocation["toolConfigurationNotifications"]
    assert [one["message"]["text"] for one in configured] == ["The compiler of feed/auger.c is not on PATH."]


def test_an_error_notice_means_that_the_work_was_not_done(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    failed = replace(outcome, notices=(Notice("nothing-to-read", "error", "No C was found"),))
    made = sarif_log(failed, exit_code=2)
    assert_sound(made, tmp_path)
    assert run_of(made)["invocations"][0]["executionSuccessful"] is False


def fingerprints_of(log: dict[str, Any]) -> list[str]:
    return [one["partialFingerprints"]["stepring/v1"] for one in run_of(log)["results"]]


def test_a_fingerprint_survives_lines_added_above_and_other_spacing(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    before = fingerprints_of(sarif_log(outcome))
    for name in ("feed/auger.c", "shore commands#1.c"):
        file = tmp_path / name
        file.write_text("\n\n" + file.read_text().replace("case AUGER_JAM:", "case  AUGER_JAM :"))
    moved = tuple(
        replace(one, where=replace(one.where, line=one.where.line + 2), related=(), witness=())
        for one in outcome.obligations
    )
    assert fingerprints_of(sarif_log(replace(outcome, obligations=moved))) == before


def test_a_fingerprint_does_not_depend_on_which_verdicts_are_written_or_what_they_are(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    every = run_of(sarif_log(outcome, EVERY_KIND))["results"]
    failing = [one["partialFingerprints"]["stepring/v1"] for one in every if one["kind"] == "fail"]
    assert fingerprints_of(sarif_log(outcome)) == failing
    opened = tuple(replace(one, kind="open", level=None) if one.kind == "fail" else one for one in outcome.obligations)
    changed = run_of(sarif_log(replace(outcome, obligations=opened), ("open",)))["results"]
    assert set(failing) <= {one["partialFingerprints"]["stepring/v1"] for one in changed}


def test_equal_lines_of_one_function_have_different_fingerprints(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    jam = next(one for one in outcome.obligations if one.rule == "SM04" and one.kind == "fail")
    auger = tmp_path / "feed" / "auger.c"
    twice = (
        replace(jam, where=spot(auger, 10, "break")),
        replace(jam, where=spot(auger, 13, "break")),
    )
    made = fingerprints_of(sarif_log(replace(outcome, obligations=twice)))
    assert len(set(made)) == 2


def test_a_file_outside_the_tree_has_its_own_base(tmp_path: Path) -> None:
    root, outside = tmp_path / "barge", tmp_path / "toolchain" / "avr.h"
    outside.parent.mkdir()
    outside.write_text("#define FULL 8\n")
    outcome = barge(root)
    jam = next(one for one in outcome.obligations if one.kind == "fail")
    made = sarif_log(replace(outcome, obligations=(replace(jam, where=Origin(str(outside), 1, 9, 13, "FULL")),)))
    assert_sound(made, root)
    place = run_of(made)["results"][0]["locations"][0]["physicalLocation"]["artifactLocation"]
    assert place["uriBaseId"] == "FILESYSTEM"
    assert "/" + place["uri"] == str(outside)


@pytest.mark.parametrize(
    ("where", "region"),
    [
        (Origin("feed/auger.c", 14, 0, 0), {"startLine": 14}),
        (Origin("feed/auger.c", 14, 7, 400), {"startLine": 14, "startColumn": 7, "endColumn": 17}),
        (Origin("feed/auger.c", 999, 1, 2), None),
        (Origin("feed/auger.c", 0, 0, 0), None),
        (Origin("gone.c", 3, 4, 8, "feed"), {"startLine": 3, "startColumn": 4, "endColumn": 8}),
    ],
)
def test_a_region_never_leaves_the_file(tmp_path: Path, where: Origin, region: dict[str, int] | None) -> None:
    outcome = barge(tmp_path)
    jam = next(one for one in outcome.obligations if one.rule == "SM04" and one.kind == "fail")
    made = sarif_log(replace(outcome, obligations=(replace(jam, where=where),)))
    assert_sound(made, tmp_path)
    place = run_of(made)["results"][0]["locations"][0]["physicalLocation"]
    shown = {name: number for name, number in place.get("region", {}).items() if name != "snippet"}
    assert (shown or None) == region


def test_a_very_long_line_is_not_copied_into_the_log(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    (tmp_path / "long.c").write_text("int x;" * 2_000_000)
    jam = next(one for one in outcome.obligations if one.rule == "SM04" and one.kind == "fail")
    long = replace(jam, where=Origin("long.c", 1, 6_000_005, 6_000_006, "x"))
    made = sarif_log(replace(outcome, obligations=(long,)))
    assert_sound(made, tmp_path)
    context = run_of(made)["results"][0]["locations"][0]["physicalLocation"]["contextRegion"]
    assert len(context["snippet"]["text"]) < 1000
    assert len(to_bytes(made)) < 200_000


def test_text_that_is_not_utf8_is_kept_as_bytes(tmp_path: Path) -> None:
    outcome = barge(tmp_path)
    (tmp_path / "latin.c").write_bytes(b"\xef\xbb\xbfint k\xf6der; /* feed */\r\nint pellets;\r\n")
    jam = next(one for one in outcome.obligations if one.rule == "SM04" and one.kind == "fail")
    made = sarif_log(replace(outcome, obligations=(replace(jam, where=Origin("latin.c", 1, 5, 10)),)))
    assert_sound(made, tmp_path)
    snippet = run_of(made)["results"][0]["locations"][0]["physicalLocation"]["region"]["snippet"]
    assert snippet == {"binary": "a/ZkZXI=", "rendered": {"text": "k\ufffdder"}}
    artifact = next(one for one in run_of(made)["artifacts"] if one["location"]["uri"] == "latin.c")
    assert "encoding" not in artifact


def test_a_rule_that_is_not_loaded_still_gets_a_descriptor(tmp_path: Path) -> None:
    outcome = replace(barge(tmp_path), rules=())
    made = sarif_log(outcome, EVERY_KIND)
    assert_sound(made, tmp_path)
    assert [rule["id"] for rule in run_of(made)["tool"]["driver"]["rules"]] == ["RB04", "SM01", "SM04"]
    assert "taxonomies" not in run_of(made)
