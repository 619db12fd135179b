"""Children are started again; only a refusal at the very first start is final."""

from __future__ import annotations

from monitor import supervise
from monitor.supervise import SOON_S, Child, look


class Process:
    """A process that has ended with a code, or runs (None)."""

    def __init__(self, code: int | None) -> None:
        self.code = code

    def poll(self) -> int | None:
        return self.code


def child(code: int | None, *, lived: bool = False) -> Child:
    made = Child("serve", ["none"], lived=lived)
    made.process = Process(code)  # type: ignore[assignment]
    made.started_s = 100.0
    return made


def test_a_refusal_at_the_first_start_is_final() -> None:
    told: list[str] = []
    for code in (2, 3):
        assert look(child(code), 101.0, told.append) == code
    assert told == []


def test_a_refusal_after_it_has_lived_is_tried_again() -> None:
    told: list[str] = []
    late = child(3)
    assert look(late, 100.0 + SOON_S, told.append) is None
    again = child(3, lived=True)
    assert look(again, 101.0, told.append) is None
    assert again.process is None
    assert "again in 1 s" in told[0]


def test_a_start_that_the_system_refuses_is_tried_again(monkeypatch) -> None:
    def refuse(*_: object, **__: object) -> None:
        raise OSError("no memory")

    monkeypatch.setattr(supervise.subprocess, "Popen", refuse)
    told: list[str] = []
    fresh = Child("measure", ["none"])
    assert look(fresh, 1.0, told.append) is None
    assert "no memory" in told[0]
    assert fresh.again_s > 1.0
