"""How commands print."""

from __future__ import annotations

import json

import click

from monitor.control import plain


def print_json(document: object) -> None:
    """One JSON document; a figure that is not there is null, never NaN."""
    click.echo(json.dumps(plain(document), allow_nan=False, ensure_ascii=False))
