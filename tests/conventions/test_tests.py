"""A test that cannot fail is not a test."""

from __future__ import annotations

import ast

from tests.conventions import tree

Function = ast.FunctionDef | ast.AsyncFunctionDef


def _called(node: ast.AST) -> str:
    return ast.unparse(node.func).split(".")[-1] if isinstance(node, ast.Call) else ""


def _asserts(function: Function) -> bool:
    """Whether the function itself holds an assertion, a constant one not counted."""
    return any(
        (isinstance(node, ast.Assert) and not isinstance(node.test, ast.Constant))
        or _called(node) in ("raises", "fail")
        or _called(node).startswith("assert_")
        for node in ast.walk(function)
    )


def _helpers() -> set[str]:
    """Names of the functions in tests/ that assert something for those who call them."""
    return {
        function.name
        for path in tree.files("tests", suffix=".py")
        for function in tree.functions(path)
        if _asserts(function) and not function.name.startswith("test_")
    }


def test_every_test_asserts_something() -> None:
    helpers = _helpers()
    empty = [
        f"{tree.name(path)}:{function.lineno} {function.name}"
        for path in tree.files("tests", suffix=".py")
        for function in tree.functions(path)
        if function.name.startswith("test_")
        and not _asserts(function)
        and not any(_called(node) in helpers for node in ast.walk(function))
    ]
    assert empty == []


def test_every_skip_says_why() -> None:
    silent = [
        f"{tree.name(path)}:{node.lineno}"
        for path in tree.files("tests", suffix=".py")
        for node in ast.walk(tree.parsed(path))
        if isinstance(node, ast.Call)
        and ast.unparse(node.func).endswith(("mark.skip", "mark.skipif", "pytest.skip"))
        and not any(k.arg == "reason" for k in node.keywords)
        and not (ast.unparse(node.func).endswith("pytest.skip") and node.args)
    ]
    assert silent == []
