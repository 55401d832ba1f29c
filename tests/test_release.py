"""What is released: reproducible builds, complete archives, honest lower bounds, declared dependencies."""

from __future__ import annotations

import ast
import os
import shutil
import subprocess
import sys
import tarfile
import tomllib
import zipfile
from pathlib import Path

import pytest
from packaging.requirements import Requirement
from packaging.version import Version

import extractor

ROOT = Path(__file__).resolve().parents[1]
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
_LEFT_OUT = shutil.ignore_patterns("__pycache__", ".*_cache", ".git", ".hypothesis", "*.egg-info", ".venv*")


@pytest.fixture(scope="module")
def builds(tmp_path_factory: pytest.TempPathFactory) -> list[dict[str, Path]]:
    """Two builds from two copies of the project, of another age and another folder, with other rights."""
    pytest.importorskip("hatchling")
    made = []
    for at, (when, mask) in enumerate(((1_000_000_000, 0o022), (1_600_000_000, 0o077))):
        place = tmp_path_factory.mktemp(f"copy{at}") / ("x" * (at + 1))
        shutil.copytree(ROOT, place, ignore=_LEFT_OUT)
        for path in place.rglob("*"):
            os.utime(path, (when, when))
            path.chmod(path.stat().st_mode & ~mask)
        environment = {key: value for key, value in os.environ.items() if key != "SOURCE_DATE_EPOCH"}
        words = [sys.executable, "-m", "hatchling", "build", "-d", str(place / "built")]
        subprocess.run(words, cwd=place, env=environment, check=True, capture_output=True)
        made.append({path.suffix: path for path in (place / "built").iterdir()})
    return made


@pytest.mark.parametrize("kind", [".whl", ".gz"])
def test_two_builds_are_the_same_bytes(builds: list[dict[str, Path]], kind: str) -> None:
    first, second = (build[kind] for build in builds)
    assert first.name == second.name
    assert first.read_bytes() == second.read_bytes()


def test_the_wheel_holds_the_package_and_its_codebooks(builds: list[dict[str, Path]]) -> None:
    with zipfile.ZipFile(builds[0][".whl"]) as wheel:
        names = set(wheel.namelist())
    package = {f"extractor/{path.relative_to(ROOT / 'extractor').as_posix()}" for path in _files("extractor")}
    books = {f"extractor/_codebooks/{path.name}" for path in _files("codebooks")}
    assert package | books <= names
    others = {name.split("/")[0] for name in names} - {"extractor"}
    assert len(others) == 1 and others.pop().endswith(".dist-info")


def test_the_sdist_holds_all_that_its_tests_read(builds: list[dict[str, Path]]) -> None:
    with tarfile.open(builds[0][".gz"]) as archive:
        names = {name.partition("/")[2] for name in archive.getnames()}
    folders = (".ci", "codebooks", "examples", "extractor", "tests")
    wanted = {path.relative_to(ROOT).as_posix() for folder in folders for path in _files(folder)}
    assert wanted | {"pyproject.toml", "README.md", "DEVELOPERS.md", "LICENSE"} <= names


def _files(folder: str) -> list[Path]:
    return [p for p in (ROOT / folder).rglob("*") if p.is_file() and "__pycache__" not in p.parts]


def _declared(*extras: str) -> dict[str, Requirement]:
    lines = [
        *PROJECT["dependencies"],
        *(line for e in extras for line in PROJECT["optional-dependencies"][e]),
    ]
    return {requirement.name: requirement for requirement in map(Requirement, lines)}


def test_the_oldest_environment_is_what_the_project_allows() -> None:
    """Each lower bound is pinned as such, so that tests run on it and not on something newer."""
    lines = (ROOT / ".ci" / "oldest.txt").read_text(encoding="utf-8").splitlines()
    pins = {r.name: r for r in (Requirement(line) for line in lines if line and not line.startswith("#"))}
    for name, requirement in _declared("parquet").items():
        (bound,), (pin,) = requirement.specifier, pins[name].specifier
        assert (bound.operator, pin.operator) == (">=", "=="), name
        assert Version(bound.version) == Version(pin.version), name


def test_imports_are_declared_and_the_declared_are_imported() -> None:
    imported: set[str] = set()
    for path in _files("extractor"):
        if path.suffix == ".py":
            for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
                if isinstance(node, ast.Import):
                    imported |= {alias.name.split(".")[0] for alias in node.names}
                elif isinstance(node, ast.ImportFrom) and node.level == 0:
                    imported.add((node.module or "").split(".")[0])
    foreign = imported - set(sys.stdlib_module_names) - {"extractor"}
    runtime, optional = set(_declared()), set(_declared("parquet", "dask"))
    assert runtime <= foreign
    assert foreign <= optional


def test_versions_agree() -> None:
    assert PROJECT["version"] == extractor.__version__
