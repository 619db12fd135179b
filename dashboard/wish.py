"""What a request asks of the history: span, average, quantity, limit and scale. Pure."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from datetime import date

from dashboard import span
from dashboard.span import Span
from monitor.core.errors import ConfigError

AVERAGES = (360, 1800)


@dataclass(frozen=True, slots=True)
class Wish:
    """What a request asks for. scope: index of the limit whose ledge is drawn, None: the first."""

    span: Span
    averaging_s: int
    show: str
    scope: int | None
    logarithmic: bool

    def keys(self, **other: object) -> dict[str, str]:
        """Everything but the span, as an address writes it."""
        keys: dict[str, object] = {
            "averaging": self.averaging_s,
            "show": self.show,
            "scale": "log" if self.logarithmic else "straight",
            "scope": self.scope,
            **other,
        }
        return {key: str(value) for key, value in keys.items() if value is not None}


def _choice(args: Mapping[str, str], key: str, choices: tuple[str, ...]) -> str:
    text = args.get(key) or choices[0]
    if text not in choices:
        raise ConfigError(f"{key}: {text!r} is not one of {', '.join(choices)}")
    return text


def scope_number(text: str) -> int | None:
    """The number of a limit as a request writes it; None where it writes none."""
    if not text:
        return None
    if not whole_number(text):
        raise ConfigError(f"scope: {text[:20]!r} is not the number of a limit; follow a link")
    return int(text)


def whole_number(text: str) -> bool:
    """Whether a text is a whole number of a size that a request may ask for."""
    return text.isascii() and text.isdecimal() and len(text) <= 9


def read_wish(args: Mapping[str, str], fallback: date) -> Wish:
    """The wish of a request; ConfigError names the key that is wrong."""
    return Wish(
        span=span.read(args.get("from") or "", args.get("to") or "", fallback),
        averaging_s=int(_choice(args, "averaging", tuple(str(a) for a in AVERAGES))),
        show=_choice(args, "show", ("e", "ratio")),
        scope=scope_number(args.get("scope") or ""),
        logarithmic=_choice(args, "scale", ("log", "straight")) == "log",
    )
