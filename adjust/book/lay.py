"""Where the lines of a table lie: their surface, what stands above the marks, and slope distances brought to level.

A slope distance S with a zenith angle z in its row is reduced to the horizontal at the instrument. With the bent ray
straightened, z' = z + k theta/2, its horizontal and upward parts in the horizon of the instrument are H = S sin z' and
U = S cos z'; the angle between the two verticals is theta = atan2(H, R + U), and the distance at the height of the
instrument is the chord 2 R sin(theta/2). That is S sin z' less H U/R, the usual correction for the convergence of the
verticals: 13.7 mm at 1 km with 87 m of rise. R stands for R + h1 here, which matters by H U h1/R^2 (2 micrometres there
at 1,000 m).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from adjust.book.cells import Cells
from adjust.frames import RADIUS_M
from adjust.kinds.base import ABOVE, SLOPE, Kind
from adjust.network import Array

REDUCED = "slope to horizontal at the instrument"
GROUND_FROM = "ground-from"
GRID = "grid"
ZENITH = "zenith_angle"
_HEIGHTS = tuple(field.name for field in ABOVE)


@dataclass(frozen=True)
class Lay:
    """Values (n,) on a surface, heights (n, 2) of instrument and target, corrections (n,) by name."""

    values: Array
    surface: str = ""
    above: Array | None = None
    corrections: tuple[tuple[str, Array], ...] = ()
    by_slope: Array | None = None
    """(n,) partial of a reduced distance by the slope distance, sin z; None where nothing was reduced."""
    by_zenith: Array | None = None
    """(n,) its partial by the zenith angle, S cos z, metres a radian."""

    def sd(self, rows: list[int], slope: Array, zenith: Array | float) -> Array:
        """Standard deviations of the values of ``rows`` from those of slope distances (m) and zenith angles (rad)."""
        if self.by_slope is None or self.by_zenith is None:
            return slope
        return np.asarray(np.hypot(self.by_slope[rows] * slope, self.by_zenith[rows] * zenith))


def lay_of(cells: Cells, kind: Kind, values: Array, use: list[int], refraction: float) -> Lay:
    """How the rows ``use`` of a table lie; a slope distance with a zenith angle in its row is reduced."""
    declared = cells.table.surface if kind.says == "length" else kind.surface
    given = [c for c in (*_HEIGHTS, ZENITH) if c not in kind.value and any(cells.text(c)[i] for i in use)]
    if given and not declared and kind.says == "length":
        cells.header_fault(
            given[0], "", 'where do these distances lie? Add surface = "slope", "ground" or "ground-from" to the '
            "[[book]] block of the table"
        )  # fmt: skip
    surface = "" if declared == GRID else declared
    above = _above(cells, kind, use) if surface else None
    if ZENITH not in given or not declared:
        return Lay(values, surface, above)
    z = _zeniths(cells, use, declared)
    level = horizontal(values, z, refraction)
    return Lay(level, GROUND_FROM, above, ((REDUCED, level - values),), np.sin(z), values * np.cos(z))


def _above(cells: Cells, kind: Kind, use: list[int]) -> Array | None:
    """Heights (n, 2) of instrument and target; None where there are none. One without the other is a fault."""
    if not any(cells.has(column) for column in _HEIGHTS) or ABOVE[0] not in kind.columns:
        return None
    texts = [cells.text(column) for column in _HEIGHTS]
    for i in use:
        if bool(texts[0][i]) != bool(texts[1][i]):
            missing = _HEIGHTS[0 if texts[1][i] else 1]
            cells.fault(i, missing, "", "one height without the other; write 0 where the sight runs to the mark itself")
    return np.nan_to_num(np.stack([cells.values(column, use) for column in _HEIGHTS], axis=1))


def _zeniths(cells: Cells, use: list[int], declared: str) -> Array:
    """Zenith angles (n,) that reduce the distances of the rows."""
    if declared != SLOPE:
        hint = f'a zenith angle reduces slope distances only, and these are "{declared}"; remove it or say "{SLOPE}"'
        cells.header_fault(ZENITH, "", hint)
    texts = cells.text(ZENITH)
    for i in use:
        if not texts[i]:
            cells.fault(i, ZENITH, "", "the other rows have a zenith angle; fill it, or use another table")
    return cells.values(ZENITH, use)


def horizontal(slope: Array, zenith: Array, refraction: float, radius: float = RADIUS_M) -> Array:
    """Horizontal distances (n,) at the instrument from slope distances (m) and zenith angles (radians) (n,)."""
    theta = np.arctan2(slope * np.sin(zenith), radius + slope * np.cos(zenith))
    z = zenith + refraction * theta / 2
    theta = np.arctan2(slope * np.sin(z), radius + slope * np.cos(z))
    return np.asarray(2 * radius * np.sin(theta / 2))
