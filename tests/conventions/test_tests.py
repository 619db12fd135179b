"""A test that cannot fail is not a test."""

from __future__ import annotations

import ast

from tests.conventions import tree

CHECKS = ("assert_", "check_", "expect_")


def _can_fail(function: ast.FunctionDef | ast.AsyncFunctionDef) -> bool:
    for node in ast.walk(function):
        if isinstance(node, ast.Assert):
            return not isinstance(node.test, ast.Constant)
        if isinstance(node, ast.Call):
            called = ast.unparse(node.func).split(".")[-1]
            if called == "raises" or called.lstrip("_").startswith(CHECKS):
                return True
    return False


def test_every_test_asserts_something() -> None:
    empty = [
        f"{tree.name(path)}:{function.lineno} {function.name}"
        for path in tree.files("tests", suffix=".py")
        for function in tree.functions(path)
        if function.name.startswith("test_") and not _can_fail(function)
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
