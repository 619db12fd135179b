"""python -m tests.bench [WORD ...]: run the benches whose name holds one of the words, or all.

A bench is a function bench_... in a module bench_....py of this folder; it takes nothing and
yields Figures. Exit code 1 where one breaks, so that a broken bench is not taken for a slow one.
"""

from __future__ import annotations

import importlib
import platform
import sys
import traceback
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path

from tests.bench.measure import Figure

Bench = Callable[[], Iterable[Figure]]
HEADER = ("measure", "value", "beside", "times better")


def discover(folder: Path = Path(__file__).parent) -> dict[str, Bench]:
    """Every bench by its name, without the leading bench_, in the order of the modules."""
    found: dict[str, Bench] = {}
    for path in sorted(folder.glob("bench_*.py")):
        module = importlib.import_module(f"tests.bench.{path.stem}")
        for name, value in vars(module).items():
            if name.startswith("bench_") and callable(value):
                found[name.removeprefix("bench_")] = value
    return found


def row(figure: Figure) -> tuple[str, str, str, str]:
    """A figure as the four columns that are printed."""
    beside = "-"
    if figure.reference is not None:
        beside = f"{figure.reference:.4g} {figure.unit} {figure.reference_name}".rstrip()
    ratio = "-" if figure.ratio is None else f"{figure.ratio:.2f}"
    return figure.what, f"{figure.value:.4g} {figure.unit}".rstrip(), beside, ratio


def run(benches: dict[str, Bench], words: list[str]) -> Iterator[str]:
    """Run the chosen benches; yields the lines to print, each as soon as it is known."""
    yield f"Python {platform.python_version()}, {platform.machine()}"
    yield "  ".join(HEADER)
    for name, bench in benches.items():
        if not words or any(word in name for word in words):
            yield f"{name}:"
            for figure in bench():
                yield "  " + "  |  ".join(row(figure))


def main(words: list[str]) -> int:
    """Print what run gives; 2 where no bench fits the words, 1 where one broke."""
    benches = discover()
    if words and not any(word in name for word in words for name in benches):
        print(f"no bench is named like {' or '.join(words)}; there are: {', '.join(benches)}")
        return 2
    try:
        for line in run(benches, words):
            print(line, flush=True)
    except Exception:  # noqa: BLE001 - whatever breaks a bench is shown and makes it fail
        traceback.print_exc()
        return 1
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
