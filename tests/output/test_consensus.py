"""The workbook to settle disputes in, there and back, and the merged sheet. All data are invented."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
from openpyxl import load_workbook

import extractor
from extractor.codebook import default_codebook, parse_codebook
from extractor.coders.reconcile import Reconciliation, reconcile
from extractor.errors import UnreadableInput, UsageError
from extractor.output.comparing import CONSENSUS, MERGED, write_comparison, write_settled
from extractor.output.consensus import Settled, has_agreed, read_consensus
from extractor.output.merged import merged
from tests.double_coding import (
    CELLS,
    SHEET,
    TERMS,
    TO,
    changed,
    fill,
    random_sheet,
    slip,
    workbook,
)


@pytest.fixture
def settled_folder(tmp_path: Path) -> Callable[..., tuple[Reconciliation, Path]]:
    """Compares sheets and writes the folder."""

    def made(*sheets: object, to: str | None = TO) -> tuple[Reconciliation, Path]:
        found = reconcile(list(sheets), to)
        write_comparison(tmp_path / "out", found, raw=False, force=False)
        return found, tmp_path / "out" / CONSENSUS

    return made


Folder = Callable[..., tuple[Reconciliation, Path]]


def test_the_workbook_has_one_line_per_dispute_with_an_empty_column_to_fill(settled_folder: Folder) -> None:
    other = changed(SHEET, (0, "mean_1", "12.20"), (1, "country", "y"))
    found, path = settled_folder(SHEET, other)
    sheet = load_workbook(path)["consensus"]
    lines = [
        dict(zip([c.value for c in sheet[1]], [c.value for c in line], strict=True))
        for line in sheet.iter_rows(min_row=2)
    ]
    assert [(line["variable"], line["A"], line["B"], line["agreed"]) for line in lines] == [
        ("mean_1", "10.20", "12.20", None),
        ("country", "x", "y", None),
    ]
    assert [(line["row A"], line["A cell"]) for line in lines] == [(2, "mean_1 [D2]"), (3, "country [I3]")]
    assert not has_agreed(path)
    assert read_consensus(found, path) == Settled()


def test_settling_every_dispute_with_the_truth_gives_the_effects_of_the_truth(
    settled_folder: Folder, tmp_path: Path
) -> None:
    rng = np.random.default_rng(12)
    truth = random_sheet(rng, 40)
    coders = [truth.copy(), truth.copy()]
    for i in range(40):
        filled = [
            name
            for name in truth.columns
            if truth.loc[i, name] and name not in ("study", "outcome", "design")
        ]
        name = str(rng.choice(filled))
        coders[rng.integers(2)].loc[i, name] = slip(rng, truth.loc[i], name)
    found, path = settled_folder(coders[0], coders[1].sample(frac=1, random_state=3).reset_index(drop=True))
    book = load_workbook(path)
    sheet = book["consensus"]
    headings = [cell.value for cell in sheet[1]]
    at = {(row["study"], row["outcome"]): row for row in truth.to_dict("records")}
    for line in sheet.iter_rows(min_row=2):
        said = dict(zip(headings, (cell.value for cell in line), strict=True))
        line[headings.index("agreed")].value = at[said["study"], said["outcome"]][said["variable"]]
    book.save(path)
    assert has_agreed(path)
    notes = write_settled(tmp_path / "final", found, read_consensus(found, path), force=False)
    assert notes == []
    merged_effects = extractor.convert(tmp_path / "final" / MERGED, TO).effects
    expected = extractor.convert(truth, TO).effects
    for name in ("estimate", "variance", "estimate_low", "estimate_high"):
        assert merged_effects[name].to_numpy() == pytest.approx(
            expected[name].to_numpy(), rel=1e-12, nan_ok=True
        )
    assert list(merged_effects["country"]) == list(expected["country"])


def test_what_is_not_settled_stays_blank_and_is_counted(settled_folder: Folder) -> None:
    other = changed(SHEET, (0, "mean_1", "12.20"), (1, "mean_1", "1.22"), (2, "sd_1", ""))
    found, path = settled_folder(SHEET, other)
    fill(path, {"sd_1": "blank"})
    frame, notes = merged(found, read_consensus(found, path))
    assert list(frame["mean_1"]) == ["", "", "5.13", "5.30"]
    assert list(frame["sd_1"]) == ["3.12", "0.31", "", "1.27"]
    assert notes == ["2 disputes not settled: left blank in the merged sheet"]


def test_of_agreeing_numbers_the_more_exact_one_is_kept(settled_folder: Folder) -> None:
    found, _ = settled_folder(changed(SHEET, (0, "mean_1", "10.2")), changed(SHEET, (1, "mean_1", "1.2")))
    frame, _ = merged(found, Settled())
    assert list(frame["mean_1"]) == list(SHEET["mean_1"])


def test_columns_nobody_compares_go_into_the_merged_sheet(settled_folder: Folder) -> None:
    one = SHEET.assign(remark=["", "two", "three", ""], quote="as printed", coder="first")
    found, _ = settled_folder(one, SHEET.assign(coder="second", Reason=["why", "", "", ""]))
    frame, _ = merged(found, Settled())
    assert list(frame["remark"]) == ["", "two", "three", ""]
    assert list(frame["Reason"]) == ["why", "", "", ""]
    assert set(frame["quote"]) == {"as printed"}
    assert "coder" not in frame


def test_a_number_typed_into_the_workbook_is_read_like_any_cell(settled_folder: Folder) -> None:
    found, path = settled_folder(SHEET, changed(SHEET, (0, "mean_1", "12.20")))
    fill(path, {"mean_1": 11.5})
    frame, _ = merged(found, read_consensus(found, path))
    assert frame["mean_1"].iloc[0] == "11.5"


def test_rows_of_one_coder_are_kept_or_dropped_as_settled(settled_folder: Folder) -> None:
    found, path = settled_folder(SHEET.iloc[:3], SHEET)
    frame, notes = merged(found, read_consensus(found, path))
    assert len(frame) == 3
    assert notes == ["1 single row not settled: left out of the merged sheet"]
    fill(path, {"": "keep"}, "rows")
    frame, notes = merged(found, read_consensus(found, path))
    assert list(frame["study"]) == list(SHEET["study"])
    assert notes == []
    fill(path, {"": "perhaps"}, "rows")
    with pytest.raises(UnreadableInput, match="'perhaps' is neither keep nor drop"):
        read_consensus(found, path)


def test_a_workbook_that_does_not_belong_to_the_sheets_is_refused_with_its_cell(
    settled_folder: Folder,
) -> None:
    other = changed(SHEET, (0, "mean_1", "12.20"))
    found, path = settled_folder(SHEET, other)
    fill(path, {"mean_1": "abc"})
    with pytest.raises(UnreadableInput, match=r"cell [A-Z]+2: 'abc'"):
        read_consensus(found, path)
    fill(path, {"mean_1": "10.20"})
    corrected = reconcile([SHEET, changed(SHEET, (0, "mean_1", "13.20"))], TO)
    with pytest.raises(UnreadableInput, match=r"sheet B now says '13.20' there"):
        read_consensus(corrected, path)
    with pytest.raises(UnreadableInput, match="there is no such dispute"):
        read_consensus(reconcile([SHEET, SHEET], TO), path)
    with pytest.raises(UnreadableInput, match="no consensus workbook"):
        read_consensus(found, workbook(path.parent / "other.xlsx", TERMS, CELLS))


def test_agreed_values_are_never_overwritten(settled_folder: Folder) -> None:
    found, path = settled_folder(SHEET, changed(SHEET, (0, "mean_1", "12.20")))
    write_comparison(path.parent, found, raw=False, force=True)
    fill(path, {"mean_1": "10.20"})
    with pytest.raises(UsageError, match="holds agreed values"):
        write_comparison(path.parent, found, raw=False, force=True)


def test_the_same_comparison_writes_the_same_bytes(tmp_path: Path) -> None:
    other = changed(SHEET, (0, "mean_1", "12.20"), (1, "country", "y")).iloc[:3]
    for name in ("one", "two"):
        found = reconcile([SHEET, other], TO)
        write_comparison(tmp_path / name, found, raw=False, force=False)
        write_settled(tmp_path / f"{name} final", found, Settled(), force=False)
    for folder in ("", " final"):
        for path in sorted((tmp_path / f"one{folder}").iterdir()):
            assert path.read_bytes() == (tmp_path / f"two{folder}" / path.name).read_bytes(), path.name


def test_a_merged_factorial_model_keeps_its_cells(settled_folder: Folder, tmp_path: Path) -> None:
    wrong = [*CELLS[:2], ("m1", "young", "f", 13, "7.63", "1.41"), CELLS[3]]
    sheets = [
        workbook(tmp_path / name, TERMS, lines) for name, lines in (("a.xlsx", CELLS), ("b.xlsx", wrong))
    ]
    found, path = settled_folder(*sheets, to="eta_squared")
    fill(path, {"mean_3": "6.73"})
    write_settled(tmp_path / "final", found, read_consensus(found, path), force=False)
    again = extractor.convert(tmp_path / "final" / MERGED, "eta_squared").effects
    expected = extractor.convert(sheets[0], "eta_squared").effects
    assert again["estimate"].to_numpy() == pytest.approx(expected["estimate"].to_numpy(), rel=1e-12)
    assert again["estimate"].notna().all()


def test_a_codebook_s_decimal_mark_goes_through_the_merged_sheet(tmp_path: Path) -> None:
    book = parse_codebook('title = "t"\ndesign = "two-group"\ndecimal_mark = ","\n', "book.toml")
    comma = SHEET.map(lambda text: text.replace(".", ",")).drop(columns="design")
    found = reconcile([comma, changed(comma, (0, "mean_1", "12,20"))], TO, book)
    assert list(found.agreement["variable"]).count("design") == 0
    write_settled(tmp_path / "final", found, Settled({(0, 1): ""}), force=False)
    again = extractor.convert(tmp_path / "final" / MERGED, TO, book).effects
    assert again["estimate"].to_numpy()[1:] == pytest.approx(
        extractor.convert(SHEET, TO).effects["estimate"][1:]
    )


def test_places_of_words_are_given_with_a_team_s_own_headings() -> None:
    text = 'title = "t"\ndesign = "two-group"\n[columns]\nstandardizer = ["divided by"]\nn_1 = ["size one"]\n'
    book = parse_codebook(text, "book.toml")
    sheet = SHEET.rename(columns={"n_1": "size one"}).assign(**{"divided by": "pooled"})
    other = changed(sheet, (0, "divided by", "control"), (0, "size one", "25"))
    lines = reconcile([sheet, other], None, book).disputes
    assert list(lines["variable"]) == ["n_1", "standardizer"]
    assert list(lines["A cell"]) == ["size one [C2]", "divided by [M2]"]
    assert default_codebook().meaning("size one") is None


def test_the_demo_merged_with_itself_gives_the_demo_s_effects_to_the_last_bit(tmp_path: Path) -> None:
    """Every design, running text, the sheet of groups: nothing is lost on the way through the merged sheet."""
    demo = Path(__file__).parents[2] / "examples" / "gardens.xlsx"
    found = reconcile([demo, demo])
    assert not len(found.disputes)
    assert not len(found.single)
    write_settled(tmp_path / "final", found, Settled(), force=False)
    for metric in ("omega_squared", "hedges_g", "generalized_eta_squared"):
        again, expected = (
            extractor.convert(path, metric).effects for path in (tmp_path / "final" / MERGED, demo)
        )
        for name in ("estimate", "variance", "estimate_low", "estimate_high"):
            assert np.array_equal(again[name].to_numpy(), expected[name].to_numpy(), equal_nan=True), (
                metric,
                name,
            )
        assert list(again["assumptions"]) == list(expected["assumptions"])
