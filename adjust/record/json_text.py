"""record.json as bytes: UTF-8, a line for each key and for each entry of a list, no NaN.

One entry a line keeps differences between two records readable, and lets the compiled encoder do the work.
"""

from __future__ import annotations

import json
from typing import Any

_ENCODE = json.JSONEncoder(ensure_ascii=False, allow_nan=False).encode


def json_bytes(record: dict[str, Any]) -> bytes:
    """The record as JSON text; raises ValueError if a NaN got in."""
    lines = [f"{_ENCODE(key)}: {_value(value)}" for key, value in record.items()]
    return ("{\n" + ",\n".join(lines) + "\n}\n").encode()


def _value(value: Any) -> str:
    if isinstance(value, list) and value and isinstance(value[0], dict):
        return "[\n" + ",\n".join("  " + _ENCODE(one) for one in value) + "\n]"
    return _ENCODE(value)
