"""Codebooks: what they mean, and that every mistake in one is named with file, line and a way out."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from extractor.api import convert
from extractor.codebook import (
    EFFECT_COLUMNS,
    Codebook,
    canonical_names,
    default_codebook,
    load_codebook,
    parse_codebook,
    ready_codebooks,
)
from extractor.errors import InvalidCodebook
from extractor.quantities import DESIGNS, FACTS, VOCABULARY, Role, Shape
from extractor.table import Assumption

READY = [
    "one-way",
    "two-group",
    "p-with-n",
    "factorial",
    "within",
    "paired",
    "mixed",
    "pre-post-control",
    "ancova",
    "rank-tests",
    "two-by-two",
]
"""In the order of codebooks/README.md."""

FULL = """\
title = "Our review"
design = "two-group"
decimal_mark = ","
rounding = "either"
missing = ["NR", "−99", -98]
alpha = 0.01

[columns]
f_value = ["F", "F ratio"]
cohens_f = "f"
study = "Trial"
n_1 = "n exp"
n_2 = ["n ctl"]
mean = ["M of group {group}"]

[decimals]
mean = 2
mean_3 = 1

[assume.correlation]
value = 0.5
range = [0.3, 0.8]
by = "review protocol, section 4"

[assume.tails]
value = 1
by = "the authors"

[scale]
minimum = 1
maximum = 7
items = 10
responses = "integer"

