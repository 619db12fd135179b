"""How commands print."""

from __future__ import annotations

import json
import math

import click


def _plain(value: object) -> object:
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [_plain(item) for item in value]
    if hasattr(value, "item"):
        value = value.item()
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def print_json(document: object) -> None:
    """One JSON document; a figure that is not there is null, never NaN."""
    click.echo(json.dumps(_plain(document), allow_nan=False, ensure_ascii=False))
