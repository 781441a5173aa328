"""A compile database is data from outside: real attacks through it, each with a control that shows that it would work.

The control runs the compiler as the database says; the tool must then preprocess the same entry without the file that
the control wrote.
"""

import json
import os
import shutil
import stat
import subprocess
from collections.abc import Callable
from pathlib import Path

import pytest

from stepring.gather.gather import gather
from stepring.read.preprocess import preprocess

GCC = shutil.which("gcc")
AVR_GCC = shutil.which("avr-gcc")
needs_gcc = pytest.mark.skipif(GCC is None, reason="no gcc on PATH")
SOURCE = "int hopper_weight;\n"


def make_tree(folder: Path) -> Path:
    tree = folder / "barge"
    (tree / "src").mkdir(parents=True)
    (tree / "src" / "hopper.c").write_text(SOURCE)
    return tree


def database(tree: Path, arguments: list[str], directory: str = ".") -> None:
    entry = {"directory": directory, "file": str(tree / "src/hopper.c"), "arguments": arguments}
    (tree / "compile_commands.json").write_text(json.dumps([entry]))


def program(path: Path, text: str) -> Path:
    path.write_text(text)
    path.chmod(path.stat().st_mode | stat.S_IXUSR)
    return path


def files(folder: Path) -> set[str]:
    return {path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()}


def plugin(tree: Path, mark: Path) -> Path:
    """A shared object that writes a file as soon as it is loaded."""
    source = tree / "plugin.txt"
    source.write_text(
        "#include <stdio.h>\n"
        "int plugin_is_GPL_compatible;\n"
        f'__attribute__((constructor)) static void mark(void) {{ fclose(fopen("{mark}", "w")); }}\n'
    )
    library = tree / "plugin.so"
    subprocess.run([str(GCC), "-shared", "-fPIC", "-x", "c", str(source), "-o", str(library)], check=True)
    return library


def attack_plugin(tree: Path, mark: Path) -> list[str]:
    return [f"-fplugin={plugin(tree, mark)}"]


def attack_wrapper(tree: Path, mark: Path) -> list[str]:
    script = program(tree / "wrap.sh", f'#!/bin/sh\ntouch "{mark}"\nexec "$@"\n')
    return ["-wrapper", str(script)]


def attack_prefix(tree: Path, mark: Path) -> list[str]:
    (tree / "tools").mkdir()
    program(tree / "tools" / "cc1", f'#!/bin/sh\ntouch "{mark}"\n')
    return ["-B", str(tree / "tools")]


def attack_joined_prefix(tree: Path, mark: Path) -> list[str]:
    first, second = attack_prefix(tree, mark)
    return [first + second]


def attack_specs(tree: Path, mark: Path) -> list[str]:
    specs = tree / "evil.specs"
    specs.write_text(f"*cpp:\n-MD {mark}\n\n")
    return [f"-specs={specs}"]


def attack_output(tree: Path, mark: Path) -> list[str]:
    return ["-o", os.path.relpath(mark, tree)]


def attack_joined_output(tree: Path, mark: Path) -> list[str]:
    return [f"-o{mark}"]


def attack_dependencies(tree: Path, mark: Path) -> list[str]:
    return ["-MD", "-MF", str(mark)]


def attack_handed_on(tree: Path, mark: Path) -> list[str]:
    return [f"-Wp,-MD,{mark}"]


def attack_handed_on_apart(tree: Path, mark: Path) -> list[str]:
    return ["-Xpreprocessor", "-MD", "-Xpreprocessor", str(mark)]


def attack_response_file(tree: Path, mark: Path) -> list[str]:
    (tree / "response").write_text(f"-MD -MF {mark}\n")
    return [f"@{tree / 'response'}"]


def attack_response_file_as_value(tree: Path, mark: Path) -> list[str]:
    (tree / "response").write_text(f"src -MD -MF {mark}\n")
    return ["-I", f"@{tree / 'response'}"]


def attack_temporaries(tree: Path, mark: Path) -> list[str]:
    return ["-save-temps=obj", "-o", str(mark)]


ATTACKS: list[Callable[[Path, Path], list[str]]] = [
    attack_plugin,
    attack_wrapper,
    attack_prefix,
    attack_joined_prefix,
    attack_specs,
    attack_output,
    attack_joined_output,
    attack_dependencies,
    attack_handed_on,
    attack_handed_on_apart,
    attack_response_file,
    attack_response_file_as_value,
    attack_temporaries,
]


