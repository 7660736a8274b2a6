"""Names on the drawing: as they are, or by number where the drawing's font cannot set them."""

from __future__ import annotations

from dataclasses import dataclass

from adjust.record.sheet import drawable
from adjust.record.shown import Entry, plain

STATION_KEYS = ("at", "from", "to", "first", "second")


@dataclass(frozen=True)
class Writing:
    """Which names are shown by number: [7] is the seventh row of stations.csv."""

    numbered: dict[str, str]
    """Name and what stands for it."""

    @classmethod
    def of(cls, record: Entry) -> Writing:
        """The names of a record."""
        names = [one["station"] for one in record["stations"]]
        return cls({name: f"[{i + 1}]" for i, name in enumerate(names) if not drawable(plain(name, 18))})

    def name(self, name: str, most: int = 18) -> str:
        """A station's name as it is drawn."""
        return self.numbered.get(name) or plain(name, most)

    def reading(self, observation: Entry) -> Entry:
        """The observation with names as they are drawn."""
        return {**observation, **{key: self.numbered.get(observation[key], observation[key]) for key in STATION_KEYS}}

    def note(self) -> str:
        """What the numbers mean; '' where every name is drawn."""
        if not self.numbered:
            return ""
        first = next(iter(self.numbered.values()))
        return f"Names in signs that this font lacks stand by their row in stations.csv: {first} is row {first[1:-1]}."
