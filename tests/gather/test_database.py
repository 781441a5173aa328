"""Compile databases: both forms, relative paths, duplicates, and every way to be malformed."""

import json
import os
from pathlib import Path

import pytest

from stepring.gather.database import find_database
from stepring.gather.gather import gather
from stepring.gather.settings import Settings
from stepring.gather.types import Gathered


@pytest.fixture
def tree(tmp_path: Path) -> Path:
    for name in ("src/auger.c", "src/hopper.c", "src/shore link.c", "boot/start.s", "ui/panel.cpp"):
        (tmp_path / name).parent.mkdir(exist_ok=True)
        (tmp_path / name).write_text("int feed;\n")
    (tmp_path / "build").mkdir()
    return tmp_path


def write(tree: Path, entries: object, name: str = "build/compile_commands.json") -> Path:
    path = tree / name
    path.write_text(entries if isinstance(entries, str) else json.dumps(entries))
    return path


def entry(tree: Path, file: str = "src/auger.c", **members: object) -> dict[str, object]:
    return {"directory": str(tree), "file": file, "command": f'cc -c "{file}"', **members}


def sources(gathered: Gathered) -> list[str]:
    return [unit.source.relative_to(gathered.root).as_posix() for unit in gathered.units]


def kinds(gathered: Gathered) -> list[str]:
    return [notice.kind for notice in gathered.notices]


def test_both_forms_say_the_same(tree: Path) -> None:
    command = {"directory": "..", "file": "src/auger.c", "command": r"cc -Iinc -DNAME=\"barge\" -c src/auger.c -o x.o"}
    arguments = {
        "directory": "..",
        "file": "../" + tree.name + "/src/auger.c",
        "arguments": ["cc", "-Iinc", '-DNAME="barge"', "-c", "src/auger.c", "-o", "y.o"],
    }
    write(tree, [command])
    first = gather([tree])
    write(tree, [arguments])
    second = gather([tree])
    assert first.units == second.units
    assert sources(first) == ["src/auger.c"]
    assert first.notices == ()
    unit = first.units[0]
    assert unit.kind == "database"
    assert unit.directory == tree
    assert unit.arguments[1:] == (f"-I{tree}/inc", '-DNAME="barge"')
    assert unit.defines == ('NAME="barge"',)


def test_relative_directory_counts_from_the_database(tree: Path) -> None:
    write(tree, [{"directory": ".", "file": "../src/auger.c", "command": "cc -I../inc -c ../src/auger.c"}])
    unit = gather([tree]).units[0]
    assert unit.source == tree / "src/auger.c"
    assert unit.include_folders == (tree / "inc",)


def test_one_file_built_in_two_ways_is_two_units(tree: Path) -> None:
    write(
        tree,
        [
            entry(tree, command="cc -DSHORE=1 -c src/auger.c -o a.o"),
            entry(tree, command="cc -DSHORE=2 -c src/auger.c -o b.o"),
            entry(tree, command="cc -DSHORE=1 -O0 -Wall -c src/auger.c -o c.o"),
            entry(tree, command="cc -DSHORE=1 -c src/auger.c -o d.o"),
            entry(tree, command="cc -DSHORE=1 -Wall -g -c src/auger.c -o e.o"),
        ],
    )
    assert [unit.arguments[1:] for unit in gather([tree]).units] == [
        ("-DSHORE=1",),
        ("-DSHORE=1", "-O0"),
        ("-DSHORE=2",),
    ]


def test_sources_that_are_not_c_are_passed_over_silently(tree: Path) -> None:
    write(
        tree,
        [
            entry(tree),
            entry(tree, "boot/start.s"),
            entry(tree, "ui/panel.cpp", command="c++ -c ui/panel.cpp"),
            entry(tree, "src/hopper.c", command="cc -x c++ -c src/hopper.c"),
        ],
    )
    gathered = gather([tree])
    assert sources(gathered) == ["src/auger.c"]
    assert gathered.notices == ()


def test_a_source_named_as_c_by_option(tree: Path) -> None:
    (tree / "src/table.inc").write_text("int table;\n")
    write(tree, [entry(tree, "src/table.inc", command="cc -x c -c src/table.inc")])
    unit = gather([tree]).units[0]
    assert unit.source.name == "table.inc"
    assert unit.arguments[-2:] == ("-x", "c")