@needs_gcc
@pytest.mark.parametrize("attack", ATTACKS, ids=lambda attack: attack.__name__)
@pytest.mark.parametrize("form", ["arguments", "command"])
def test_options_that_write_or_run_are_dropped(tmp_path: Path, attack: Callable[..., list[str]], form: str) -> None:
    tree = make_tree(tmp_path)
    mark = tmp_path / "mark"
    options = attack(tree, mark)
    arguments = ["gcc", *options, "-c", "src/hopper.c"]
    control = ["-E", "src/hopper.c"]
    subprocess.run([str(GCC), *options, *control], cwd=tree, capture_output=True, check=False)
    assert mark.exists(), "the attack does not work on this compiler, so the test would prove nothing"
    mark.unlink()
    database(tree, arguments)
    if form == "command":
        entry = json.loads((tree / "compile_commands.json").read_text())[0]
        entry["command"] = " ".join(entry.pop("arguments"))
        (tree / "compile_commands.json").write_text(json.dumps([entry]))
    before = files(tmp_path)

    gathered = gather([tree])
    assert len(gathered.units) == 1
    done = preprocess(gathered.units[0], data_model="LP64")

    assert files(tmp_path) == before
    assert SOURCE in done.text
    assert done.complete
    assert gathered.units[0].arguments[0] == GCC


@needs_gcc
@pytest.mark.parametrize("attack", [attack_plugin, attack_wrapper, attack_prefix, attack_specs, attack_handed_on])
def test_what_could_run_or_write_is_said(tmp_path: Path, attack: Callable[..., list[str]]) -> None:
    tree = make_tree(tmp_path)
    options = attack(tree, tmp_path / "mark")
    database(tree, ["gcc", *options, "-c", "src/hopper.c"])
    said = [notice for notice in gather([tree]).notices if notice.kind == "dropped-option"]
    assert len(said) == 1
    assert options[0].split("=")[0].split(",")[0] in said[0].text


@pytest.mark.skipif(AVR_GCC is None, reason="no avr-gcc on PATH")
@pytest.mark.parametrize("way", ["working folder", "sysroot"])
def test_a_spec_file_of_the_tree_is_not_read(tmp_path: Path, way: str) -> None:
    """The AVR driver looks for ``device-specs/specs-NAME`` in its working folder and under the sysroot."""
    tree = make_tree(tmp_path)
    mark = tmp_path / "mark"
    base = tree if way == "working folder" else tree / "lib"
    (base / "device-specs").mkdir(parents=True)
    script = program(tree / "wrap.sh", f'#!/bin/sh\n: > "{mark}"\nexec "$@"\n')
    (base / "device-specs" / "specs-feeder").write_text(f"*self_spec:\n%<mmcu=* -mmcu=avr5 -wrapper {script}\n\n")
    options = ["-mmcu=feeder"] + ([f"--sysroot={tree}"] if way == "sysroot" else [])
    elsewhere = tmp_path / "elsewhere"
    elsewhere.mkdir()
    subprocess.run(
        [str(AVR_GCC), *options, "-E", str(tree / "src/hopper.c")],
        cwd=tree if way == "working folder" else elsewhere,
        capture_output=True,
        check=False,
    )
    assert mark.exists(), "the attack does not work on this compiler, so the test would prove nothing"
    mark.unlink()
    database(tree, ["avr-gcc", *options, "-c", "src/hopper.c"])
    before = files(tmp_path)
    gathered = gather([tree])
    done = preprocess(gathered.units[0], data_model="IP16")
    assert files(tmp_path) == before
    # The device is unknown to the real driver, so the built-in preprocessor has to do the work.
    assert SOURCE in done.text


EVIL = '#!/bin/sh\ntouch "{mark}"\n'


def in_tree_absolute(tree: Path, mark: Path) -> tuple[str, str]:
    return str(program(tree / "gcc", EVIL.format(mark=mark))), ""


def in_tree_relative(tree: Path, mark: Path) -> tuple[str, str]:
    program(tree / "gcc", EVIL.format(mark=mark))
    return "./gcc", ""


def in_tree_by_link(tree: Path, mark: Path) -> tuple[str, str]:
    """A PATH entry outside of the tree whose program is a link into it."""
    program(tree / "gcc", EVIL.format(mark=mark))
    outside = tree.parent / "outside"
    outside.mkdir()
    (outside / "gcc").symlink_to(tree / "gcc")
    return "gcc", str(outside)


def in_tree_by_linked_folder(tree: Path, mark: Path) -> tuple[str, str]:
    program(tree / "gcc", EVIL.format(mark=mark))
    (tree.parent / "outside").symlink_to(tree)
    return "gcc", str(tree.parent / "outside")


def in_tree_on_path(tree: Path, mark: Path) -> tuple[str, str]:
    program(tree / "gcc", EVIL.format(mark=mark))
    return "gcc", str(tree)


def by_relative_path_entry(tree: Path, mark: Path) -> tuple[str, str]:
    program(tree / "gcc", EVIL.format(mark=mark))
    return "gcc", "."


def by_empty_path_entry(tree: Path, mark: Path) -> tuple[str, str]:
    program(tree / "gcc", EVIL.format(mark=mark))
    return "gcc", ""


