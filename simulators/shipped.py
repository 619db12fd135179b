"""Files that are shipped with the simulators, by name, or a person's own by its path."""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from pathlib import Path
from typing import Any, TypeVar

Read = TypeVar("Read")


def available(folder: Path) -> list[str]:
    """Names of the files that are shipped in a folder."""
    return sorted(path.stem for path in folder.glob("*.toml"))


def load(
    folder: Path, name_or_path: str | Path, kind: str, read: Callable[[dict[str, Any]], Read]
) -> Read:
    """What read makes of a shipped file by its name, or of a .toml file; kind: what it is called.

    ValueError with one line. read may raise KeyError, TypeError or ValueError that names the key.
    """
    path = Path(name_or_path)
    if path.suffix != ".toml":
        path = folder / f"{name_or_path}.toml"
        if not path.is_file():
            known = ", ".join(available(folder))
            raise ValueError(f"no {kind} {name_or_path!r}; there are {known}, or name a .toml file")
    try:
        return read(tomllib.loads(path.read_text(encoding="utf-8")))
    except OSError as error:
        raise ValueError(f"{path}: {error.strerror}") from error
    except tomllib.TOMLDecodeError as error:
        raise ValueError(f"{path}: {error}") from error
    except (KeyError, TypeError, ValueError) as error:
        raise ValueError(f"{path}: {error!r} is missing or wrong") from error
