"""All tests in two processes side by side: python -m tests [words for pytest].

Those that start whole daemons and wait on real time are one part, all others the other: on two
cores the whole then takes little longer than its longer half. The first part's output is held back
until the second has ended.
"""

from __future__ import annotations

import subprocess
import sys
import tempfile
from pathlib import Path

WAITING = ("tests/system", "tests/hardware")
NOTHING_CHOSEN = 5
"""pytest's exit code where no test was chosen, as by -k."""


def main(words: list[str]) -> int:
    """Exit code of the part that failed; 0 where none did and at least one ran a test."""
    pytest = [sys.executable, "-m", "pytest", *words]
    others = [f"--ignore={part}" for part in WAITING]
    with tempfile.TemporaryFile() as held:
        waiting = subprocess.Popen(
            [*pytest, "-o", "cache_dir=.pytest_cache/waiting", *WAITING], stdout=held, stderr=held
        )
        rest = subprocess.run([*pytest, *others, "tests"], check=False).returncode
        codes = [rest, waiting.wait()]
        held.seek(0)
        sys.stdout.write(f"\nThe other part, {' and '.join(WAITING)}:\n\n")
        sys.stdout.write(held.read().decode(errors="replace"))
    failed = [code for code in codes if code not in (0, NOTHING_CHOSEN)]
    return failed[0] if failed else min(codes)


if __name__ == "__main__":
    if not Path("pyproject.toml").exists():
        sys.exit("run it from the checkout's top: python -m tests")
    sys.exit(main(sys.argv[1:]))
