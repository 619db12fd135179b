"""The built package works by itself: installed from its wheel, without the source tree."""

from __future__ import annotations

import json
import os
import shutil
import subprocess
import sys
import tomllib
import zipfile
from collections.abc import Callable
from pathlib import Path

import pytest

from tests.conventions import tree

Installed = Callable[..., str]
NOT_SHIPPED = {".sh"}

pytestmark = pytest.mark.timeout(600)


def _clean_environment() -> dict[str, str]:
    """The caller's, without what could point back at the source tree."""
    leaks = {"PYTHONPATH", "PYTHONHOME", "VIRTUAL_ENV"}
    return {key: value for key, value in os.environ.items() if key not in leaks}


def _run(*words: str | Path, cwd: Path) -> str:
    done = subprocess.run(words, cwd=cwd, env=_clean_environment(), capture_output=True, text=True)
    assert done.returncode == 0, f"{words}\n{done.stdout}\n{done.stderr}"
    return done.stdout


@pytest.fixture(scope="module")
def wheel(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """The wheel, built from a copy so that nothing is left in the source tree."""
    folder = tmp_path_factory.mktemp("wheel")
    source = folder / "source"
    source.mkdir()
    for part in ("pyproject.toml", "README.md", "LICENSE"):
        shutil.copy(tree.ROOT / part, source)
    for package in tree.PACKAGES:
        shutil.copytree(tree.ROOT / package, source / package)
    pip = [sys.executable, "-m", "pip", "--disable-pip-version-check", "wheel", "--quiet"]
    _run(*pip, "--no-deps", "--no-build-isolation", "-w", folder, source, cwd=folder)
    shutil.rmtree(source)
    (built,) = folder.glob("fieldsill-*.whl")
    return built


@pytest.fixture(scope="module")
def installed(wheel: Path, tmp_path_factory: pytest.TempPathFactory) -> Installed:
    """Runs a program of a fresh venv that holds the lock file's packages and the wheel."""
    folder = tmp_path_factory.mktemp("installed")
    _run(sys.executable, "-m", "venv", folder / "venv", cwd=folder)
    bin_folder = folder / "venv/bin"
    pip = [bin_folder / "python", "-m", "pip", "--disable-pip-version-check", "install", "--quiet"]
    lock = tree.ROOT / "requirements.lock"
    _run(*pip, "--require-hashes", "-r", lock, cwd=folder)
    _run(*pip, "--no-deps", "--no-index", wheel, cwd=folder)

    def run(program: str, *words: str) -> str:
        return _run(bin_folder / program, *words, cwd=folder)

    return run


def test_wheel_holds_every_file_of_the_packages_and_nothing_else(wheel: Path) -> None:
    held = {name for name in zipfile.ZipFile(wheel).namelist() if ".dist-info/" not in name}
    there = {
        tree.name(path)
        for path in tree.files(*tree.PACKAGES)
        if path.suffix not in NOT_SHIPPED and path.name != ".DS_Store"
    }
    assert any(name.endswith(".toml") for name in there)
    assert any(name.endswith(".html") for name in there)
    assert held == there


def test_installed_command_tells_its_version(installed: Installed) -> None:
    settings = tomllib.loads((tree.ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    assert settings["project"]["version"] in installed("fieldsill", "--version")


def test_packages_import_from_where_they_are_installed(installed: Installed) -> None:
    for package in tree.PACKAGES:
        place = installed("python", "-c", f"import {package}; print({package}.__file__)")
        assert "site-packages" in place


def test_installed_command_reads_its_data_files(installed: Installed) -> None:
    """ICNIRP 2020, table 5: 1.375 sqrt(f/MHz) V/m at 900 MHz, averaged over 30 minutes."""
    answer = json.loads(installed("fieldsill", "limits", "--frequency", "900MHz", "--json"))
    whole_body = [
        row
        for row in answer["limits"]
        if row["set"] == "icnirp-2020"
        and (row["population"], row["scope"]) == ("general_public", "whole_body")
        and (row["quantity"], row["unit"]) == ("E", "V/m")
    ]
    assert [(row["value"], row["averaging_s"]) for row in whole_body] == [
        (pytest.approx(1.375 * 900**0.5), 1800)
    ]
