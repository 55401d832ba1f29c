"""Output folders appear whole or not at all."""

from __future__ import annotations

import os
from datetime import UTC, datetime
from pathlib import Path

import pytest

from extractor.errors import UsageError
from extractor.output.files import fixed_time, output_folder

OWN = ("a.txt", "b.txt")


def write(folder: Path, *names: str, force: bool = False, text: str = "new") -> None:
    with output_folder(folder, OWN, force=force) as made:
        for name in names:
            (made / name).write_text(text)


def test_folder_appears_with_its_parents_and_nothing_beside_it(tmp_path: Path) -> None:
    write(tmp_path / "deep" / "out", "a.txt")
    assert os.listdir(tmp_path / "deep") == ["out"]
    assert (tmp_path / "deep" / "out" / "a.txt").read_text() == "new"


def test_folder_has_the_usual_permissions(tmp_path: Path) -> None:
    write(tmp_path / "out", "a.txt")
    (tmp_path / "plain").mkdir()
    assert (tmp_path / "out").stat().st_mode == (tmp_path / "plain").stat().st_mode


def test_existing_folder_is_refused_and_untouched(tmp_path: Path) -> None:
    write(tmp_path / "out", "a.txt")
    with pytest.raises(UsageError, match="--force"):
        write(tmp_path / "out", "b.txt")
    assert os.listdir(tmp_path) == ["out"]
    assert os.listdir(tmp_path / "out") == ["a.txt"]


def test_force_replaces_own_files_and_keeps_others(tmp_path: Path) -> None:
    out = tmp_path / "out"
    write(out, "a.txt", "b.txt", text="old")
    (out / "notes.txt").write_text("mine")
    write(out, "a.txt", force=True)
    assert sorted(os.listdir(out)) == ["a.txt", "notes.txt"]
    assert (out / "a.txt").read_text() == "new"
    assert (out / "notes.txt").read_text() == "mine"
    assert os.listdir(tmp_path) == ["out"]


def test_force_writes_through_a_link_to_a_folder(tmp_path: Path) -> None:
    (tmp_path / "real").mkdir()
    (tmp_path / "link").symlink_to(tmp_path / "real")
    write(tmp_path / "link", "a.txt", force=True)
    assert (tmp_path / "real" / "a.txt").read_text() == "new"
    assert (tmp_path / "link").is_symlink()


def test_file_in_the_way_is_refused_even_with_force(tmp_path: Path) -> None:
    (tmp_path / "out").write_text("mine")
    with pytest.raises(UsageError, match="no folder"):
        write(tmp_path / "out", "a.txt", force=True)
    assert (tmp_path / "out").read_text() == "mine"


@pytest.mark.parametrize("fault", [ValueError, KeyboardInterrupt])
def test_failure_leaves_nothing(tmp_path: Path, fault: type[BaseException]) -> None:
    with pytest.raises(fault), output_folder(tmp_path / "out", OWN, force=False) as made:
        (made / "a.txt").write_text("half")
        raise fault
    assert os.listdir(tmp_path) == []


def test_failure_under_force_leaves_the_old_files(tmp_path: Path) -> None:
    write(tmp_path / "out", "a.txt", text="old")
    with pytest.raises(ValueError), output_folder(tmp_path / "out", OWN, force=True) as made:
        (made / "a.txt").write_text("half")
        raise ValueError
    assert os.listdir(tmp_path) == ["out"]
    assert (tmp_path / "out" / "a.txt").read_text() == "old"


def test_disk_errors_become_one_line(tmp_path: Path) -> None:
    with (
        pytest.raises(UsageError, match="cannot be written: No space left") as caught,
        output_folder(tmp_path / "out", OWN, force=False),
    ):
        raise OSError(28, "No space left on device")
    assert "\n" not in str(caught.value)
    assert os.listdir(tmp_path) == []


def test_parent_that_is_a_file_is_named(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(UsageError, match=r"file/out' cannot be written"):
        write(tmp_path / "file" / "out", "a.txt")


@pytest.mark.parametrize(
    ("said", "expected"),
    [
        ("", datetime(2020, 1, 1, tzinfo=UTC)),
        ("soon", datetime(2020, 1, 1, tzinfo=UTC)),
        ("0", datetime(1980, 1, 1, tzinfo=UTC)),
        ("1700000000", datetime(2023, 11, 14, 22, 13, 20, tzinfo=UTC)),
    ],
)
def test_time_comes_from_the_environment_never_the_clock(
    monkeypatch: pytest.MonkeyPatch, said: str, expected: datetime
) -> None:
    """SOURCE_DATE_EPOCH: seconds since 1970 (reproducible-builds.org specification)."""
    monkeypatch.setenv("SOURCE_DATE_EPOCH", said)
    assert fixed_time() == expected
