"""The other end of each wire, for rehearsal and tests."""
