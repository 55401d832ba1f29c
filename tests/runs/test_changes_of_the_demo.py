"""Real runs of the demo, written and compared through the command line: each cause is named, and only its effects."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pandas as pd
import pytest
from click.testing import CliRunner

from extractor.commands.main import cli

DEMO = Path(__file__).parents[2] / "examples" / "gardens.csv"
Change = Callable[[pd.DataFrame], pd.DataFrame]


def demo() -> pd.DataFrame:
    return pd.read_csv(DEMO, dtype=str, keep_default_na=False)


def convert(folder: Path, frame: pd.DataFrame, *options: str, to: str = "hedges_g") -> Path:
    folder.mkdir(parents=True)
    frame.to_csv(folder / "coded.csv", index=False)
    words = ["convert", str(folder / "coded.csv"), "--to", to, "--out", str(folder / "out"), *options]
    done = CliRunner().invoke(cli, words, catch_exceptions=False)
    assert done.exit_code == 0, done.stderr
    return folder / "out"


@pytest.fixture(scope="module")
def before(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return convert(tmp_path_factory.mktemp("runs") / "old", demo())


def changes(before: Path, after: Path) -> tuple[pd.DataFrame, str]:
    """The lines of the comparison that speak of effects, and what was printed."""
    out = after.parent / "changes.csv"
    words = ["changes", str(before), str(after), "--out", str(out)]
    done = CliRunner().invoke(cli, words, catch_exceptions=False)
    assert done.exit_code == 0, done.stderr
    return pd.read_csv(out, keep_default_na=False), done.stdout


def with_cell(study: str, column: str, text: str) -> Change:
    def changed(frame: pd.DataFrame) -> pd.DataFrame:
        found = frame.copy()
        found.loc[found["study"] == study, column] = text
        return found

    return changed


def shuffled(frame: pd.DataFrame) -> pd.DataFrame:
    return frame.sample(frac=1, random_state=3)


@pytest.mark.parametrize("order", [lambda frame: frame, shuffled], ids=["in order", "unsorted"])
def test_one_cell_and_exactly_its_effect(before: Path, tmp_path: Path, order: Change) -> None:
    frame = order(with_cell("Alder Quay", "mean_1", "54.1")(demo()))
    row = frame["study"].tolist().index("Alder Quay") + 2
    found, said = changes(before, convert(tmp_path / "new", frame))
    (line,) = found.to_dict("records")
    assert (line["row"], line["old_row"], line["study"], line["cause"]) == (row, 2, "Alder Quay", "input")
    column = demo().columns.tolist().index("mean_1")
    letter = chr(ord("A") + column)
    assert line["why"] == f"mean_1 [{letter}{row}]: 53.3 -> 54.1"
    assert "1 effect: 1 by input." in said


def test_a_sheet_in_another_order_moves_nothing(before: Path, tmp_path: Path) -> None:
    found, said = changes(before, convert(tmp_path / "new", demo()[::-1]))
    assert found.empty
    assert "No effect moved." in said


def test_rows_added_removed_and_renamed_at_once(before: Path, tmp_path: Path) -> None:
    frame = with_cell("Elmstead", "study", "Elmstead Heath")(demo())
    new = frame[frame["study"] == "Cobble Bay"].assign(study="New Field", mean_1="50.0")
    rest = frame[frame["study"] != "Dunmoor"]
    found, said = changes(before, convert(tmp_path / "new", pd.concat([new, rest])))
    shown = found[["study", "change", "why"]].to_numpy().tolist()
    assert sorted(shown) == [
        ["Dunmoor", "gone", "the row is no longer in the sheet"],
        ["Elmstead Heath", "labels", "study: Elmstead -> Elmstead Heath"],
        ["New Field", "appeared", "the row was added to the sheet"],
    ]
    assert "3 effects: 3 by input." in said


def test_a_row_taken_from_among_rows_of_the_same_labels(tmp_path: Path) -> None:
    """The rows below it move up into its number, and are still known by their cells."""
    rows = demo().iloc[:6].assign(study="One", outcome="same")
    old, new = convert(tmp_path / "old", rows), convert(tmp_path / "new", rows.drop(index=1))
    found, _ = changes(old, new)
    assert found[["old_row", "change"]].to_numpy().tolist() == [[3, "gone"]]


def test_a_decision(before: Path, tmp_path: Path) -> None:
    decisions = tmp_path / "decisions.csv"
    decisions.write_text(
        "row,cell,decision,value,source,by,why\n2,mean_1,correct,54.1,Table 2,AB,slip\n", encoding="utf-8"
    )
    found, _ = changes(before, convert(tmp_path / "new", demo(), "--decisions", str(decisions)))
    (line,) = found.to_dict("records")
    assert (line["row"], line["cause"]) == (2, "decision")
    assert line["why"].endswith("corrected from 53.3 to 54.1 by AB (Table 2; slip)")


def test_a_codebook(before: Path, tmp_path: Path) -> None:
    book = tmp_path / "book.toml"
    book.write_text(
        '[assume.confidence_level]\nvalue = 0.9\nrange = [0.8, 0.95]\nby = "protocol"\n', encoding="utf-8"
    )
    found, said = changes(before, convert(tmp_path / "new", demo(), "--codebook", str(book)))
    # the two rows of the demo that print confidence limits without their level
    assert found["study"].tolist() == ["Clover Hatch", "Daisy Holm"]
    assert set(found["cause"]) == {"codebook"}
    assert set(found["why"]) == {"codebook, assumed confidence_level: 0.95 -> 0.9"}
    assert "the codebook is not the same file" in said


def test_an_option_and_a_metric(before: Path, tmp_path: Path) -> None:
    narrower, said = changes(before, convert(tmp_path / "level", demo(), "--level", ".9"))
    assert set(narrower["change"]) == {"precision"}
    assert set(narrower["why"]) == {"level: 0.95 -> 0.9"}
    # one reason is said once
    assert said.count("Options: level: 0.95 -> 0.9") == 1
    other, said = changes(before, convert(tmp_path / "metric", demo(), to="cohens_d"))
    assert "the metrics differ: hedges_g and cohens_d" in said
    assert all("metric: hedges_g -> cohens_d" in why for why in other["why"])


def test_another_version(before: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A version that multiplies g by another correction: only that explains the rows."""
    new = convert(tmp_path / "new", demo())
    package = new / "datapackage.json"
    text = package.read_text(encoding="utf-8")
    from extractor import __version__

    package.write_text(text.replace(f'"version": "{__version__}"', '"version": "99.0"'), encoding="utf-8")
    effects = pd.read_csv(new / "effects.csv", dtype=str, keep_default_na=False)
    effects.loc[0, "estimate"] = "0.9"
    effects.to_csv(new / "effects.csv", index=False)
    found, said = changes(before, new)
    assert found[["row", "cause"]].to_numpy().tolist() == [[2, "version"]]
    assert f"version {__version__} -> 99.0" in said
