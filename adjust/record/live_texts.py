"""Texts of the live plan and of the pictures from the page's catalogue; names and texts made safe for markup."""

from __future__ import annotations

import html
import tomllib
import unicodedata
from collections.abc import Mapping
from functools import cache
from importlib.resources import files
from typing import Any

from adjust.record.shown import plain

CATALOGUE = "page/texts.toml"
NAME, TITLE = 18, 80
"""Most characters of a name beside its station, and in the small window that opens over a symbol."""


@cache
def catalogue() -> dict[str, str]:
    """The English texts, keys with their table: 'plan.north'."""
    read = tomllib.loads((files("adjust.record") / CATALOGUE).read_text(encoding="utf-8"))
    return {f"{table}.{key}": text for table, texts in read.items() for key, text in texts.items()}


class Texts:
    """Texts by key; those given go before the catalogue's, so that a page in another language needs only its own."""

    def __init__(self, given: Mapping[str, Any] | None = None) -> None:
        self.found = catalogue() | flat(given or {})

    def __call__(self, key: str, **values: object) -> str:
        """The text with its figures put in."""
        return self.found[key].format(**values) if values else self.found[key]

    def safe(self, key: str, **values: object) -> str:
        """The same, escaped for markup."""
        return safe(self(key, **values))


def flat(texts: Mapping[str, Any]) -> dict[str, str]:
    """Keys with a dot, whether the catalogue is given flat or table by table."""
    found: dict[str, str] = {}
    for key, value in texts.items():
        if isinstance(value, Mapping):
            found |= {f"{key}.{inner}": text for inner, text in flat(value).items()}
        else:
            found[key] = str(value)
    return found


def safe(text: object) -> str:
    """Text for markup: quotes, angle brackets and ampersands escaped."""
    return html.escape(str(text), quote=True)


def name_of(name: object, most: int = NAME) -> str:
    """A station's name cut to ``most`` characters, without control signs, escaped."""
    return safe(plain(name, most))


def number(value: float, places: int = 2) -> str:
    """A coordinate of the drawing: ``places`` decimals without trailing zeros, never minus zero."""
    text = f"{value:.{places}f}"
    if "." in text:
        text = text.rstrip("0").rstrip(".")
    return "0" if text in ("-0", "") else text


def text_width(text: str, size: float) -> float:
    """About the width of a line of sans serif type, rather too wide: signs by class, in parts of ``size``.

    The browser chooses the font, so that no table of a font could be exact.
    """
    return size * sum(_em(sign) for sign in text)


def _em(sign: str) -> float:
    if unicodedata.east_asian_width(sign) in "WF":
        return 1.05
    if unicodedata.combining(sign):
        return 0.0
    if sign in "MW@%mw—…":
        return 0.95
    return 0.36 if sign in "iljtfI1.,:;'|!()[] -" and sign != "1" else 0.72 if sign.isupper() else 0.62
