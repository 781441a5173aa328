"""Folders without a database."""

import os
import time
from pathlib import Path

import pytest

from stepring.gather.gather import gather
from stepring.gather.settings import Settings
from stepring.gather.tree import walk_tree


def lay(folder: Path, **files: str) -> None:
    for name, text in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text)


def relative(folder: Path, paths: tuple[Path, ...]) -> list[str]:
    return [path.relative_to(folder).as_posix() for path in paths]


def test_every_source_in_a_fixed_order(tmp_path: Path) -> None:
    lay(
        tmp_path,
        **{
            "src/b.c": "",
            "src/a.c": "",
            "main.c": "",
            "src.c": "",
            ".hidden/x.c": "",
            "build/generated.c": "",
            "cmake-build-debug/x.c": "",
            "objects/CMakeCache.txt": "",
            "objects/x.c": "",
            "readme.md": "",
            "panel.cpp": "",
        },
    )
    gathered = gather([tmp_path])
    names = [unit.source.relative_to(tmp_path).as_posix() for unit in gathered.units]
    assert names == ["main.c", "src.c", "src/a.c", "src/b.c"]
    assert gathered.root == tmp_path
    assert gathered.notices == ()
    assert gather([tmp_path]) == gathered


def test_include_folders_are_inferred(tmp_path: Path) -> None:
    lay(
        tmp_path,
        **{
            "app/main.c": '#include "beside.h"\n#include "feed/auger.h"\n#include <hal/adc.h>\n#include <stdint.h>\n',
            "app/beside.h": "",
            "lib/include/feed/auger.h": '#include "weight.h"\n',
            "lib/weights/weight.h": "",
            "ports/avr/hal/adc.h": "",
            "other/stdint.h": "",
        },
    )
    unit = gather([tmp_path]).units[0]
    assert relative(tmp_path, unit.include_folders) == ["lib/include", "lib/weights", "ports/avr"]


def test_the_nearest_variant_is_taken(tmp_path: Path) -> None:
    files: dict[str, str] = {}
    for board in ("barge_a", "barge_b", "barge_c"):
        files[f"demo/{board}/main.c"] = '#include "port.h"\n#include "core.h"\n'
        files[f"demo/{board}/port/port.h"] = ""
    files["core/core.h"] = '#include "port.h"\n'
    files["core/core.c"] = '#include "core.h"\n'
    lay(tmp_path, **files)
    units = {unit.source.relative_to(tmp_path).as_posix(): unit for unit in gather([tmp_path]).units}
    for board in ("barge_a", "barge_b", "barge_c"):
        folders = relative(tmp_path, units[f"demo/{board}/main.c"].include_folders)
        assert folders == [f"demo/{board}/port", "core"]


def test_of_variants_that_are_all_far_the_one_that_can_be_read(tmp_path: Path) -> None:
    lay(
        tmp_path,
        **{
            "src/core/queue.c": '#include "arch/port.h"\n',
            "contrib/ports/lost/include/arch/port.h": "#include <vendor_kernel.h>\n",
            "contrib/ports/plain/include/arch/port.h": "#include <stdint.h>\n",
        },
    )
    unit = gather([tmp_path]).units[0]
    assert relative(tmp_path, unit.include_folders) == ["contrib/ports/plain/include"]


def test_letter_case_and_backslashes(tmp_path: Path) -> None:
    lay(tmp_path, **{"src/a.c": '#include "Inc\\Feed.h"\n', "lib/inc/feed.h": ""})
    assert relative(tmp_path, gather([tmp_path]).units[0].include_folders) == ["lib"]


def test_headers_of_a_library_suggest_the_data_model(tmp_path: Path) -> None:
    lay(tmp_path, **{"a.c": '#include "pins.h"\n', "pins.h": "#include <avr/io.h>\n", "b.c": "#include <stdint.h>\n"})
    assert [unit.data_model for unit in gather([tmp_path]).units] == ["IP16", None]


def test_link_loops_end(tmp_path: Path) -> None:
    lay(tmp_path, **{"src/a.c": "", "src/deep/b.c": ""})
    (tmp_path / "src/loop").symlink_to(tmp_path)
    (tmp_path / "src/deep/up").symlink_to("..")
    (tmp_path / "src/self.c").symlink_to("self.c")
    (tmp_path / "everything").symlink_to("/")
    assert [unit.source.name for unit in gather([tmp_path]).units] == ["a.c", "b.c"]


