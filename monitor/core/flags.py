"""What a reading, a block, a window or a result has to say about itself."""

from __future__ import annotations

from enum import IntFlag


class Flag(IntFlag):
    """Bits that travel from the reading through every later figure (design: nothing hides)."""

    NO_SIGNAL_WIRE = 1  # outside the valid-voltage window: the reading is not a reading
    BELOW_RANGE = 2  # the figure is an upper bound
    ABOVE_RANGE = 4  # the figure is a lower bound
    CLIPPED = 8  # converter at its rails: a lower bound
    OUT_OF_TEMPERATURE = 16
    CALIBRATION_OVERDUE = 32
    CLOCK_UNSYNCHRONISED = 64
    SIMULATED = 128
    LOG_AVERAGED = 256  # log averaged before linearising: a lower bound
    COMPONENT_ONLY = 512  # fewer than three axes: a component, a lower bound
    OUT_OF_BAND = 1024
    SUPPLY_OUT_OF_RANGE = 2048
    GAP = 4096
    TEMPERATURE_UNKNOWN = 8192
    INVENTED_CALIBRATION = 16384  # figures of an example: no certificate stands behind them


LOWER_BOUND = Flag.ABOVE_RANGE | Flag.CLIPPED | Flag.LOG_AVERAGED | Flag.COMPONENT_ONLY
UPPER_BOUND = Flag.BELOW_RANGE

WORDS = {
    Flag.NO_SIGNAL_WIRE: "detector voltage outside its valid window",
    Flag.BELOW_RANGE: "below the detector's range",
    Flag.ABOVE_RANGE: "above the detector's range",
    Flag.CLIPPED: "converter clipped",
    Flag.OUT_OF_TEMPERATURE: "outside the calibrated temperature",
    Flag.CALIBRATION_OVERDUE: "calibration overdue",
    Flag.CLOCK_UNSYNCHRONISED: "clock unsynchronised",
    Flag.SIMULATED: "simulated",
    Flag.LOG_AVERAGED: "log averaged before linearising",
    Flag.COMPONENT_ONLY: "fewer than three axes",
    Flag.OUT_OF_BAND: "outside the calibrated band",
    Flag.SUPPLY_OUT_OF_RANGE: "supply voltage out of range",
    Flag.GAP: "gap",
    Flag.TEMPERATURE_UNKNOWN: "temperature of the instrument not known",
    Flag.INVENTED_CALIBRATION: "calibration figures are invented",
}


def words(bits: int) -> list[str]:
    """The plain words of every bit that is set."""
    return [text for flag, text in WORDS.items() if bits & flag]
