"""The daemon: acquire, average, judge, alarm, record."""
