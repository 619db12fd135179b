"""What check says of averaging that nobody declares."""

from __future__ import annotations

from pathlib import Path

from monitor.checks import findings
from monitor.config import load_site
from monitor.wiring import averaging_of
from tests.monitor.test_averaged_logs import EXAMPLES, NOW_NS


def test_check_says_what_is_taken_on_trust_of_the_firmware(tmp_path: Path) -> None:
    """One line, however many channels, and none where averages of power are declared."""
    for name in ("detector-board-site.toml", "detector-board-calibration.toml"):
        text = (EXAMPLES / name).read_text()
        (tmp_path / name).write_text(text)

    def said() -> int:
        site = load_site(tmp_path / "detector-board-site.toml")
        found = list(findings(site, NOW_NS, lambda _: [], averaging_of))
        return sum(f.ok and "holds for the board's firmware, too" in f.text for f in found)

    assert said() == 1
    path = tmp_path / "detector-board-calibration.toml"
    path.write_text(path.read_text().replace('averages = "none"', 'averages = "power"'))
    assert said() == 0
