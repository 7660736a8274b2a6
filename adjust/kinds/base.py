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
    """'length' or 'angle': the unit of its values."""
    stations: tuple[str, ...]
    """Its station columns."""
    sights: tuple[tuple[int, int], ...]
    """Pairs of positions in ``stations``: standing station (or -1, the origin) and target."""
    touches: tuple[str, ...]
    """For each part the component of its stations that it depends on: 'plane', 'height' or 'both'."""
    says: str
    """What it tells a starting computation: length, pointings, rise or position."""
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


def azimuth(sights: Array) -> tuple[Array, Array]:
    """Azimuth (m,) clockwise from north of sights (m, 4), and its partials (m, 4).

    a = atan2(E, N); da/dE = N/D^2, da/dN = -E/D^2 with D^2 = E^2 + N^2.
    """
    east, north = sights[:, 0], sights[:, 1]
    d2 = east**2 + north**2
    zero = np.zeros_like(d2)
    return np.arctan2(east, north), np.stack([north / d2, -east / d2, zero, zero], axis=1)
