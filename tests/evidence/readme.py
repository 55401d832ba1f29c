"""The terminal output shown in README.md, made by running the commands it shows.

python -m tests.evidence.readme          compares and says what differs
python -m tests.evidence.readme --write  puts the output of each command under it
"""

from __future__ import annotations

import os
import re
import shlex
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
README = ROOT / "README.md"
_BLOCK = re.compile(r"```console\n\$ extractor (?P<words>[^\n]*)\n(?P<output>.*?)```", re.DOTALL)


def output_of(words: str) -> str:
    """What a command prints, at a fixed width and without colour."""
    environment = {**os.environ, "COLUMNS": "110", "NO_COLOR": "1", "PYTHONIOENCODING": "utf-8"}
    command = [sys.executable, "-m", "extractor", *shlex.split(words)]
    done = subprocess.run(
        command, cwd=ROOT, env=environment, capture_output=True, encoding="utf-8", check=True
    )
    return "\n".join(line.rstrip() for line in done.stdout.splitlines()) + "\n"


def rendered(text: str) -> str:
    """The README with the output of every command under it."""

    def fresh(block: re.Match[str]) -> str:
        return f"```console\n$ extractor {block['words']}\n{output_of(block['words'])}```"

    return _BLOCK.sub(fresh, text)


def main(argv: list[str]) -> int:
    """Compare, or write."""
    text = README.read_text(encoding="utf-8")
    now = rendered(text)
    if "--write" in argv:
        README.write_text(now, encoding="utf-8")
        return 0
    print(
        "README.md shows what the commands print" if now == text else "README.md is stale: run with --write"
    )
    return int(now != text)


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
