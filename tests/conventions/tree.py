"""The files of this house, as the convention tests read them."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from functools import cache
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]
PACKAGES = ("monitor", "hardware", "dashboard", "simulators")
"""What the wheel carries."""

SHIPPED = ("monitor", "hardware", "dashboard")
"""What runs beside a real detector."""

_FOLDERS = (*PACKAGES, "tests", ".ci")
_TEXT = {
    ".py", ".md", ".toml", ".html", ".css", ".js", ".json", ".svg", ".sh", ".csv",
    ".service", ".target", ".rules", ".lock", ".ino", ".c", ".h", "",
}  # fmt: skip


def files(*folders: str, suffix: str = "") -> list[Path]:
    """Files under the folders, caches left out, in a fixed order; suffix "" means all."""
    found = (path for folder in folders for path in (ROOT / folder).rglob("*" + suffix))
    return sorted(path for path in found if path.is_file() and "__pycache__" not in path.parts)


def texts() -> list[Path]:
    """Every text file that belongs to the project, those of the top level included."""
    top = [path for path in ROOT.iterdir() if path.is_file()]
    return [path for path in (*top, *files(*_FOLDERS)) if path.suffix in _TEXT]


def name(path: Path) -> str:
    """A path as a failure names it: from the top of the house."""
    return path.relative_to(ROOT).as_posix()


@cache
def parsed(path: Path) -> ast.Module:
    """The syntax tree of a Python file."""
    return ast.parse(path.read_text(encoding="utf-8"), filename=str(path))


def functions(path: Path) -> Iterator[ast.FunctionDef | ast.AsyncFunctionDef]:
    """Every function and method of a Python file."""
    for node in ast.walk(parsed(path)):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            yield node


def imports(path: Path) -> set[str]:
    """Dotted names of the modules that a Python file imports, wherever in it."""
    found: set[str] = set()
    for node in ast.walk(parsed(path)):
        if isinstance(node, ast.Import):
            found.update(alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            found.add(node.module or "")
    return found


def calls(path: Path) -> Iterator[tuple[int, str]]:
    """(line, dotted name) of every call whose target is a plain dotted name."""
    for node in ast.walk(parsed(path)):
        if isinstance(node, ast.Call):
            dotted = ast.unparse(node.func)
            if dotted.replace(".", "").replace("_", "").isalnum():
                yield node.lineno, dotted
