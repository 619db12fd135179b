"""What was really on the air, for whoever compares: a file, and an answer for any band."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray

from simulators.iq_receiver import Settings
from simulators.iq_signals import Air


class Truth:
    """Rows of true band powers beside the samples that were made; without a path, none."""

    def __init__(self, path: Path | None, air: Air, seed: int, boot_zero_ns: int) -> None:
        """boot_zero_ns: the boot clock at device second 0. Raises OSError."""
        self._air = air
        self._shares = air.shares()
        self._zero_ns = boot_zero_ns
        self._file = path.open("w", encoding="utf-8") if path is not None else None
        if self._file is not None:
            noise_w_per_hz = air.front.noise_mw_per_hz * 1e-3
            names = "".join(f",{name}_w" for name, _, _ in air.bands)
            self._file.write(
                "# SIMULATED: every figure is invented; mean power of the signals in each band at\n"
                "# the receiver's port (W), its own noise and spurs left out, tuned there or not\n"
                f"# air {air.name}, seed {seed}; noise {noise_w_per_hz:.4g} W/Hz\n"
                f"boot_ns,device_s,first_sample,samples,centre_hz,rate_hz,gain_db{names}\n"
            )

    def note(
        self,
        device_s: float,
        first: int,
        samples: int,
        settings: Settings,
        gain_db: float,
        power_mw: NDArray[np.float64],
    ) -> None:
        """Write a row: a stretch of samples of one setting, and each signal's mean power (mW)."""
        if self._file is None:
            return
        boot_ns = self._zero_ns + round(device_s * 1e9)
        watts = "".join(f",{value * 1e-3:.6g}" for value in power_mw @ self._shares)
        self._file.write(
            f"{boot_ns},{device_s:.6f},{first},{samples},"
            f"{settings.centre_hz},{settings.rate_hz},{gain_db:.3f}{watts}\n"
        )

    def flush(self) -> None:
        """Bring the file up to date."""
        if self._file is not None:
            self._file.flush()

    def close(self) -> None:
        """Close the file."""
        if self._file is not None:
            self._file.close()

    def power_w(self, low_hz: float, high_hz: float, device_s: float) -> float:
        """Mean power (W) between two frequencies at the port, with the levels of that time."""
        return sum(
            signal.level_mw(device_s)
            * (signal.on_s / signal.period_s if signal.period_s else 1.0)
            * signal.share(low_hz, high_hz)
            * 1e-3
            for signal in self._air.signals
        )
