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
    CALIBRATION_DUE_SOON = 32768  # a notice ahead of time; it forbids nothing
    ELEMENT_CHANGED = 65536  # a part of the chain is not the one that was calibrated
    ASSUMED_TERMS = 131072  # terms of the budget are defaults that nobody has confirmed
    CORRECTED_LOG = 262144  # averaged logs of a noise-like signal, corrected by 2.51 dB


LOWER_BOUND = Flag.ABOVE_RANGE | Flag.CLIPPED | Flag.LOG_AVERAGED | Flag.COMPONENT_ONLY
UPPER_BOUND = Flag.BELOW_RANGE

WORDS = {
    Flag.NO_SIGNAL_WIRE: "detector voltage outside its valid window",
    Flag.BELOW_RANGE: "below the detection limit",
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
    Flag.CALIBRATION_DUE_SOON: "calibration due soon",
    Flag.ELEMENT_CHANGED: "an element was changed without a new calibration",
    Flag.ASSUMED_TERMS: "terms of the uncertainty are assumed, not confirmed",
    Flag.CORRECTED_LOG: "averaged logs, corrected as noise-like",
}


def words(bits: int) -> list[str]:
    """The plain words of every bit that is set."""
    return [text for flag, text in WORDS.items() if bits & flag]
