"""Levelled height difference: rise = height(to) - height(from)."""

from __future__ import annotations

import numpy as np

from adjust.fields import Field
from adjust.kinds.base import Kind
from adjust.network import Array


def geometry(sights: Array, group: Array) -> tuple[Array, Array, Array]:
    """Rises (m, 1) of sights (m, 1, 4), metres, with partials (m, 1, 1, 4) and (m, 1)."""
    m = len(sights)
    by_sight = np.zeros((m, 1, 1, 4))
    by_sight[..., 3] = 1.0
    return sights[:, 0, 3:], by_sight, np.zeros((m, 1))


KIND = Kind(
    name="levelled",
    table="levelled",
    order=50,
    dimension="length",
    stations=("from", "to"),
    sights=((0, 1),),
    touches=("height",),
    says="rise",
    fixes=frozenset({"scale"}),  # where zenith angles tie the plane to the heights; heights alone have none
    geometry=geometry,
    columns=(
        Field("rise", "length", "height of `to` minus height of `from`"),
        Field("length", "length", "length of the levelled line, for models per root distance", above=0.0),
        Field("setups", "number", "number of set-ups of the line, for models per root set-up", above=0.0),
    ),
    value=("rise",),
    instrument=Field(
        "levelling",
        "precision",
        "standard deviation of a single running, per root distance or set-up",
        dimension="rise",
    ),
    length_column="length",
    setup_column="setups",
    occupies=False,
    meaning="levelled height differences, `to` minus `from`",
)
