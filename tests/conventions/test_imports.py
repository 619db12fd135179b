"""Import rules that the contracts in pyproject.toml cannot express."""

from __future__ import annotations

import subprocess
import sys

import pytest

from tests.conventions import tree

CORE_MAY_IMPORT = {
    "__future__", "abc", "base64", "binascii", "bisect", "collections", "collections.abc",
    "dataclasses", "difflib", "enum", "fractions", "functools", "hashlib", "heapq", "itertools",
    "json", "math", "operator", "re", "statistics", "struct", "types", "typing", "zlib",
}  # fmt: skip
"""The pure part of the standard library; numpy and the core itself come on top."""

NOT_IN_THE_DAEMON = ("scipy", "pandas", "flask", "werkzeug", "sqlite_utils", "dashboard")
DAEMON_SIDE = ("monitor", "hardware")


def _allowed_in_core(module: str) -> bool:
    return (
        module in CORE_MAY_IMPORT
        or module.split(".")[0] == "numpy"
        or (module == "monitor.core" or module.startswith("monitor.core."))
    )


def test_core_imports_only_what_is_pure() -> None:
    strangers = {
        f"{tree.name(path)}: {module}"
        for path in tree.files("monitor/core", suffix=".py")
        for module in tree.imports(path)
        if not _allowed_in_core(module)
    }
    assert strangers == set()


def test_hardware_knows_only_the_core_of_us() -> None:
    strangers = {
        f"{tree.name(path)}: {module}"
        for path in tree.files("hardware", suffix=".py")
        for module in tree.imports(path)
        if module.split(".")[0] in tree.PACKAGES
        and not module.startswith(("monitor.core", "hardware"))
    }
    assert strangers == set()


def test_only_wiring_imports_hardware() -> None:
    importers = {
        tree.name(path)
        for path in tree.files("monitor", "dashboard", suffix=".py")
        if any(module.split(".")[0] == "hardware" for module in tree.imports(path))
    }
    assert importers <= {"monitor/wiring.py"}


DAEMON_MODULES = [
    tree.name(path)[: -len(".py")].replace("/", ".")
    for path in (tree.ROOT / "monitor/wiring.py", tree.ROOT / "monitor/cli/measure.py")
    if path.exists()
]


@pytest.mark.parametrize("module", ["monitor.cli", *DAEMON_MODULES])
def test_daemon_stays_light(module: str) -> None:
    """Asks a fresh interpreter what importing the module really brings in."""
    program = f"import sys, {module}; print(' '.join({{m.split('.')[0] for m in sys.modules}}))"
    loaded = subprocess.run(
        [sys.executable, "-c", program], cwd=tree.ROOT, capture_output=True, text=True, check=True
    ).stdout.split()
    assert module.split(".")[0] in loaded
    assert set(loaded) & set(NOT_IN_THE_DAEMON) == set()