def test_what_is_not_text_is_said(tmp_path: Path) -> None:
    (tmp_path / "zeros.c").write_bytes(b"int x;\0\0\n")
    (tmp_path / "wide.c").write_bytes("int x;\n".encode("utf-16-le"))
    (tmp_path / "marked.c").write_bytes(b"\xff\xfei\0n\0t\0")
    (tmp_path / "latin.c").write_bytes(b"int x; /* \xe9 */\n")
    (tmp_path / "bom.c").write_bytes(b"\xef\xbb\xbfint x;\n")
    gathered = gather([tmp_path])
    assert [unit.source.name for unit in gathered.units] == ["bom.c", "latin.c"]
    assert [notice.kind for notice in gathered.notices] == ["not-text"] * 3


@pytest.mark.skipif(os.geteuid() == 0, reason="root reads everything")
def test_an_unreadable_folder_and_file(tmp_path: Path) -> None:
    lay(tmp_path, **{"a.c": "", "shut.c": "", "shut/b.c": ""})
    (tmp_path / "shut").chmod(0)
    (tmp_path / "shut.c").chmod(0)
    try:
        gathered = gather([tmp_path])
    finally:
        (tmp_path / "shut").chmod(0o700)
    assert [unit.source.name for unit in gathered.units] == ["a.c"]
    assert [notice.kind for notice in gathered.notices] == ["unreadable-file"] * 2


def test_devices_and_pipes_are_no_sources(tmp_path: Path) -> None:
    lay(tmp_path, **{"a.c": ""})
    os.mkfifo(tmp_path / "pipe.c")
    (tmp_path / "zero.c").symlink_to("/dev/zero")
    assert [unit.source.name for unit in gather([tmp_path]).units] == ["a.c"]
    for name in ("pipe.c", "zero.c"):
        gathered = gather([tmp_path / name])
        assert gathered.units == ()
        assert {notice.kind for notice in gathered.notices} == {"unreadable-file", "nothing-to-read"}


def test_named_files(tmp_path: Path) -> None:
    lay(tmp_path, **{"src/a.c": '#include "a.h"\n', "include/a.h": "", "b.i": "int b;\n", "note.txt": ""})
    gathered = gather([tmp_path / "src/a.c", tmp_path / "b.i", tmp_path / "note.txt", tmp_path / "gone.c"])
    assert [(unit.source.name, unit.kind) for unit in gathered.units] == [("b.i", "preprocessed"), ("a.c", "source")]
    assert relative(tmp_path, gathered.units[1].include_folders) == ["include"]
    assert [(notice.kind, notice.level) for notice in gathered.notices] == [("unreadable-file", "error")] * 2
    assert gathered.root == tmp_path


def test_no_path_means_the_current_folder(tmp_path: Path) -> None:
    lay(tmp_path, **{"a.c": ""})
    assert [unit.source for unit in gather([], current=tmp_path).units] == [tmp_path / "a.c"]


def test_nothing_to_read(tmp_path: Path) -> None:
    gathered = gather([tmp_path])
    assert [(notice.kind, notice.level) for notice in gathered.notices] == [("nothing-to-read", "error")]


def test_excluded_folders(tmp_path: Path) -> None:
    lay(tmp_path, **{"a.c": "", "vendor/b.c": "", "src/vendor/c.c": "", "src/d_test.c": ""})
    assert [unit.source.name for unit in gather([tmp_path], settings=_settings(tmp_path, "vendor")).units] == [
        "a.c",
        "d_test.c",
    ]
    assert len(gather([tmp_path], settings=_settings(tmp_path, "vendor/**")).units) == 3
    assert len(gather([tmp_path], settings=_settings(tmp_path, "*_test.c")).units) == 3
    assert len(gather([tmp_path / "src"], settings=_settings(tmp_path, "src/vendor")).units) == 1


def _settings(folder: Path, *globs: str) -> Settings:
    return Settings(exclude=globs, folder=folder)


def test_a_large_tree_takes_time_in_proportion(tmp_path: Path) -> None:
    """Twice the files may not take four times as long (generous, as machines differ)."""

    def tree(name: str, modules: int) -> float:
        base = tmp_path / name
        for number in range(modules):
            folder = base / f"m{number}"
            folder.mkdir(parents=True)
            for part in range(5):
                (folder / f"s{part}.c").write_text(f'#include "m{number}.h"\n#include "m{(number * 7) % modules}.h"\n')
            (folder / f"m{number}.h").write_text("#include <stdint.h>\n")
        start = time.process_time()
        tree = walk_tree(base)
        for source in tree.sources:
            tree.include_folders(source)
        return time.process_time() - start

    tree("warm", 20)
    small, large = tree("small", 100), tree("large", 400)
    assert large < 12 * small + 1.0
