"""Real C from the package index: read whole, and its machines have the states that its enumerations declare.

The source distributions are downloaded by pip once and kept in pytest's cache folder. Without a network there is
nothing to compare with, and the tests say so and are left out.
"""

import re
import shutil
import subprocess
import sys
import tarfile
from pathlib import Path

import pytest
from tests.marks import steps

from stepring.pipeline import Options, inspect
from stepring.report.types import Outcome
from stepring.shapes.types import Machine


@pytest.fixture(scope="session")
def cache(request: pytest.FixtureRequest) -> Path:
    return Path(request.config.cache.mkdir("source-distributions"))  # type: ignore[union-attr]


def unpacked(cache: Path, name: str, version: str) -> Path:
    """The folder of a source distribution, downloaded if it is not there yet."""
    folder = cache / f"{name}-{version}"
    if folder.exists():
        return folder
    target = cache / f"{name}-{version}.download"
    command = [sys.executable, "-m", "pip", "download", "--quiet", "--no-deps", "--no-binary", ":all:"]
    ended = subprocess.run(
        [*command, "--disable-pip-version-check", "--dest", str(target), f"{name}=={version}"],
        capture_output=True,
        text=True,
        check=False,
    )
    archives = list(target.glob("*.tar.gz"))
    if not archives:
        pytest.skip(
            f"the source distribution of {name} {version} could not be downloaded: {ended.stderr.strip()[-300:]}"
        )
    with tarfile.open(archives[0]) as archive:
        archive.extractall(target, filter="data")
    target.rename(folder)
    return folder


def read_whole(folder: Path) -> Outcome:
    """Inspect a folder with the built-in preprocessor: every function has to be read and no declaration skipped."""
    outcome = inspect([folder], Options(use_compiler=False))
    about_headers = [re.search(r"was not found|#error", notice.text) is not None for notice in outcome.notices]
    assert all(about_headers), outcome.notices
    assert all(notice.level == "note" for notice in outcome.notices)
    assert outcome.coverage.units_read == outcome.coverage.units_total > 0
    assert outcome.coverage.functions_read == outcome.coverage.functions_total
    return outcome


def enumerators(header: Path, last_word: str, first_word: str = "") -> list[str]:
    """The enumerators between braces that come before or after a name, by a plain search of the text."""
    text = re.sub(r"/\*.*?\*/|//[^\n]*", "", header.read_text(encoding="utf-8"), flags=re.DOTALL)
    start = rf"enum\s+{first_word}\s*" if first_word else r"enum\s*\w*\s*"
    found = re.search(rf"{start}\{{([^{{}}]*)\}}\s*{last_word}", text)
    assert found, header
    return re.findall(r"([A-Za-z_]\w*)\s*(?:=[^,]*)?(?:,|$)", found[1].strip())


def the_machine(outcome: Outcome, member: str) -> Machine:
    (machine,) = [machine for machine in outcome.program.machines if machine.variable.endswith(member)]
    return machine


def test_the_inflate_machine_has_the_31_modes_of_its_enumeration(cache: Path) -> None:
    source = next(unpacked(cache, "zlib-ng", "1.1.0").rglob("inflate.h")).parent
    assert_inflate(read_whole(source), source)


def test_the_inflate_machine_with_the_headers_made_from_their_templates(cache: Path, tmp_path: Path) -> None:
    """Its public headers are templates with one name to fill in, a prefix of all symbols that is empty by default."""
    source = next(unpacked(cache, "zlib-ng", "1.1.0").rglob("inflate.h")).parent
    for path in [*source.glob("infl*.[ch]"), *source.glob("z*.[ch]"), *source.glob("*_p.h"), *source.glob("inf*.h")]:
        shutil.copy(path, tmp_path)
    for name in ("zlib-ng.h", "zconf-ng.h"):
        text = (source / f"{name}.in").read_text(encoding="utf-8")
        (tmp_path / name).write_text(text.replace("@ZLIB_SYMBOL_PREFIX@", ""), encoding="utf-8")
    shutil.copy(source / "zlib_name_mangling.h.empty", tmp_path / "zlib_name_mangling-ng.h")
    assert_inflate(read_whole(tmp_path), source)


def assert_inflate(outcome: Outcome, source: Path) -> None:
    modes = enumerators(source / "inflate.h", "inflate_mode")
    assert (len(modes), modes[0], modes[-1]) == (31, "HEAD", "SYNC")
    machine = the_machine(outcome, "inflate_state.mode")
    assert [state.name for state in machine.states] == modes
    assert [state.value for state in machine.states] == list(
        range(machine.states[0].value, machine.states[0].value + 31)
    )
    assert all(state.labelled and state.declared for state in machine.states)
    # Stored blocks (RFC 1951 section 3.2.4): a block's type, then its length, then its bytes, then the next block.
    assert {("TYPEDO", "STORED"), ("STORED", "COPY_"), ("COPY_", "COPY"), ("COPY", "TYPE")} <= steps(machine)
    assert {("CHECK", "LENGTH"), ("LENGTH", "DONE"), ("HEAD", "BAD")} <= steps(machine)


def test_the_yaml_parser_and_emitter_have_the_states_of_their_enumerations(cache: Path) -> None:
    source = next(unpacked(cache, "ruamel.yaml.clib", "0.2.15").rglob("yaml.h")).parent
    outcome = read_whole(source)
    for member, name, count in (("yaml_parser_s.state", "parser", 24), ("yaml_emitter_s.state", "emitter", 18)):
        declared = enumerators(source / "yaml.h", f"yaml_{name}_state_t")
        assert len(declared) == count
        machine = the_machine(outcome, member)
        assert [state.name for state in machine.states] == declared
        # The parser returns to states that it keeps on a stack, so that not every store is of a known state.
        assert not machine.complete
        assert "states.top" in machine.why_incomplete[0]
    parser = the_machine(outcome, "yaml_parser_s.state")
    assert parser.initial == ("YAML_PARSE_STREAM_START_STATE",)
    assert ("YAML_PARSE_STREAM_START_STATE", "YAML_PARSE_IMPLICIT_DOCUMENT_START_STATE") in steps(parser)
    assert "YAML_PARSE_END_STATE" in {target for _, target in steps(parser)}


def test_the_http_parser_has_the_states_of_its_enumerations(cache: Path) -> None:
    source = next(unpacked(cache, "http-parser", "0.9.0").rglob("http_parser.c")).parent
    outcome = read_whole(source)
    declared = enumerators(source / "http_parser.c", ";", "state")
    assert len(declared) == 58
    machine = the_machine(outcome, "http_parser.state")
    assert [state.name for state in machine.states] == declared
    assert {state.name for state in machine.states if state.labelled} >= {"s_dead", "s_header_field", "s_message_done"}
    header = the_machine(outcome, "http_parser.header_state")
    assert [state.name for state in header.states] == enumerators(source / "http_parser.c", ";", "header_states")
