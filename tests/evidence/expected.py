"""Writes the demo's expected outputs, which a test compares with a fresh run.

python -m tests.evidence.expected
"""

from __future__ import annotations

import shutil
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
EXPECTED = ROOT / "examples" / "expected"
RUNS = {
    "gardens-omega_squared": ["convert", "examples/gardens.csv", "--to", "omega_squared"],
    "gardens-hedges_g": ["convert", "examples/gardens.xlsx", "--to", "hedges_g"],
    "gardens-partial_eta_squared": ["convert", "examples/gardens.xlsx", "--to", "partial_eta_squared"],
}
KEPT = ("effects.csv", "findings.csv")


def main() -> None:
    """Run the demo and keep the tables."""
    shutil.rmtree(EXPECTED, ignore_errors=True)
    for name, words in RUNS.items():
        folder = EXPECTED / name
        folder.parent.mkdir(parents=True, exist_ok=True)
        command = [sys.executable, "-m", "extractor", *words, "--out", str(folder)]
        subprocess.run(command, cwd=ROOT, check=True, stdout=subprocess.DEVNULL)
        for path in folder.iterdir():
            if path.name not in KEPT:
                path.unlink()


if __name__ == "__main__":
    main()
