"""A module is read in one sitting, a function on one screen."""

from __future__ import annotations

import ast

from tests.conventions import tree

MODULE_LINES = 300
FUNCTION_LINES = 40


def _body_lines(function: ast.FunctionDef | ast.AsyncFunctionDef) -> int:
    """Lines from the def to the end, the docstring left out: it is there to be long enough."""
    total = (function.end_lineno or function.lineno) - function.lineno + 1
    first = function.body[0]
    if ast.get_docstring(function, clean=False) is not None:
        total -= (first.end_lineno or first.lineno) - first.lineno + 1
    return total


def test_modules_are_short() -> None:
    sizes = {
        tree.name(path): len(path.read_text(encoding="utf-8").splitlines())
        for path in tree.files(*tree.PACKAGES, "tests", suffix=".py")
    }
    assert len(sizes) > 20
    assert {name: n for name, n in sizes.items() if n >= MODULE_LINES} == {}


def test_functions_fit_a_screen() -> None:
    long = {
        f"{tree.name(path)}:{function.lineno} {function.name}": _body_lines(function)
        for path in tree.files(*tree.PACKAGES, suffix=".py")
        for function in tree.functions(path)
        if _body_lines(function) > FUNCTION_LINES
    }
    assert long == {}
