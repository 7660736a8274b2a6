"""Numbers of the record, rounded so that the same versions give the same bytes; no NaN, and -0.0 is 0."""

from __future__ import annotations

import math


def coordinate(x: float) -> float | None:
    """Metres to 1e-8, None for NaN."""
    return _clean(round(float(x), 8)) if math.isfinite(x) else None


def angle(x: float) -> float | None:
    """Radians to 1e-12, None for NaN."""
    return _clean(round(float(x), 12)) if math.isfinite(x) else None


def number(x: float | None) -> float | None:
    """Ten significant digits, None for None and NaN."""
    if x is None or not math.isfinite(x):
        return None
    return _clean(float(f"{float(x):.10g}"))


def _clean(x: float) -> float:
    return x + 0.0 if x else 0.0
