"""The record: one SQLite file with everything that was measured, judged and done."""
