"""Run a command the way a shell does: exit code, output, error output."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import pytest

from monitor.cli import main


@dataclass(frozen=True)
class Answer:
    """What a command gave back."""

    code: int
    out: str
    err: str

    @property
    def document(self) -> Any:
        """The JSON document; exactly one, and no NaN in it."""
        return json.loads(self.out, parse_constant=pytest.fail)

    @property
    def one_line(self) -> str:
        """The error, which has to be one line that starts with the product's name."""
        lines = self.err.splitlines()
        assert len(lines) == 1, self.err
        assert lines[0].startswith("fieldsill: ")
        return lines[0]


def run(capsys: pytest.CaptureFixture[str], arguments: Sequence[object]) -> Answer:
    """Exit code, output and error output of fieldsill with those arguments."""
    with pytest.raises(SystemExit) as ended:
        main([str(argument) for argument in arguments])
    out, err = capsys.readouterr()
    return Answer(int(ended.value.code or 0), out, err)
