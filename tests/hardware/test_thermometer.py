"""A thermometer shown as a file: thousandths of a degree (Linux hwmon, temp*_input)."""

from __future__ import annotations

from pathlib import Path

import pytest

from hardware import settings_for
from hardware.thermometer import Thermometer, tenths_of
from monitor.core.errors import ConfigError, DeviceError
from monitor.core.readings import MISSING

OPTIONS = {"host": "127.0.0.1", "rate_hz": 1e6, "gain_db": 19.7, "bands": [[868e6, 868.2e6]]}


@pytest.mark.parametrize(
    ("text", "tenths"),
    [("35500\n", 355), ("-20049", -200), ("0\n", 0), ("warm", MISSING), ("", MISSING),
     ("9999999", MISSING), ("-273150", MISSING)],
)  # fmt: skip
def test_thousandths_become_tenths(tmp_path, text, tenths):
    (tmp_path / "t").write_text(text)
    assert tenths_of(tmp_path / "t") == tenths


def test_it_is_read_again_after_a_second_and_a_lost_one_is_not_known(tmp_path):
    now = [0]
    path = tmp_path / "t"
    path.write_text("20000")
    one = Thermometer(path, lambda: now[0])
    assert one.celsius() == 20.0
    path.write_text("21000")
    now[0] = 900_000_000
    assert one.tenths() == 200
    now[0] = 1_000_000_000
    assert one.tenths() == 210
    path.unlink()
    now[0] = 2_000_000_000
    assert one.tenths() == MISSING
    assert one.celsius() is None


def test_none_tells_nothing():
    assert Thermometer(None, lambda: 0).tenths() == MISSING


def test_a_path_that_leads_nowhere_is_refused(tmp_path):
    with pytest.raises(ConfigError, match="temperature_file: 't' is no absolute path"):
        settings_for("iq_stream", OPTIONS | {"temperature_file": "t"}, tmp_path)
    path = tmp_path / "none"
    settings = settings_for("iq_stream", OPTIONS | {"temperature_file": str(path)}, tmp_path)
    with pytest.raises(DeviceError, match="sensor.temperature_file: .*none holds no thousandths"):
        settings.check_device()


def test_a_device_that_never_ends_is_no_thermometer() -> None:
    assert tenths_of(Path("/dev/zero")) == MISSING
