"""Front ends: one wire each, turned into readings."""
