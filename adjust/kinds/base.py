"""What a kind of observation has to say about itself, and the parts that several kinds share.

A kind never sees coordinates, matrices or covariances. It gets sights (m, s, 4) and the values of its group unknown
(m,) and returns computed values (m, p), partials by the sights (m, p, s, 4) and by the group unknown (m, p).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from adjust.fields import Field
from adjust.network import Array

SLOPE = "slope"
Geometry = Callable[[Array, Array], tuple[Array, Array, Array]]


@dataclass(frozen=True)
class GroupUnknown:
    """An unknown common to the rows that agree in some columns, such as the orientation of a set."""

    what: str
    by: tuple[str, ...]
    """Columns whose texts name the group within the file."""
    shared: bool
    """False: local to one set-up and eliminated there; True: an unknown of the whole network."""
    optional: str = ""
    """A column that must be filled for the row to have this unknown; empty: every row has it."""
    absorbs: frozenset[str] = frozenset({"turn"})
    """Freedoms of the network that the unknown takes up: turning the network adds the turn to it."""
    setting: str = ""
    """A key of [frame] that gives it: with a standard deviation it is one unknown of the whole job with the setting
    as an observation, without one it is a constant."""


@dataclass(frozen=True)
class Kind:
    """Everything the program knows of one kind of observation."""

    name: str
    """Singular, as in the record."""
    table: str
    """Name of its table, empty if it has none of its own."""
    order: int
    """Place in docs."""
    dimension: str
    """'length', 'angle' or 'number': the unit of its values."""
    stations: tuple[str, ...]
    """Its station columns."""
    sights: tuple[tuple[int, int], ...]
    """Pairs of positions in ``stations``: standing station (or -1, the origin) and target."""
    touches: tuple[str, ...]
    """For each part the component of its stations that it depends on: 'plane', 'height', 'both' or '' (none)."""
    says: str
    """What it tells a starting computation: length (on the block's surface), pointings, rise, zenith or position."""
    fixes: frozenset[str]
    """Freedoms of a network without control that it takes away: turn, scale (rows without absorbing unknown)."""
    geometry: Geometry
    columns: tuple[Field, ...]
    """Its own columns beside the stations and the common ones."""
    value: tuple[str, ...]
    """The columns that can hold its value: exactly one must be filled."""
    parts: tuple[str, ...] = ("",)
    instrument: Field | None = None
    """The key of [instruments.NAME] that holds its error model."""
    pointings: float = 1.0
    """Number of pointings behind one value; the instrument's figure is multiplied by its square root."""
    surface: str = ""
    """Surface of its sights where the table does not choose one."""
    in_space: Geometry | None = None
    """Its geometry on the surface slope, where it depends on heights as well; None: the one geometry serves all."""
    length_column: str = ""
    setup_column: str = ""
    group: GroupUnknown | None = None
    occupies: bool = True
    """Read by an instrument centred over its station to targets centred over theirs."""
    from_control: bool = False
    """Its rows are the control marks themselves; a free datum sets them aside."""
    wraps: bool = False
    """Values are angles on a circle."""
    meaning: str = ""

    def touched(self, surface: str) -> tuple[str, ...]:
        """For each part the component of its stations that it depends on, on the surface of a block."""
        return ("both",) * len(self.touches) if surface == SLOPE and self.in_space else self.touches

    def on(self, surface: str) -> Geometry:
        """Its geometry on the surface of a block."""
        return self.in_space if surface == SLOPE and self.in_space else self.geometry


OFFSET = (
    Field("offset_along", "length", "how far the target stood beyond the mark, seen from the instrument; short of it: "
          "negative"),
    Field("offset_right", "length", "how far the target stood to the right of the mark; to the left: negative"),
)  # fmt: skip
ABOVE = (
    Field("instrument_height", "length", "height of the instrument above the mark `from`; blank: both are zero"),
    Field("target_height", "length", "height of the target above the mark `to`; blank: both are zero"),
)
"""Columns of kinds whose sights run from instrument to target."""
AIR = (
    Field("temperature", "temperature", "of the air at the time of the reading, degrees C or with its unit: 72 F"),
    Field("pressure", "pressure", "of the air there, not reduced to the sea; hPa or with its unit: 29.5 inHg"),
    Field("humidity", "humidity", "relative humidity in per cent; left out: dry air"),
    Field("ppm", "ppm", "correction for the atmosphere in parts per million, in place of the weather"),
)
REFLECTOR = Field("reflector", "text", "the reflector of this row")
"""Columns of measured distances."""


def azimuth(sights: Array) -> tuple[Array, Array]:
    """Azimuth (m,) clockwise from north of sights (m, 4), and its partials (m, 4).

    a = atan2(E, N); da/dE = N/D^2, da/dN = -E/D^2 with D^2 = E^2 + N^2.
    """
    east, north = sights[:, 0], sights[:, 1]
    d2 = east**2 + north**2
    zero = np.zeros_like(d2)
    return np.arctan2(east, north), np.stack([north / d2, -east / d2, zero, zero], axis=1)
