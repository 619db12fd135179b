"""Where the tuner goes: all is seen once, within the span, with the centre out of the way."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hardware.iq_plan import fixed_tune, tunes
from monitor.core.errors import ConfigError

SPAN_HZ = 1.92e6


def seen(places):
    """(channel, low, high) on the air of every part."""
    return sorted(
        (part.channel, place.centre_hz + part.low_hz, place.centre_hz + part.high_hz)
        for place in places
        for part in place.parts
    )


def test_bands_that_fit_are_seen_from_one_place_between_them():
    bands = [(868.0e6, 868.6e6), (869.0e6, 869.7e6)]
    (place,) = tunes(bands, SPAN_HZ, 10e3)
    assert place.centre_hz == 868_800_000
    assert seen([place]) == [(0, *bands[0]), (1, *bands[1])]


def test_a_single_band_is_put_beside_the_centre_where_there_is_room():
    (place,) = tunes([(100e6, 100.2e6)], SPAN_HZ, 10e3)
    low, high = place.bands[0]
    assert low > 10e3 or high < -10e3
    assert max(abs(low), abs(high)) <= SPAN_HZ / 2


@pytest.mark.parametrize("width_hz", [1.0e6, 1.5e6, 1.88e6])
def test_a_band_that_the_centre_must_lie_in_has_it_away_from_its_middle(width_hz):
    """A carrier in the middle of its band is what there is most often."""
    (place,) = tunes([(100e6, 100e6 + width_hz)], SPAN_HZ, 10e3)
    assert abs(place.centre_hz - 100e6 - width_hz / 2) >= 20e3 - 1
    (band,) = place.bands
    assert max(abs(edge) for edge in band) <= SPAN_HZ / 2


def test_of_bands_without_a_gap_between_none_has_the_centre_in_its_middle():
    bands = [(100.0e6, 100.6e6), (100.6e6, 101.2e6), (101.2e6, 101.8e6)]
    (place,) = tunes(bands, SPAN_HZ, 10e3)
    assert all(abs(place.centre_hz - (a + b) / 2) >= 20e3 for a, b in bands)


def test_a_wide_carrier_is_taken_in_equal_slices():
    places = tunes([(800e6, 805e6)], SPAN_HZ, 10e3)
    assert len(places) == 3
    parts = seen(places)
    widths = [high - low for _, low, high in parts]
    assert widths == pytest.approx([5e6 / 3] * 3, abs=1)
    assert all(a[2] == pytest.approx(b[1], abs=1e-3) for a, b in zip(parts, parts[1:]))


BAND = st.tuples(st.integers(20, 3000), st.floats(0.05, 9.0)).map(
    lambda pair: (pair[0] * 1e6 + 0.5, (pair[0] + pair[1]) * 1e6)
)


@given(st.lists(BAND, min_size=1, max_size=8))
def test_every_band_is_seen_exactly_once_and_within_the_span(bands):
    places = tunes(bands, SPAN_HZ, 10e3)
    for place in places:
        assert 0 < place.centre_hz < 2**32
        for low, high in place.bands:
            assert -SPAN_HZ / 2 - 1 <= low < high <= SPAN_HZ / 2 + 1
    for channel, (low, high) in enumerate(bands):
        mine = [(a, b) for c, a, b in seen(places) if c == channel]
        assert mine[0][0] == pytest.approx(low, abs=1e-3)
        assert mine[-1][1] == pytest.approx(high, abs=1e-3)
        assert sum(b - a for a, b in mine) == pytest.approx(high - low, abs=0.01)


def test_a_place_that_somebody_chose_must_show_every_band():
    bands = [(868.0e6, 868.6e6), (869.0e6, 869.7e6)]
    assert fixed_tune(bands, 868_900_000, SPAN_HZ)[0].centre_hz == 868_900_000
    with pytest.raises(ConfigError, match="869 to 869.7 MHz is outside the span"):
        fixed_tune(bands, 868_000_000, SPAN_HZ)
