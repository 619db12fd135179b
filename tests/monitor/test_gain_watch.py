"""What checks of the gain say, as events and an alarm."""

from __future__ import annotations

from pathlib import Path

import pytest

from monitor import wiring
from monitor.config import load_site
from monitor.core.gain_check import KEY, KIND
from monitor.core.readings import MISSING
from monitor.gain_watch import GainWatch

EXAMPLES = Path("hardware/examples")
STEPS = """[[detector.step]]
gain = "19.7"
table = [["800MHz", -31.7], ["1GHz", -31.7]]

[[detector.step]]
gain = "12.5"
table = [["800MHz", -25.0], ["1GHz", -25.0]]
"""


class Front:
    """Gives the checks that were put in."""

    def __init__(self):
        self.said = []

    def checked(self):
        said, self.said = self.said, []
        return said


def said(moved_db, floors=(-80_000, -80_000)):
    return {
        "gain_db": 19.7, "other_db": 12.5, "levels": [-40_000, -40_000],
        "other_levels": [-47_000, -47_000], "floors": list(floors), "moved_db": list(moved_db),
        "u_db": [0.1, 0.1],
    }  # fmt: skip


def watch(folder, steps=""):
    text = (EXAMPLES / "iq-stream-calibration.toml").read_text()
    site_text = (EXAMPLES / "iq-stream-site.toml").read_text()
    if steps:
        text = text.replace("dbfs_to_dbm = -12.0\n", "")
        text = text.replace("\n[[element]]", "\n" + steps + "\n[[element]]", 1)
        for band in ("lower", "upper"):
            named = f'band = "{band} carrier"'
            site_text = site_text.replace(named, named + '\ngain = "19.7"')
    (folder / "iq-stream-calibration.toml").write_text(text)
    (folder / "site.toml").write_text(site_text)
    site = load_site(folder / "site.toml")
    chain = wiring.chain_for(site, wiring.sensor_settings(site))
    front = Front()
    return front, GainWatch(front, site.channels, site.bands, chain)


def told(events):
    return [(event.kind, event.name, event.body.get("raised")) for event in events]


def test_a_check_that_finds_nothing_is_recorded_with_its_figures(tmp_path):
    front, one = watch(tmp_path)
    assert one.look(5, frozenset()) == []
    front.said = [said([-7.2, -6.0])]
    (event,) = one.look(5, frozenset())
    assert (event.kind, event.boot_ns) == (KIND, 5)
    assert event.body["channels"][1] == {
        "channel": "upper", "moved_db": -6.0, "u_db": 0.1, "step_db": pytest.approx(-7.2),
        "said": "as the gain", "image_share": None,
    }  # fmt: skip
    assert event.body["text"].startswith("lower moved -7.2 dB (+-0.1), the gain -7.2 dB: as the")


def test_a_level_that_moves_otherwise_is_an_alarm_until_a_check_clears_it(tmp_path):
    front, one = watch(tmp_path)
    front.said = [said([-21.6, -7.2])]
    events = one.look(5, frozenset())
    assert told(events) == [(KIND, "", None), ("alarm", KEY, True)]
    assert events[1].body["text"] == (
        "lower moved -21.6 dB where the gain moved -7.2: products of other signals, made in the "
        "receiver, are in it"
    )
    front.said = [said([-21.6, -7.2])]
    assert told(one.look(6, frozenset({KEY}))) == [(KIND, "", None)]
    front.said = [said([-7.2, -7.2], floors=(MISSING, MISSING))]
    assert told(one.look(7, frozenset({KEY}))) == [(KIND, "", None)]
    front.said = [said([-7.2, -7.2])]
    assert told(one.look(8, frozenset({KEY}))) == [(KIND, "", None), ("alarm", KEY, False)]


def test_an_image_is_suspected_from_a_fifth_of_the_level(tmp_path):
    front, one = watch(tmp_path)
    front.said = [said([-7.2, -7.2]) | {"image_shares": [0.19, None]}]
    assert told(one.look(5, frozenset())) == [(KIND, "", None)]
    front.said = [said([-7.2, -7.2]) | {"image_shares": [0.02, 0.21]}]
    events = one.look(5, frozenset())
    assert told(events) == [(KIND, "", None), ("alarm", KEY, True)]
    assert events[1].body["text"].startswith("upper: 21% of it is the image of what lies on the")


def test_calibrated_steps_say_how_far_it_must_move(tmp_path):
    """Source: -31.7 less -25 is -6.7 dB; half a dB is allowed. Nominal would be -7.2 +- 1.5."""
    front, one = watch(tmp_path, STEPS)
    front.said = [said([-6.7, -7.5])]
    events = one.look(5, frozenset())
    rows = events[0].body["channels"]
    assert rows[0]["step_db"] == pytest.approx(-6.7)
    assert [row["said"] for row in rows] == ["as the gain", "more"]
    assert told(events)[1] == ("alarm", KEY, True)


def test_a_front_end_without_checks_is_left_alone(tmp_path):
    _, one = watch(tmp_path)
    bare = GainWatch(object(), one._channels, one._bands, None)  # noqa: SLF001
    assert bare.look(5, frozenset()) == []
