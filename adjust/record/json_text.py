"""record.json as bytes: UTF-8, one key a line, no NaN."""

from __future__ import annotations

import json
from typing import Any


def json_bytes(record: dict[str, Any]) -> bytes:
    """The record as JSON text; raises ValueError if a NaN got in."""
    return (json.dumps(record, ensure_ascii=False, allow_nan=False, indent=1) + "\n").encode()
