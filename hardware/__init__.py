"""Front ends: each turns one wire into readings and device status, and nothing else."""

from hardware.registry import KINDS, Settings, declared, open_front_end, settings_for

__all__ = ["KINDS", "Settings", "declared", "open_front_end", "settings_for"]