def test_a_launcher_in_front_of_the_compiler(tree: Path) -> None:
    write(tree, [entry(tree, command="launcher cc -DA -c src/auger.c")])
    plain = gather([tree])
    assert plain.units[0].arguments[1:] == ("-DA",)
    assert Path(plain.units[0].arguments[0]).name == "cc"


@pytest.mark.parametrize(
    ("text", "line", "part"),
    [
        ("[\n {},\n {]\n", 3, "not JSON"),
        ("", 1, "not JSON"),
        ('{"directory": "."}', 1, "list of entries"),
        ("[]", 1, "empty"),
        ("[" * 100_000, None, "nested too deeply"),
        ("3", 1, "list of entries"),
    ],
)
def test_a_malformed_database_gives_one_notice_with_its_line(
    tree: Path, text: str, line: int | None, part: str
) -> None:
    path = write(tree, text)
    gathered = gather([], database=path, current=tree)
    first = gathered.notices[0]
    assert (first.kind, first.level, first.line) == ("bad-database", "error", line)
    assert part in first.text
    assert first.file == str(path)


def test_a_database_that_is_not_utf_8(tree: Path) -> None:
    path = tree / "build/compile_commands.json"
    path.write_bytes(b'[\n{"file": "\xff"}]')
    first = gather([], database=path, current=tree).notices[0]
    assert (first.kind, first.line) == ("bad-database", 2)


def test_a_database_that_does_not_exist(tree: Path) -> None:
    first = gather([], database=tree / "nowhere.json", current=tree).notices[0]
    assert (first.kind, first.level) == ("bad-database", "error")
    assert "no such file" in first.text


@pytest.mark.parametrize(
    "broken",
    [
        7,
        None,
        [],
        {},
        {"directory": ".", "command": "cc -c src/hopper.c"},
        {"file": "src/hopper.c", "command": "cc -c src/hopper.c"},
        {"file": "src/hopper.c", "directory": "."},
        {"file": "src/hopper.c", "directory": ".", "arguments": []},
        {"file": "src/hopper.c", "directory": ".", "arguments": "cc"},
        {"file": "src/hopper.c", "directory": ".", "arguments": ["cc", 3]},
        {"file": "src/hopper.c", "directory": ".", "command": "  "},
        {"file": 3, "directory": ".", "command": "cc"},
        {"file": "src/hopper.c", "directory": 3, "command": "cc"},
        {"file": "src/hop\0per.c", "directory": ".", "command": "cc"},
        {"file": "src/hopper.c", "directory": ".", "command": "cc -D\ud800"},
    ],
)
def test_a_broken_entry_costs_that_entry(tree: Path, broken: object) -> None:
    write(tree, [entry(tree), broken])
    gathered = gather([tree])
    assert sources(gathered) == ["src/auger.c"]
    assert kinds(gathered) == ["bad-database"]
    assert "entry 2" in gathered.notices[0].text


def test_missing_and_unreadable_files_cost_their_unit(tree: Path) -> None:
    (tree / "src/wide.c").write_bytes("int x;\n".encode("utf-16"))
    os.mkfifo(tree / "src/pipe.c")
    write(tree, [entry(tree, name) for name in ("src/auger.c", "src/gone.c", "src/wide.c", "src/pipe.c")])
    gathered = gather([tree])
    assert sources(gathered) == ["src/auger.c"]
    assert sorted(kinds(gathered)) == ["not-text", "unreadable-file", "unreadable-file"]


def test_a_missing_compiler_is_said_once(tree: Path) -> None:
    names = ["src/auger.c", "src/hopper.c"]
    write(tree, [entry(tree, name, command=f"/opt/lost/bin/lost-feeder-gcc -DA -mmcu=x9 -c {name}") for name in names])
    gathered = gather([tree])
    assert kinds(gathered) == ["missing-compiler"]
    assert "/opt/lost/bin/lost-feeder-gcc" in gathered.notices[0].text
    # What the entry says is still of use without the compiler.
    assert [(unit.arguments, unit.defines, unit.data_model) for unit in gathered.units] == [((), ("A=1",), "IP16")] * 2


