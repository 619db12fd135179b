"""The bench harness: what it finds, what its ratios mean, and that it refuses a wrong answer."""

from __future__ import annotations

import pytest

from tests.bench import bench_chain, bench_windows
from tests.bench.__main__ import discover, main, row, run
from tests.bench.measure import Figure, compare


def test_benches_are_found_by_name() -> None:
    assert discover()["windows"] is bench_windows.bench_windows


def test_ratio_above_one_is_better_whichever_way_is_better() -> None:
    assert Figure("time", 2.0, "s", "lower", 3.0).ratio == pytest.approx(1.5)
    assert Figure("readings", 3.0, "1/s", "higher", 2.0).ratio == pytest.approx(1.5)
    assert Figure("alone", 3.0, "s").ratio is None


def test_comparison_times_both_ways_in_turn() -> None:
    order: list[str] = []
    figure = compare("calls", lambda: order.append("a"), lambda: order.append("b"), "other", 2)
    assert order == ["a", "b", "a", "b", "a", "b"]
    assert figure.value > 0
    assert figure.reference_name == "other"


def test_only_benches_with_the_word_run() -> None:
    figure = Figure("length", 2.0, "m", "lower", 4.0, "rope")
    benches = {"long": lambda: [figure], "short": lambda: pytest.fail("must not run")}
    assert list(run(benches, ["lon"]))[2:] == ["long:", "  " + "  |  ".join(row(figure))]
    assert row(figure) == ("length", "2 m", "4 m rope", "2.00")


def test_unknown_word_is_told_and_fails(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["no-such-bench"]) == 2
    assert "windows" in capsys.readouterr().out


def test_windows_bench_refuses_averages_that_differ(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(bench_windows, "ALLOWED", -1.0)
    with pytest.raises(ValueError, match="averages differ"):
        list(bench_windows.bench_windows())


def test_chain_bench_refuses_fields_that_differ(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(bench_chain, "READINGS", 100)
    monkeypatch.setattr(bench_chain, "ALLOWED", -1.0)
    with pytest.raises(ValueError, match="fields differ"):
        list(bench_chain.bench_chain())


def test_chain_bench_gives_ns_per_reading_beside_both_ways(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.setattr(bench_chain, "READINGS", 1000)
    figures = list(bench_chain.bench_chain())
    assert [figure.unit for figure in figures] == ["", "ns/reading", "", "ns/reading"]
    assert all(figure.value <= bench_chain.ALLOWED for figure in figures[::2])
    assert all(figure.value > 0 and figure.ratio for figure in figures[1::2])
