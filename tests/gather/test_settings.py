"""``stepring.toml``."""

from pathlib import Path

import pytest

from stepring.gather.settings import Settings, find_settings, read_settings


def settings(tmp_path: Path, text: str | bytes) -> tuple[Settings, list[tuple[str, int | None, str]]]:
    path = tmp_path / "stepring.toml"
    path.write_bytes(text if isinstance(text, bytes) else text.encode())
    read, notices = read_settings(path)
    assert all(notice.kind == "bad-settings" and notice.file == str(path) for notice in notices)
    return read, [(notice.level, notice.line, notice.text) for notice in notices]


def test_all_keys(tmp_path: Path) -> None:
    read, notices = settings(
        tmp_path,
        '[inspect]\nexclude = ["vendor", "*_test.c"]\ndata-model = "IP16"\n'
        'compile-commands = "build/units.json"\nfail-level = "note"\n',
    )
    assert notices == []
    assert read == Settings(("vendor", "*_test.c"), "IP16", tmp_path / "build/units.json", "note", tmp_path)


def test_an_empty_file(tmp_path: Path) -> None:
    assert settings(tmp_path, "") == (Settings(folder=tmp_path), [])


@pytest.mark.parametrize(
    ("text", "line", "part"),
    [
        ("[inspect]\nexclude = [\n", 3, "none of its settings"),
        ("[inspect]\n\nexclude == 3\n", 3, "none of its settings"),
        ("[inspect\n", 1, "none of its settings"),
        ("[inspect]\nfail-level = 'loud'\n", 2, "fail-level has to be one of"),
        ("[inspect]\n\nexclude = 'vendor'\n", 3, "exclude has to be a list"),
        ("[inspect]\nexclude = [1]\n", 2, "exclude has to be a list"),
        ("[inspect]\ndata-model = 4\n", 2, "data-model has to be"),
        ("[inspect]\ncompile-commands = ['a']\n", 2, "compile-commands has to be"),
        ("# feed\n[inspect]\ncolour = 'red'\n", 3, "'colour' is not known"),
        ("\n[paint]\nx = 1\n", 2, "'paint' is not known"),
        ("inspect = 3\n", 1, "has to be a table"),
        ("[inspect]\ncompiler = '/tree/gcc'\n", 2, "'compiler' is not known"),
        (b"[inspect]\nx = '\xff'\n", 2, "UTF-8"),
    ],
)
def test_mistakes_give_one_notice_with_the_line(tmp_path: Path, text: str | bytes, line: int, part: str) -> None:
    _, notices = settings(tmp_path, text)
    assert len(notices) == 1
    assert notices[0][0] == "error"
    assert notices[0][1] == line
    assert part in notices[0][2]
    assert f"line {line}:" in notices[0][2]


def test_a_mistake_costs_its_key_only(tmp_path: Path) -> None:
    read, notices = settings(tmp_path, "[inspect]\nfail-level = 1\ndata-model = 'LP64'\n")
    assert len(notices) == 1
    assert (read.fail_level, read.data_model) == (None, "LP64")


def test_an_unreadable_file(tmp_path: Path) -> None:
    (tmp_path / "stepring.toml").mkdir()
    read, notices = read_settings(tmp_path / "stepring.toml")
    assert read == Settings()
    assert [notice.kind for notice in notices] == ["bad-settings"]


def test_the_nearest_file_up_to_the_repository(tmp_path: Path) -> None:
    deep = tmp_path / "repository/src/deep"
    deep.mkdir(parents=True)
    (tmp_path / "stepring.toml").write_text("")
    assert find_settings(deep) is None
    (tmp_path / "repository/.git").mkdir()
    assert find_settings(deep) is None
    (tmp_path / "repository/stepring.toml").write_text("")
    assert find_settings(deep) == tmp_path / "repository/stepring.toml"
    (deep / "stepring.toml").write_text("")
    assert find_settings(deep) == deep / "stepring.toml"
