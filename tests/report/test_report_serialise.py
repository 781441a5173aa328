"""From the object model to bytes."""

import os
from pathlib import Path

import attr
import pytest
import sarif_om as om

from stepring.report.serialise import Suppression, log_to_json, to_bytes, to_json, write_whole


def test_defaults_that_mean_absent_are_left_out() -> None:
    assert to_json(om.ArtifactLocation(uri="a.c")) == {"uri": "a.c"}
    assert to_json(om.GraphTraversal(run_graph_index=0)) == {"runGraphIndex": 0}
    assert to_json(om.ToolComponent(name="stepring")) == {"name": "stepring"}


def test_an_index_of_zero_and_false_are_written() -> None:
    assert to_json(om.ArtifactLocation(index=0)) == {"index": 0}
    assert to_json(om.Invocation(execution_successful=False)) == {"executionSuccessful": False}


def test_level_and_kind_are_written_although_they_are_defaults() -> None:
    written = to_json(om.Result(message=om.Message(text="x"), kind="fail", level="warning"))
    assert written == {"message": {"text": "x"}, "kind": "fail", "level": "warning"}


def test_a_level_of_none_is_left_out() -> None:
    assert "level" not in dict(to_json(om.Result(message=om.Message(text="x"), level=None)))  # type: ignore[arg-type]


def test_property_bags_are_written_as_they_are() -> None:
    bag = {"capacity": None, "verdicts": {"fail": 0}, "list": [(1, 2)]}
    assert to_json(om.Graph(properties=bag)) == {
        "properties": {"capacity": None, "verdicts": {"fail": 0}, "list": [[1, 2]]}
    }


def test_every_object_of_the_model_names_its_members_as_the_standard_does() -> None:
    objects = [one for one in vars(om).values() if attr.has(one)]
    assert len(objects) > 50
    for one in objects:
        for field in attr.fields(one):
            assert field.metadata.get("schema_property_name") or field.name in ("tags",), (one, field.name)


def test_a_suppression_has_the_member_of_the_standard() -> None:
    made = Suppression(kind="external", status="accepted", justification="The barge has one auger.")
    assert to_json(made) == {"kind": "external", "status": "accepted", "justification": "The barge has one auger."}


def test_schema_and_version_come_first() -> None:
    made = log_to_json(om.SarifLog(runs=[], version="2.1.0", properties={"a": 1}))
    assert list(made) == ["$schema", "version", "runs", "properties"]


def test_bytes_are_utf8_with_a_line_end_and_nothing_that_json_does_not_know() -> None:
    assert to_bytes({"text": "Größe"}) == '{\n  "text": "Größe"\n}\n'.encode()
    with pytest.raises(UnicodeEncodeError):
        to_bytes({"text": "\udcff"})
    with pytest.raises(ValueError, match="Out of range"):
        to_bytes({"number": float("nan")})


def test_a_file_is_replaced_whole_and_keeps_its_permissions(tmp_path: Path) -> None:
    target = tmp_path / "log.sarif"
    target.write_text("old")
    target.chmod(0o640)
    write_whole(target, b"new")
    assert target.read_bytes() == b"new"
    assert target.stat().st_mode & 0o777 == 0o640
    assert list(tmp_path.iterdir()) == [target]


def test_a_new_file_has_the_usual_permissions(tmp_path: Path) -> None:
    old = os.umask(0o027)
    try:
        write_whole(tmp_path / "log.sarif", b"new")
    finally:
        os.umask(old)
    assert (tmp_path / "log.sarif").stat().st_mode & 0o777 == 0o640


def test_what_cannot_be_written_leaves_no_trace(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    target = tmp_path / "log.sarif"
    target.write_text("old")

    def full_disk(_: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full_disk)
    with pytest.raises(OSError, match="No space left"):
        write_whole(target, b"new")
    assert target.read_text() == "old"
    assert list(tmp_path.iterdir()) == [target]


def test_a_folder_as_target_is_refused_and_left_alone(tmp_path: Path) -> None:
    with pytest.raises(OSError, match=r"[Dd]irectory"):
        write_whole(tmp_path, b"new")
    assert list(tmp_path.iterdir()) == []


def test_a_link_stays_a_link(tmp_path: Path) -> None:
    (tmp_path / "real.sarif").write_text("old")
    (tmp_path / "link.sarif").symlink_to("real.sarif")
    write_whole(tmp_path / "link.sarif", b"new")
    assert (tmp_path / "link.sarif").is_symlink()
    assert (tmp_path / "real.sarif").read_bytes() == b"new"
