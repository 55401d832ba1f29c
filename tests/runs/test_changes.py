"""Two runs compared: the cell, decision, assumption or option that moved an effect is named, and nothing else."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
from click.testing import CliRunner

from extractor.api import Result, read
from extractor.codebook import Codebook, load_codebook
from extractor.commands.changes import command
from extractor.errors import UnreadableInput
from extractor.output.package import write_conversion
from extractor.output.request import Request
from extractor.output.teamwork import change_in_words
from extractor.routes.conversion import convert_evidence
from extractor.runs.changes import Comparison, compare
from extractor.runs.folder import Run, read_run
from extractor.table import Assumption
from tests.recorded import recorded_cells
from tests.simulated_review import ASSUMING, review

Frame = pd.DataFrame


def sheet() -> Frame:
    rows = [
        {"study": "North", "f_value": "4.31", "df_effect": "2", "df_error": "57"},
        {"study": "South", "f_value": "2.50", "df_effect": "2", "df_error": "45"},
        {"study": "East", "eta_squared": ".15", "df_effect": "2"},
        {"study": "West", "p_value": "< .05", "df_effect": "2", "df_error": "30"},
    ]
    columns = ["study", "outcome", "design", "f_value", "df_effect", "df_error", "eta_squared", "p_value"]
    return pd.DataFrame(rows).assign(outcome="a", design="one-way")[columns].fillna("")


class Runs:
    """Writes runs into folders of their own and reads them back."""

    def __init__(self, folder: Path) -> None:
        self.folder, self.count = folder, 0

    def write(
        self,
        frame: Frame,
        metric: str = "omega_squared",
        book: Codebook | None = None,
        *,
        recorded: bool = True,
        decisions: str | None = None,
        level: float = 0.95,
        codebook: str | None = None,
        rename: dict[str, str] | None = None,
    ) -> Path:
        self.count += 1
        path = self.folder / f"run{self.count}"
        reading = read(frame, book, decisions=decisions)
        conversion = convert_evidence(reading.evidence, metric, level=level)
        result = Result(conversion, reading.audit(conversion))
        request = Request(sheet="-", metric=metric, level=level, codebook=codebook, rename=rename or {})
        write_conversion(path, result, request, force=False, tick=lambda _: None)
        self.record(path, recorded_cells(reading.evidence.table) if recorded else None)
        return path

    def record(self, path: Path, cells: list[dict[str, str]] | None) -> None:
        """Enter the cells of every row into its derivations, or leave them out as an older version did."""
        derivations = json.loads((path / "derivations.json").read_text(encoding="utf-8"))
        for at, row in enumerate(derivations["rows"]):
            row.pop("cells", None)
            if cells is not None:
                row["cells"] = cells[at]
        (path / "derivations.json").write_text(json.dumps(derivations), encoding="utf-8")

    def run(
        self, frame: Frame, metric: str = "omega_squared", book: Codebook | None = None, **how: Any
    ) -> Run:
        """Written as ``write`` does, and read back."""
        return read_run(self.write(frame, metric, book, **how))


@pytest.fixture
def runs(tmp_path: Path) -> Runs:
    return Runs(tmp_path)


def changed(frame: Frame, row: int, column: str, text: str) -> Frame:
    found = frame.copy()
    found.loc[found.index[row], column] = text
    return found


def rows(found: Comparison) -> list[int]:
    return [int(row) for row in found.effects["row"]]


# ---- one cell --------------------------------------------------------------------------------------------


def test_the_same_run_twice_has_no_changes(runs: Runs) -> None:
    found = compare(runs.run(sheet()), runs.run(sheet()))
    assert found.effects.empty
    assert (found.unmoved, found.settings, found.incomparable) == ([], [], "")


def test_one_changed_cell_is_named_with_its_effect(runs: Runs) -> None:
    found = compare(runs.run(sheet()), runs.run(changed(sheet(), 1, "f_value", "5.20")))
    assert rows(found) == [3]
    line = found.effects.iloc[0]
    assert (line["change"], line["cause"]) == ("moved", "input")
    assert line["why"] == "f_value [D3]: 2.50 -> 5.20"
    # ω² = df1(F - 1)/(df1(F - 1) + N), Hays (1963)
    assert line["estimate_old"] == pytest.approx(2 * 1.5 / (2 * 1.5 + 48))
    assert line["estimate_new"] == pytest.approx(2 * 4.2 / (2 * 4.2 + 48))
    assert line["shift"] == pytest.approx(line["estimate_new"] - line["estimate_old"])
    assert found.unmoved == []


def test_every_cell_of_a_simulated_review_is_named_when_it_alone_changes(runs: Runs) -> None:
    """Whatever the cell does to its row: moves it, opens it, blocks it, changes its route, or nothing at all."""
    frame, _ = review(61, 24)
    before = runs.run(frame, "cohens_d", ASSUMING)
    rng = np.random.default_rng(5)
    cells = [
        (row, column)
        for row in range(len(frame))
        for column in frame.columns
        if column not in ("study", "outcome", "design", "direction") and frame[column].iloc[row]
    ]
    kinds: set[str] = set()
    for at in rng.permutation(len(cells))[:25]:
        row, column = cells[at]
        text = str(frame[column].iloc[row])
        other = (
            ""
            if rng.random() < 0.4
            else f"{text[:-1]}{(int(text[-1]) + 3) % 10}"
            if text[-1].isdigit()
            else ".03"
        )
        if column.startswith(("n_", "df_", "k_", "tails", "n_total")) and other:
            other = str(int(float(text)) + 2)
        found = compare(before, runs.run(changed(frame, row, column, other), "cohens_d", ASSUMING))
        assert set(rows(found)) <= {row + 2}
        said = [w for why in found.effects["why"] for w in str(why).split("; ")] + found.unmoved
        assert len(said) == 1, said
        assert said[0].startswith(f"{column} [") and said[0].split(": ")[0].endswith(f"{row + 2}]")
        kinds |= set(found.effects["change"])
    assert len(kinds) > 2


def test_a_filled_cell_that_opens_a_row_is_named_alone(runs: Runs) -> None:
    found = compare(runs.run(sheet()), runs.run(changed(sheet(), 2, "df_error", "60")))
    line = found.effects.iloc[0]
    assert line["change"] == "blocked -> converted"
    assert line["why"] == "df_error [F4]: none -> 60"
    assert np.isnan(line["shift"])


def test_a_cell_that_moves_nothing_is_said_apart(runs: Runs) -> None:
    frame = sheet().assign(scale_items="")
    found = compare(runs.run(frame), runs.run(changed(frame, 3, "scale_items", "10")))
    assert found.effects.empty
    assert found.unmoved == ["scale_items [I5]: none -> 10"]


def test_terms_of_one_model_name_the_row_that_moved_them(runs: Runs) -> None:
    model = {"study": "M", "design": "factorial", "analysis": "x", "df_effect": "1", "df_error": "36"}
    terms = (("A", "4.00"), ("B", "2.00"), ("A x B", "1.00"))
    frame = pd.DataFrame([{**model, "term": term, "f_value": f} for term, f in terms])
    found = compare(
        runs.run(frame, "eta_squared"), runs.run(changed(frame, 1, "f_value", "6.00"), "eta_squared")
    )
    assert rows(found) == [2, 3, 4]
    assert found.effects["cause"].tolist() == ["another row", "input", "another row"]
    assert set(found.effects["why"]) == {"f_value [G3]: 2.00 -> 6.00"}


# ---- rows that move --------------------------------------------------------------------------------------


def test_rows_are_found_again_when_one_is_put_before_them(runs: Runs) -> None:
    new = pd.concat(
        [sheet().iloc[:1], sheet().iloc[:1].assign(study="New"), sheet().iloc[1:]], ignore_index=True
    )
    found = compare(runs.run(sheet()), runs.run(changed(new, 2, "f_value", "5.20")))
    assert found.effects["change"].tolist() == ["appeared", "moved"]
    assert found.effects.loc[1, ["old_row", "row"]].tolist() == [3, 4]
    assert found.effects.loc[1, "why"] == "f_value [D4]: 2.50 -> 5.20"
    gone = compare(runs.run(new), runs.run(sheet())).effects
    assert gone["change"].tolist() == ["gone"]
    assert gone["old_row"].tolist() == [3]


# ---- other causes ----------------------------------------------------------------------------------------


def test_a_decision_is_named_with_who_and_why(runs: Runs, tmp_path: Path) -> None:
    decided = tmp_path / "decisions.csv"
    decided.write_text(
        "row,cell,decision,value,source,by,on,why\n2,f_value,correct,3.41,erratum,coder 1,2026-02-01,misprint\n",
        encoding="utf-8",
    )
    found = compare(runs.run(sheet()), runs.run(sheet(), decisions=str(decided)))
    line = found.effects.iloc[0]
    assert line["cause"] == "decision"
    assert line["why"].startswith(
        "f_value [D2] corrected from 4.31 to 3.41 by coder 1 on 2026-02-01 (erratum"
    )


def test_an_assumption_of_the_codebook_is_named(runs: Runs) -> None:
    frame = pd.DataFrame(
        [{"study": "P", "design": "paired", "n_total": "30", "mean_1": "5.0", "mean_2": "4.0"}]
    )
    frame = frame.assign(sd_1="2.0", sd_2="2.0")
    other = replace(ASSUMING, assumptions={"correlation": Assumption(0.7, "pilot", 0.5, 0.9)})
    found = compare(runs.run(frame, "cohens_d", ASSUMING), runs.run(frame, "cohens_d", other))
    line = found.effects.iloc[0]
    assert (line["change"], line["cause"]) == ("precision", "codebook")
    assert line["why"] == "codebook, assumed correlation: 0.5 -> 0.7"
    assert "assumed correlation: 0.5 -> 0.7" in found.settings


def test_other_rounding_is_named(runs: Runs) -> None:
    found = compare(runs.run(sheet()), runs.run(sheet(), book=Codebook(rounding="either")))
    assert set(found.effects["cause"]) == {"codebook"}
    assert set(found.effects["why"]) == {"codebook, rounding: nearest -> either"}


def test_other_decimals_are_named(runs: Runs, tmp_path: Path) -> None:
    frame = sheet().iloc[:2].assign(f_value=[4.3, 2.5])
    book = tmp_path / "three.toml"
    book.write_text("[decimals]\nf_value = 3\n", encoding="utf-8")
    found = compare(runs.run(frame), runs.run(frame, book=load_codebook(book), codebook=str(book))).effects
    assert set(found["cause"]) == {"codebook"}
    assert found["why"].tolist() == [f"codebook, printed decimals of f_value [D{row}]" for row in (2, 3)]


def test_other_options_are_named(runs: Runs) -> None:
    found = compare(runs.run(sheet()), runs.run(sheet(), level=0.9))
    assert set(found.effects["change"]) == {"precision"}
    assert set(found.effects["why"]) == {"level: 0.95 -> 0.9"}


def test_another_version_is_named_where_nothing_else_explains(runs: Runs, tmp_path: Path) -> None:
    old, new = runs.write(sheet()), runs.write(sheet())
    package = json.loads((new / "datapackage.json").read_text(encoding="utf-8"))
    package["extractor:software"]["version"] = "9.9.9"
    (new / "datapackage.json").write_text(json.dumps(package), encoding="utf-8")
    effects = pd.read_csv(new / "effects.csv", dtype=str, keep_default_na=False)
    effects.loc[0, "variance"] = "0.5"
    effects.to_csv(new / "effects.csv", index=False)
    line = compare(read_run(old), read_run(new)).effects.iloc[0]
    assert line["cause"] == "version"
    assert "9.9.9" in line["why"]


def test_two_metrics_are_not_compared_in_silence(runs: Runs) -> None:
    found = compare(runs.run(sheet()), runs.run(sheet(), "eta_squared"))
    assert found.incomparable == "the metrics differ: omega_squared and eta_squared"


def test_renamed_columns_are_known_again(runs: Runs) -> None:
    found = compare(runs.run(sheet()), runs.run(sheet(), rename={"estimate": "yi", "variance": "vi"}))
    assert found.effects.empty


def test_runs_without_recorded_cells_are_compared_by_their_routes(runs: Runs) -> None:
    old = runs.run(sheet(), recorded=False)
    found = compare(old, runs.run(changed(sheet(), 1, "f_value", "5.20"), recorded=False))
    assert found.effects["why"].tolist() == ["f_value [D3]: 2.5 -> 5.2"]


# ---- reading back, words, command ------------------------------------------------------------------------


def _damage_json(path: Path) -> None:
    (path / "derivations.json").write_text("{", encoding="utf-8")


def _other_json(path: Path) -> None:
    (path / "datapackage.json").write_text('{"name": "something"}', encoding="utf-8")


def _no_effects(path: Path) -> None:
    (path / "effects.csv").unlink()


def _other_effects(path: Path) -> None:
    (path / "effects.csv").write_text("a,b\n1,2\n", encoding="utf-8")


@pytest.mark.parametrize(
    ("spoil", "says"),
    [
        (_damage_json, "is not JSON"),
        (_other_json, "was not written by extractor convert"),
        (_no_effects, "cannot be opened"),
        (_other_effects, "has no column row"),
    ],
)
def test_folders_that_are_no_results(runs: Runs, spoil: Callable[[Path], None], says: str) -> None:
    path = runs.write(sheet())
    spoil(path)
    with pytest.raises(UnreadableInput, match=says):
        read_run(path)


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(UnreadableInput, match="no such folder"):
        read_run(tmp_path / "nothing")


def test_words(runs: Runs) -> None:
    found = compare(runs.run(sheet()), runs.run(changed(sheet(), 1, "f_value", "5.20")))
    assert change_in_words([found.effects.iloc[0].to_dict()]) == (
        "row 3 (South, a): moved, 0.05882 -> 0.1489. Input: f_value [D3]: 2.50 -> 5.20"
    )


def test_the_command_prints_and_writes(runs: Runs, tmp_path: Path) -> None:
    old, new = runs.write(sheet()), runs.write(changed(sheet(), 1, "f_value", "5.20"))
    out = tmp_path / "changes.csv"
    shown = CliRunner().invoke(command, [str(old), str(new), "--out", str(out)], catch_exceptions=False)
    assert "row 3 (South, a): moved" in shown.stdout
    assert "1 effect: 1 by input." in shown.stdout
    assert len(pd.read_csv(out)) == 1
