"""The README shows what the commands print, and the demo's expected outputs are what a run gives."""

from __future__ import annotations

from pathlib import Path

import pandas as pd
import pytest

from extractor.commands.main import cli
from tests.evidence import readme
from tests.evidence.expected import EXPECTED, RUNS

ROOT = Path(__file__).resolve().parents[1]


def test_readme_shows_real_output() -> None:
    text = readme.README.read_text(encoding="utf-8")
    assert readme.rendered(text) == text


@pytest.mark.parametrize("name", sorted(RUNS))
def test_demo_gives_the_expected_outputs(name: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(ROOT)
    folder = tmp_path / name
    with pytest.raises(SystemExit) as ended:
        cli.main([*RUNS[name], "--out", str(folder)])
    assert ended.value.code == 0
    for expected in sorted((EXPECTED / name).iterdir()):
        # last digits may differ between processors, nothing else may
        paths = folder / expected.name, expected
        now, then = (pd.read_csv(path, keep_default_na=False, na_values=[""]) for path in paths)
        pd.testing.assert_frame_equal(now, then, rtol=1e-10)