def link_out_of_tree_and_back(tree: Path, mark: Path) -> tuple[str, str]:
    """A path that looks as if it lay outside."""
    program(tree / "gcc", EVIL.format(mark=mark))
    return f"{tree}/../{tree.name}/gcc", ""


@pytest.mark.parametrize(
    "place",
    [
        in_tree_absolute,
        in_tree_relative,
        in_tree_by_link,
        in_tree_by_linked_folder,
        in_tree_on_path,
        by_relative_path_entry,
        by_empty_path_entry,
        link_out_of_tree_and_back,
    ],
    ids=lambda place: place.__name__,
)
def test_a_program_of_the_tree_is_never_run(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, place: Callable[[Path, Path], tuple[str, str]]
) -> None:
    tree = make_tree(tmp_path)
    mark = tmp_path / "mark"
    name, search_path = place(tree, mark)
    subprocess.run([str(tree / "gcc")], check=True)
    assert mark.exists()
    mark.unlink()
    database(tree, [name, "-c", "src/hopper.c"])
    monkeypatch.chdir(tree)
    monkeypatch.setenv("PATH", search_path)

    gathered = gather([tree])
    assert [unit.arguments for unit in gathered.units] == [()]
    assert {notice.kind for notice in gathered.notices} <= {"refused-compiler", "missing-compiler"}
    assert len(gathered.notices) == 1
    done = preprocess(gathered.units[0], data_model="ILP32")

    assert not mark.exists()
    assert SOURCE in done.text


def test_a_named_compiler_inside_the_tree_is_refused(tmp_path: Path) -> None:
    tree = make_tree(tmp_path)
    evil = program(tree / "gcc", EVIL.format(mark=tmp_path / "mark"))
    database(tree, [str(evil), "-c", "src/hopper.c"])
    gathered = gather([tree], compilers=[str(evil)])
    assert [notice.kind for notice in gathered.notices] == ["refused-compiler"]
    assert gathered.units[0].arguments == ()


def test_a_named_compiler_outside_the_tree_is_run(tmp_path: Path) -> None:
    tree = make_tree(tmp_path)
    (tmp_path / "tools").mkdir()
    mark = tmp_path / "mark"
    vendor = program(tmp_path / "tools" / "feedcc-1", f'#!/bin/sh\n: > "{mark}"\nprintf "int from_vendor;\\n"\n')
    database(tree, ["feedcc-1", "-c", "src/hopper.c"])
    assert gather([tree]).units[0].arguments == ()
    gathered = gather([tree], compilers=[str(vendor)])
    assert gathered.units[0].arguments[0] == str(vendor)
    assert "int from_vendor;" in preprocess(gathered.units[0], data_model="ILP32").text


@pytest.mark.parametrize("name", ["bash", "python3", "sh", "perl", "/usr/bin/env", "make"])
def test_an_interpreter_is_no_compiler(tmp_path: Path, name: str) -> None:
    """``bash -E hopper.c`` would run the source file as a script."""
    tree = make_tree(tmp_path)
    (tree / "src/hopper.c").write_text("int x; /*\ntouch mark\n*/\n")
    database(tree, [name, "-c", "src/hopper.c"])
    gathered = gather([tree])
    assert [notice.kind for notice in gathered.notices] == ["refused-compiler"]
    assert gathered.units[0].arguments == ()


@needs_gcc
def test_the_environment_cannot_redirect_the_compiler(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    tree = make_tree(tmp_path)
    (tree / "src/hopper.c").write_text("#include <hopper_limits.h>\nint x = WEIGHT;\n")
    (tmp_path / "evil").mkdir()
    (tmp_path / "evil" / "hopper_limits.h").write_text("#define WEIGHT 666\n")
    database(tree, ["gcc", "-c", "src/hopper.c"])
    dependencies = tmp_path / "dependencies"
    monkeypatch.setenv("CPATH", str(tmp_path / "evil"))
    monkeypatch.setenv("DEPENDENCIES_OUTPUT", str(dependencies))
    monkeypatch.setenv("GCC_EXEC_PREFIX", str(tmp_path / "evil"))
    monkeypatch.setenv("COMPILER_PATH", str(tmp_path / "evil"))
    done = preprocess(gather([tree]).units[0], data_model="LP64")
    assert "666" not in done.text
    assert not dependencies.exists()
    assert "missing-header" in {notice.kind for notice in done.notices}


@needs_gcc
def test_nothing_goes_through_a_shell(tmp_path: Path) -> None:
    tree = make_tree(tmp_path)
    mark = tmp_path / "mark"
    hostile = [f"-DA=$(touch {mark})", f"-DB=`touch {mark}`", f"-I;touch {mark}", f"-DC=|touch {mark}"]
    database(tree, ["gcc", *hostile, "-c", "src/hopper.c"])
    done = preprocess(gather([tree]).units[0], data_model="LP64")
    assert not mark.exists()
    assert f"#define A $(touch {mark})" in done.text
