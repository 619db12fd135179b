"""Wrong input: one clear line, exit code 2 or 3, nothing written, whatever command meets it."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.system.commands import fieldsill, filled

EXAMPLES = Path(__file__).parents[2] / "hardware" / "examples"
SITE, CALIBRATION = "detector-board-site.toml", "detector-board-calibration.toml"
DEVICE = "/dev/serial/by-id/usb-detector-board-if00"

# what is wrong: file, text that stands there, text instead, exit code, words of the line
CASES = {
    "unknown key": (SITE, "hold_s = 3", "hold_sec = 3", 2, ["sensor.hold_s"]),
    "misspelt key": (SITE, "commit_s", "comit_s", 2, ["record.comit_s", "did you mean commit_s"]),
    "missing file": (SITE, CALIBRATION + '"', 'gone.toml"', 3, ["gone.toml"]),
    "no such port": (SITE, DEVICE, "/dev/nowhere9", 3, ["sensor.device", "/dev/nowhere9"]),
    "negative loss": (
        CALIBRATION,
        '["650MHz", 1.1]',
        '["650MHz", -1.1]',
        2,
        ["element[2]", "-1.1"],
    ),
    "not monotonic": (CALIBRATION, "[-30, 1.340]", "[-30, 1.640]", 2, ["detector.curve"]),
    "outside a table": (SITE, 'high = "2.7GHz"', 'high = "3.5GHz"', 2, ["element[1]", "3.5 GHz"]),
    "unknown limits": (SITE, '["icnirp-2020",', '["icnirp-2525",', 2, ["icnirp-2525"]),
    "no TOML": (SITE, "[record]", "[record", 2, [SITE]),
}


@pytest.mark.parametrize("command", ["check", "measure", "run"])
@pytest.mark.parametrize("wrong", CASES)
def test_one_line_and_nothing_written(wrong: str, command: str, tmp_path: Path) -> None:
    name, old, new, code, words = CASES[wrong]
    for each in (SITE, CALIBRATION):
        text = (EXAMPLES / each).read_text()
        if each == SITE:
            text = text.replace("port = 8080", "port = 0")
        (tmp_path / each).write_text(filled(text, {old: new}) if each == name else text)
    before = sorted(tmp_path.iterdir())
    done = fieldsill(command, "--site", tmp_path / SITE)
    assert done.returncode == code, done.stderr
    assert done.stdout == ""
    lines = done.stderr.splitlines()
    assert len(lines) == 1, done.stderr
    assert lines[0].startswith("fieldsill: ")
    for word in words:
        assert word in lines[0]
    assert sorted(tmp_path.iterdir()) == before


def test_a_calibration_of_the_future_is_refused(tmp_path: Path) -> None:
    """By check; run refuses it only where something has set the machine's clock."""
    for each in (SITE, CALIBRATION):
        text = (EXAMPLES / each).read_text()
        text = text.replace("date = 2024", "date = 2124").replace("due = 2027", "due = 2127")
        (tmp_path / each).write_text(text)
    done = fieldsill("check", "--site", tmp_path / SITE)
    assert (done.returncode, done.stdout) == (2, "")
    (line,) = done.stderr.splitlines()
    assert line.startswith(f"fieldsill: {CALIBRATION}: calibration.date: 2124-09-14 lies in the")
    assert line.endswith("look at the date or the clock")
    assert len(list(tmp_path.iterdir())) == 2


def test_without_a_command_the_help_is_printed_as_it_is_laid_out() -> None:
    done = fieldsill()
    assert (done.returncode, done.stderr) == (0, "")
    assert done.stdout == fieldsill("--help").stdout
    assert "\n  rehearse " in done.stdout


def test_rehearse_names_its_scenes() -> None:
    words = fieldsill("rehearse", "--help").stdout.split()
    assert {"busy-day,", "over-limit,", "quiet,"} <= set(words)
    done = fieldsill("rehearse", "--scenario", "storm", "--exit")
    assert done.returncode == 2
    (line,) = done.stderr.splitlines()
    assert "'storm'" in line
    assert "busy-day, over-limit, quiet" in line


def test_too_long_a_rehearsal_leaves_no_folder(tmp_path: Path) -> None:
    done = fieldsill("rehearse", "--history", "99999999d", "--folder", tmp_path / "new", "--exit")
    assert done.returncode == 2
    assert done.stderr.splitlines() == [
        "fieldsill: --history '99999999d': too long; ten years (3650d) at most"
    ]
    assert list(tmp_path.iterdir()) == []


@pytest.mark.parametrize(
    ("arguments", "word"),
    [
        (["limits", "--frequency", "900 parsecs"], "900 parsecs"),
        (["limits", "--set", "icnirp-1066"], "icnirp-1066"),
        (
            ["ratio", "--set", "icnirp-2020", "--population", "general_public", "--at", "1GHz"],
            "1GHz",
        ),
        (["averages", "nowhere.csv", "--averaging", "360"], "nowhere.csv"),
        (["iq", "nowhere.cu8"], "nowhere.cu8"),
        (["status", "--record", "nowhere.db"], "nowhere.db"),
        (["run", "--site", "nowhere.toml"], "nowhere.toml"),
        (["serve", "--record", "nowhere.db", "--port", "99999"], "99999"),
        (["serve", "--record", "nowhere.db", "--port", "0", "--host", "256.1.1.1"], "256.1.1.1"),
        (["rehearse", "--folder", "/proc/no-such", "--exit"], "/proc/no-such"),
        (["ratio"], "--set"),
        (["no-such-command"], "no-such-command"),
    ],
)
def test_wrong_arguments(arguments: list[str], word: str) -> None:
    done = fieldsill(*arguments)
    assert done.returncode in (2, 3), done.stderr
    assert len(done.stderr.splitlines()) == 1, done.stderr
    assert word in done.stderr
