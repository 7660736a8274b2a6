"""Where readings of a kind stand in a table: in a row's own cells, or worked out of several rows of a raw book."""

from __future__ import annotations

from dataclasses import dataclass, field

from adjust.kinds.base import Kind
from adjust.network import Array


@dataclass(frozen=True)
class Sheet:
    """Where readings of a kind stand in a table, and what was found of them so far."""

    kind: Kind
    stations: tuple[str, ...]
    """Columns of its stations."""
    value: tuple[str, ...]
    """Columns of which one holds the value."""
    sd: str = "sd"
    what: str = ""
    """Added to the name of a row that holds several readings."""
    names: tuple[list[str], ...] = ()
    """For each station column the name in every row of the table, where the row itself does not hold it."""
    sizes: dict[str, Array] = field(default_factory=dict)
    """(n,) by column of sizes that were worked out: length (metres), setups, count; in place of the row's cells."""
    wanting: dict[str, tuple[str, str]] = field(default_factory=dict)
    """By the same columns: the column to name where such a size is missing, and what to fill."""

    @classmethod
    def of(cls, kind: Kind) -> Sheet:
        """The kind's own table."""
        return cls(kind, kind.stations, kind.value)