def test_only_what_lies_under_the_named_paths(tree: Path) -> None:
    (tree / "lib").mkdir()
    (tree / "lib/ring.c").write_text("int ring;\n")
    write(tree, [entry(tree), entry(tree, "src/hopper.c"), entry(tree, "lib/ring.c")])
    assert sources(gather([tree])) == ["lib/ring.c", "src/auger.c", "src/hopper.c"]
    database = tree / "build/compile_commands.json"
    assert len(gather([tree / "lib"], database=database).units) == 1
    assert [unit.source.name for unit in gather([tree / "src/hopper.c"], database=database).units] == ["hopper.c"]
    assert len(gather([], database=database, current=tree / "build").units) == 3


def test_a_path_by_way_of_a_link(tree: Path) -> None:
    write(tree, [entry(tree)])
    (tree / "link").symlink_to(tree / "src")
    database = tree / "build/compile_commands.json"
    assert [unit.source.name for unit in gather([tree / "link"], database=database).units] == ["auger.c"]


def test_a_named_source_that_the_database_lacks_is_read_by_itself(tree: Path) -> None:
    (tree / ".git").mkdir()
    (tree / "inc").mkdir()
    (tree / "inc/feed.h").write_text("extern int feed;\n")
    (tree / "src/hopper.c").write_text('#include "feed.h"\nint weight;\n')
    write(tree, [entry(tree)])
    gathered = gather([tree / "src/hopper.c"])
    assert [(unit.source.name, unit.kind) for unit in gathered.units] == [("hopper.c", "source")]
    assert gathered.units[0].include_folders == (tree / "inc",)
    assert gathered.root == tree


@pytest.mark.parametrize("place", [".", "build", "Build", "out", "builddir", "cmake-build-debug", "build/native"])
def test_where_a_database_is_looked_for(tmp_path: Path, place: str) -> None:
    (tmp_path / place).mkdir(parents=True, exist_ok=True)
    (tmp_path / place / "compile_commands.json").write_text("[]")
    assert find_database(tmp_path) == tmp_path / place / "compile_commands.json"


def test_parents_up_to_the_repository(tmp_path: Path) -> None:
    (tmp_path / "compile_commands.json").write_text("[]")
    (tmp_path / "repository/src/deep").mkdir(parents=True)
    assert find_database(tmp_path / "repository/src/deep") is None
    (tmp_path / "repository/.git").mkdir()
    assert find_database(tmp_path / "repository/src/deep") is None
    (tmp_path / "repository/compile_commands.json").write_text("[]")
    found = find_database(tmp_path / "repository/src/deep")
    assert found == tmp_path / "repository/compile_commands.json"


def test_excluded_sources(tree: Path) -> None:
    write(tree, [entry(tree), entry(tree, "src/hopper.c")])
    settings = Settings(exclude=("src/hop*",), folder=tree)
    assert sources(gather([tree], settings=settings)) == ["src/auger.c"]


def test_the_settings_name_the_database(tree: Path) -> None:
    (tree / "elsewhere").mkdir()
    path = write(tree, [entry(tree)], "elsewhere/units.json")
    settings = Settings(compile_commands=path, folder=tree)
    assert sources(gather([], settings=settings, current=tree)) == ["src/auger.c"]


def test_a_named_folder_that_the_database_does_not_reach_is_read_by_itself(tree: Path) -> None:
    (tree / "lib").mkdir()
    (tree / "lib/ring.c").write_text("int ring;\n")
    (tree / "link").symlink_to(tree / "src")
    database = write(tree, [entry(tree)])
    gathered = gather([tree / "lib", tree / "link"], database=database)
    assert [(unit.source.name, unit.kind) for unit in gathered.units] == [("ring.c", "source"), ("auger.c", "database")]


def test_a_broken_database_leaves_the_folder(tree: Path) -> None:
    write(tree, "{")
    gathered = gather([tree])
    assert kinds(gathered) == ["bad-database"]
    assert sources(gathered) == ["src/auger.c", "src/hopper.c", "src/shore link.c"]
