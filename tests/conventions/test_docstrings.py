"""What others may call says what it does."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from pathlib import Path

from tests.conventions import tree

Documented = ast.Module | ast.ClassDef | ast.FunctionDef | ast.AsyncFunctionDef


def _public(nodes: list[ast.stmt]) -> Iterator[ast.ClassDef | ast.FunctionDef]:
    for node in nodes:
        if isinstance(node, ast.ClassDef | ast.FunctionDef) and not node.name.startswith("_"):
            if "overload" not in (ast.unparse(mark) for mark in node.decorator_list):
                yield node


def _documented(path: Path) -> Iterator[Documented]:
    """Module, public classes and functions, and the methods of classes without a base.

    A method of a derived class may only fill in what its base has already described.
    """
    module = tree.parsed(path)
    if module.body:
        yield module
    for node in _public(module.body):
        yield node
        if isinstance(node, ast.ClassDef) and not node.bases:
            yield from _public(node.body)


def test_public_things_have_a_docstring() -> None:
    bare = [
        f"{tree.name(path)}:{getattr(node, 'lineno', 1)} {getattr(node, 'name', 'module')}"
        for path in tree.files(*tree.PACKAGES, suffix=".py")
        for node in _documented(path)
        if not ast.get_docstring(node)
    ]
    assert bare == []


def test_public_functions_are_typed() -> None:
    untyped = []
    for path in tree.files(*tree.PACKAGES, suffix=".py"):
        for function in tree.functions(path):
            arguments = [*function.args.posonlyargs, *function.args.args, *function.args.kwonlyargs]
            named = [a for a in arguments if a.arg not in ("self", "cls")]
            if function.returns is None or any(a.annotation is None for a in named):
                untyped.append(f"{tree.name(path)}:{function.lineno} {function.name}")
    assert untyped == []