[rename]
estimate = "effect_size"
"""


def test_everything_is_taken() -> None:
    book = parse_codebook(FULL, "ours.toml")
    assert (book.title, book.design, book.decimal_mark, book.rounding) == (
        "Our review",
        "two-group",
        ",",
        "either",
    )
    assert book.missing == {"nr", "-99", "-98"}
    assert book.alpha == 0.01
    assert book.decimals_of(("mean", 1)) == 2
    assert book.decimals_of(("mean", 3)) == 1
    assert book.decimals_of(("sd", 1)) is None
    assert book.assumptions["correlation"] == Assumption(0.5, "review protocol, section 4", 0.3, 0.8)
    assert (book.assumptions["tails"].value, book.assumptions["tails"].by) == (1.0, "the authors")
    assert book.scale == {"scale_min": 1.0, "scale_max": 7.0, "scale_items": 10.0}
    assert book.responses == "integer"
    assert book.rename == {"estimate": "effect_size"}
    assert book.path == "ours.toml"


@pytest.mark.parametrize(
    ("heading", "meaning"),
    [
        ("F", ("f_value", None)),
        ("f", ("cohens_f", None)),
        ("F  ratio", ("f_value", None)),
        ("f RATIO", ("f_value", None)),
        (" f_ratio ", ("f_value", None)),
        ("n exp", ("n", 1)),
        ("N-Ctl", ("n", 2)),
        ("M of group 3", ("mean", 3)),
        ("M of group 12", ("mean", 12)),
        ("M of group x", None),
        ("trial", "study"),
        ("f_value", ("f_value", None)),
        ("mean_2", ("mean", 2)),
        ("colour", None),
        ("", None),
    ],
)
def test_meaning(heading: str, meaning: object) -> None:
    assert parse_codebook(FULL, "ours.toml").meaning(heading) == meaning


@pytest.mark.parametrize(
    ("heading", "meaning"),
    [
        ("f_value", ("f_value", None)),
        (" F-Value ", ("f_value", None)),
        ("P value", ("p_value", None)),
        ("mean_1", ("mean", 1)),
        ("Mean 12", ("mean", 12)),
        ("mean_pre_1", ("mean_pre", 1)),
        ("ci_low_2", ("ci_low", 2)),
        ("count_a", ("count_a", None)),
        ("Design", "design"),
        ("reported", "reported"),
        ("mean", None),
        ("mean_0", None),
        ("f_value_1", None),
        ("pooled_sd", None),
        ("F", None),
    ],
)
def test_canonical_headings_need_no_codebook(heading: str, meaning: object) -> None:
    assert default_codebook().meaning(heading) == meaning


def test_every_name_of_the_vocabulary_is_a_heading() -> None:
    book = default_codebook()
    for name in canonical_names():
        quantity = VOCABULARY.get(name)
        if name in FACTS:
            assert book.meaning(name) == name
        elif quantity is not None and quantity.shape is Shape.GROUP:
            assert book.meaning(f"{name}_2") == (name, 2)
        else:
            assert book.meaning(name) == (name, None)
    assert not any(q.role is Role.INNER and book.meaning(n) not in (None, n) for n, q in VOCABULARY.items())


def test_case_decides_where_headings_differ_in_case_only() -> None:
    book = parse_codebook('[columns]\nf_value = "F stat"\ncohens_f = "f stat"', "x")
    assert book.meaning("F stat") == ("f_value", None)
    assert book.meaning("f stat") == ("cohens_f", None)
    assert book.meaning("F STAT") is None
    # a single letter is never taken for its other case
    assert parse_codebook('[columns]\nf_value = "F"', "x").meaning("f") is None


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ('desing = "one-way"', ("line 1", "'desing' is not known", "did you mean design")),
        ('title = "x"\n\ndesign = "oneway"', ("line 3", "'design'", "did you mean one-way?")),
        ("design = 3", ("'design' must be",)),
        ('decimal_mark = ";"', ('must be "." or ","',)),
        ('rounding = "up"', ('must be "nearest" or "truncated" or "either"',)),
        ('missing = "NA"', ("'missing' must be a list",)),
        ("missing = [true]", ("texts or numbers",)),
        ("alpha = 5", ("'alpha' must be from",)),
        ('alpha = "5"', ("'alpha' must be a number",)),
        ("alpha = nan", ("'alpha' must be a number",)),
        ("title = 3", ("'title' must be a text",)),
        ("columns = 3", ("must be a table, written [columns]",)),
        ('[columns]\n# f_valu\nf_valu = "F"', ("line 3", "'columns.f_valu'", "did you mean f_value")),
        ('[columns]\npooled_sd = "s"', ("'columns.pooled_sd' is no quantity",)),
        ("[columns]\nf_value = 3", ("must be a text or a list of texts",)),
        ('[columns]\nf_value = ["F", ""]', ("none of them empty",)),
        ('[columns]\nmean = "M"', ("write {group} in the heading, or a key such as mean_1",)),
        ('[columns]\nf_value = "F {group}"', ("without {group}",)),
        ('[columns]\nmean_1 = "M {group}"', ("without {group}",)),
        ('[columns]\nf_value = "F"\nt_value = "F"', ("line 3", "claims the heading 'F'")),
        ('title = "f_value = 1"\n[decimals]\nf_value = 2.5', ("line 3", "whole number from 0 to 12")),
        ("[decimals]\nf_value = true", ("whole number",)),
        ("[decimals]\nstudy = 2", ("'decimals.study' is no quantity",)),
        ("[assume.correlation]\nvalue = 0.5", ("line 1", "'assume.correlation.by' is missing")),
        ('[assume.correlation]\nby = "x"', ("'assume.correlation.value' is missing",)),
        ('[assume.correlation]\nvalue = 2.0\nby = "x"', ("line 2", "must be from -1 to 1")),
        ('[assume.correlation]\nvalue = 0.5\nby = ""', ("line 3", "must be a text that is not empty")),
        (
            '[assume.correlation]\nvalue = 0.5\nby = "x"\nrange = [0.6, 0.8]',
            ("line 4", "must hold the value"),
        ),
        ('[assume.correlation]\nvalue = 0.5\nby = "x"\nrange = 0.6', ("two numbers",)),
        (
            '[assume.correlation]\nvalue = 0.5\nby = "x"\nwhy = "y"',
            ("'assume.correlation.why' is not known",),
        ),
        ('[assume.corelation]\nvalue = 0.5\nby = "x"', ("did you mean correlation",)),
        ('[assume.sd]\nvalue = 0.5\nby = "x"', ("no quantity of a whole row",)),
        ("[assume]\ncorrelation = 0.5", ("must be a table, written [assume.correlation]",)),
        ("[scale]\nminimum = 7\nmaximum = 1", ("line 3", "must be above minimum")),
        ("[scale]\nitems = 0", ("whole number from 1",)),
        ('[scale]\nresponses = "likert"', ('"integer" or "binary" or "continuous"',)),
        ("[scale]\nmin = 1", ("'scale.min' is not known", "minimum")),
        ('[rename]\nestimat = "x"', ("did you mean estimate",)),
        ('[rename]\nestimate = "variance"', ("two columns the name 'variance'",)),
        ('[rename]\nestimate = "x"\nvariance = "x"', ("two columns the name 'x'",)),
        ("[rename]\nestimate = 3", ("must be a text",)),
        ("title = x", ("not valid TOML", "line 1")),
        ("x = " + "[" * 5000, ("not valid TOML",)),
        ("x = " + "9" * 5000, ("not valid TOML",)),
    ],
)
def test_mistakes_are_named(text: str, words: tuple[str, ...]) -> None:
    with pytest.raises(InvalidCodebook) as caught:
        parse_codebook(text, "ours.toml")
    message = str(caught.value)
    assert "\n" not in message
    assert message.startswith("codebook 'ours.toml'")
    for word in words:
        assert word in message


def test_swapping_two_names_is_no_clash() -> None:
    book = parse_codebook('[rename]\nestimate = "variance"\nvariance = "estimate"', "x")
    assert book.rename == {"estimate": "variance", "variance": "estimate"}
    assert set(book.rename) <= set(EFFECT_COLUMNS)


@pytest.mark.parametrize("name", READY)
def test_ready_codebooks(name: str) -> None:
    assert name in ready_codebooks()
    book = load_codebook(name)
    assert book.design in DESIGNS
    assert book.title
    assert book.meaning("Study") == "study"
    assert book.meaning("p") == ("p_value", None)
    assert book.meaning("N") == ("n_total", None)
    assert book.meaning("n 2") == ("n", 2)
    assert book.meaning("f_value") == ("f_value", None)


def test_all_ready_codebooks_are_listed() -> None:
    assert ready_codebooks() == sorted(READY)


def _sections() -> dict[str, str]:
    """The sections of codebooks/README.md about ready codebooks, by name."""
    folder = Path(__file__).resolve().parent.parent / "codebooks"
    parts = (folder / "README.md").read_text(encoding="utf-8").partition("## How cells are read")[0]
    return {part.partition("`")[0]: part for part in parts.split("### `")[1:]}


def _example(section: str) -> pd.DataFrame:
    """The example rows of a section, as a sheet."""
    lines = [
        [cell.strip() for cell in line.strip("|").split("|")]
        for line in section.splitlines()
        if line[:1] == "|"
    ]
    width = len(lines[0])
    return pd.DataFrame([line for line in lines[2:] if len(line) == width], columns=lines[0])


def test_ready_codebooks_know_their_readme() -> None:
    """The tables of codebooks/README.md show headings the ready codebooks take."""
    assert list(_sections()) == READY
    for name, section in _sections().items():
        book = load_codebook(name)
        for heading in _example(section).columns:
            assert book.meaning(heading) is not None, heading


@pytest.mark.parametrize(
    ("name", "metric"),
    [
        ("one-way", "omega_squared"),
        ("two-group", "hedges_g"),
        ("p-with-n", "omega_squared"),
        ("factorial", "eta_squared"),
        ("within", "partial_eta_squared"),
        ("paired", "hedges_g"),
        ("mixed", "hedges_g"),
        ("pre-post-control", "hedges_g"),
        ("ancova", "cohens_d"),
        ("rank-tests", "hedges_g"),
        ("two-by-two", "log_odds_ratio"),
    ],
)
def test_examples_of_the_readme_convert(name: str, metric: str) -> None:
    rows = _example(_sections()[name])
    result = convert(rows, metric, name)
    assert set(result.effects["status"]) == {"converted"}
    assert result.effects["variance"].notna().all()
    assert not set(result.findings["severity"]) & {"inconsistent", "impossible"}


def test_the_readme_shows_a_valid_codebook() -> None:
    folder = Path(__file__).resolve().parent.parent / "codebooks"
    text = (folder / "README.md").read_text(encoding="utf-8").partition("## Keys")[2]
    lines = [line[4:] for line in text.splitlines() if line.startswith("    ") or not line]
    book = parse_codebook("\n".join(lines), "README.md")
    assert book.meaning("n 3") == ("n", 3)
    assert book.meaning("M exp") == ("mean", 1)


def test_load_from_a_file(tmp_path: Path) -> None:
    path = tmp_path / "ours.toml"
    path.write_bytes(b"\xef\xbb\xbf" + FULL.replace("\n", "\r\n").encode())
    assert load_codebook(path).title == "Our review"
    assert load_codebook(str(path)).path == str(path)


@pytest.mark.parametrize(
    ("word", "words"),
    [
        ("one-wya", ("known are", "one-way", "did you mean one-way?")),
        ("no/such/file", ("no such file",)),
        ("nothing.toml", ("no such file",)),
        ("../codebooks/one-way", ("no such file",)),
        ("a\x00b", ("no codebook is called 'a b'",)),
        ("", ("folder",)),
    ],
)
def test_no_such_codebook(
    word: str, words: tuple[str, ...], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    with pytest.raises(InvalidCodebook) as caught:
        load_codebook(word)
    assert all(part in str(caught.value) for part in words)
    assert "\n" not in str(caught.value)


def test_files_that_are_no_text(tmp_path: Path) -> None:
    with pytest.raises(InvalidCodebook, match="folder"):
        load_codebook(tmp_path)
    latin = tmp_path / "latin.toml"
    latin.write_bytes('title = "é"'.encode("latin-1"))
    with pytest.raises(InvalidCodebook, match="not UTF-8"):
        load_codebook(latin)
    huge = tmp_path / "huge.toml"
    huge.write_bytes(b"#" * (1 << 21))
    with pytest.raises(InvalidCodebook, match="larger than 1 MiB"):
        load_codebook(huge)


KEYS = st.sampled_from(
    ["title", "design", "columns", "assume", "scale", "rename", "decimals", "missing", "alpha", "x"]
)
VALUES = st.sampled_from(
    ['"F"', "1", "0.5", "[1]", '["a"]', "true", "{}", '{ value = 0.5, by = "x" }', "[[1]]", "inf"]
)
INNER = st.sampled_from(["f_value", "mean", "correlation", "minimum", "items", "estimate", "y"])


@given(st.lists(st.tuples(KEYS, INNER, VALUES, st.booleans()), max_size=5))
def test_any_codebook_is_answered(entries: list[tuple[str, str, str, bool]]) -> None:
    text = "\n".join(
        f"{key}.{inner} = {v}" if dotted else f"{key} = {v}" for key, inner, v, dotted in entries
    )
    try:
        assert isinstance(parse_codebook(text, "x"), Codebook)
    except InvalidCodebook as fault:
        assert "\n" not in str(fault)


@given(st.text(max_size=60))
def test_any_text_is_answered(text: str) -> None:
    try:
        parse_codebook(text, "x")
    except InvalidCodebook as fault:
        assert "\n" not in str(fault)
