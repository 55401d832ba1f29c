"""What the package index says of the packages this project needs: newest and withdrawn versions, licence, Python.

    python -m tests.evidence.dependencies [--extras]

Asks the index that pip uses for PEP 691 pages, one for each package named in ``pyproject.toml``, and the installed
metadata for licences. Exits with 1 where a version that the project allows at its lower end, or the one installed, was
withdrawn ("yanked", PEP 592), or where no release that is allowed runs on this Python. Where the index cannot be
reached it says so and judges nothing.
"""

from __future__ import annotations

import argparse
import json
import os
import subprocess
import sys
import tomllib
from dataclasses import dataclass
from importlib import metadata
from pathlib import Path
from typing import Any
from urllib.error import URLError
from urllib.request import Request, urlopen

from packaging.requirements import Requirement
from packaging.specifiers import InvalidSpecifier, SpecifierSet
from packaging.utils import (
    InvalidSdistFilename,
    InvalidWheelFilename,
    parse_sdist_filename,
    parse_wheel_filename,
)
from packaging.version import Version

ROOT = Path(__file__).resolve().parents[2]
USUAL_INDEX = "https://pypi.org/simple"
_SECONDS = 20


@dataclass(frozen=True)
class Release:
    """One version of a package: whether all its files were withdrawn, and the Python they want."""

    version: Version
    yanked: bool
    python: str


def index() -> str:
    """The index that pip asks."""
    said = os.environ.get("PIP_INDEX_URL", "")
    if not said:
        words = [sys.executable, "-m", "pip", "config", "get", "global.index-url"]
        said = subprocess.run(words, capture_output=True, text=True, check=False).stdout.strip()
    return (said or USUAL_INDEX).rstrip("/")


def releases(name: str, page: dict[str, Any]) -> list[Release]:
    """The final releases on a PEP 691 page, in order."""
    files: dict[Version, list[dict[str, Any]]] = {}
    for file in page["files"]:
        version = _version(file["filename"])
        if version is not None and not version.is_prerelease:
            files.setdefault(version, []).append(file)
    return [
        Release(
            version,
            all(f.get("yanked") for f in some),
            next((p for f in some if (p := f.get("requires-python"))), ""),
        )
        for version, some in sorted(files.items())
    ]


def _version(filename: str) -> Version | None:
    try:
        if filename.endswith(".whl"):
            return parse_wheel_filename(filename)[1]
        return parse_sdist_filename(filename)[1]
    except (InvalidSdistFilename, InvalidWheelFilename):
        return None


def _page(name: str, at: str) -> dict[str, Any]:
    request = Request(f"{at}/{name}/", headers={"Accept": "application/vnd.pypi.simple.v1+json"})
    with urlopen(request, timeout=_SECONDS) as answer:
        page: dict[str, Any] = json.load(answer)
    return page


def judged(requirement: Requirement, found: list[Release], installed: Version | None) -> list[str]:
    """What is wrong with a requirement; nothing where nothing is."""
    allowed = [r for r in found if requirement.specifier.contains(r.version)]
    if not allowed:
        return ["no release is allowed"]
    faults = []
    if allowed[0].yanked:
        faults.append(f"the oldest allowed, {allowed[0].version}, was withdrawn")
    if any(r.yanked and r.version == installed for r in found):
        faults.append(f"the installed one, {installed}, was withdrawn")
    if not any(runs_here(r.python) for r in allowed if not r.yanked):
        faults.append(f"no allowed release runs on Python {sys.version_info[0]}.{sys.version_info[1]}")
    return faults


def runs_here(python: str) -> bool:
    try:
        return SpecifierSet(python).contains(".".join(map(str, sys.version_info[:3])))
    except InvalidSpecifier:
        return True


def _installed(name: str) -> tuple[Version | None, str]:
    """The version that is installed and its licence as the package states it."""
    try:
        about = metadata.metadata(name)
    except metadata.PackageNotFoundError:
        return None, "not installed"
    classifiers = [
        c.rpartition(" :: ")[2] for c in about.get_all("Classifier") or [] if c.startswith("License")
    ]
    told = [
        *(about.get_all("License-Expression") or []),
        ", ".join(classifiers),
        *(about.get_all("License") or []),
    ]
    licence = next((line for line in told if line), "not said")
    return Version(about["Version"]), licence.splitlines()[0][:34]


def main(argv: list[str] | None = None) -> int:
    """Print the table and what is wrong."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--extras", action="store_true", help="also the packages of the extras")
    options = parser.parse_args(argv)
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    lines = list(project["dependencies"])
    if options.extras:
        lines += [line for extra in project["optional-dependencies"].values() for line in extra]
    at, faults = index(), list[str]()
    print(f"{'package':<20}{'allowed':<12}{'installed':<20}{'newest here':<20}{'licence':<36}withdrawn")
    for requirement in {r.name: r for r in map(Requirement, lines)}.values():
        try:
            found = releases(requirement.name, _page(requirement.name, at))
        except (URLError, OSError, ValueError) as error:
            print(f"the package index {at} cannot be asked ({error}); nothing is judged")
            return 0
        installed, licence = _installed(requirement.name)
        newest = max(
            (r for r in found if not r.yanked and runs_here(r.python)), key=lambda r: r.version, default=None
        )
        allowed = [str(r.version) for r in found if r.yanked and requirement.specifier.contains(r.version)]
        print(
            f"{requirement.name:<20}{requirement.specifier!s:<12}{installed!s:<20}"
            f"{str(newest.version) if newest else 'none':<20}{licence:<36}{', '.join(allowed) or '-'}"
        )
        faults += [f"{requirement.name}: {fault}" for fault in judged(requirement, found, installed)]
    print("\n".join(faults) or "no package that is allowed at its lower end or installed was withdrawn")
    return int(bool(faults))


if __name__ == "__main__":
    sys.exit(main())
