"""A record together with what every part of its page looks up in it."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass

from adjust.judge.critical import line_multiplier
from adjust.record.net import pointed_lines, unchecked_stations
from adjust.record.page_blocks import NAME_MOST, Cell, Texts, catalogue, name_cell
from adjust.record.shown import Entry, Shown, plain

ROWS_MOST = 2_000
"""Rows of observations and of lines on the page: above this many the suspects, unchecked and worst come first and the
rest stands in the files. A table of 2,000 rows still scrolls and filters at once in a browser of an ordinary laptop."""
STATIONS_MOST = 10_000
"""Rows of stations: a page with more of them is slow to open; the least certain are kept."""
HASH_SHOWN = 12


@dataclass(frozen=True)
class View:
    """A record, its units, the texts, and places of stations and readings in its lists."""

    record: Entry
    shown: Shown
    texts: Texts
    stations: dict[str, int]
    """Position of each station by name."""
    readings: dict[str, int]
    """Position of the first scalar of each reading by id."""
    unchecked: frozenset[str]
    """Ids of readings that nothing checks."""
    suspects: frozenset[str]
    hanging: frozenset[str]
    """Stations that hang on unchecked readings."""
    order: tuple[int, ...]
    """Positions of the observations that the page shows, in the order of its rows."""
    in_page: frozenset[int]
    """The same without an order."""
    factor: float | None
    """Half interval of a height at the job's confidence over its standard deviation; None where there is none."""

    @classmethod
    def of(cls, record: Entry) -> View:
        """The view of a complete record."""
        readings: dict[str, int] = {}
        for i, one in enumerate(record["observations"]):
            readings.setdefault(one["id"], i)
        order = reading_order(record)
        given = record["settings"]["variance_factor"] == "given"
        degrees = None if given else record["solution"]["degrees_of_freedom"]
        return cls(
            record,
            Shown.of(record),
            catalogue(),
            {one["station"]: i for i, one in enumerate(record["stations"])},
            readings,
            frozenset(one["observation"] for one in record["unchecked"]),
            frozenset(one["observation"] for one in record["suspects"]),
            frozenset(unchecked_stations(record)) | {one["station"] for one in record["side_shots"]},
            order,
            frozenset(order),
            line_multiplier(record["settings"]["confidence"], degrees),
        )

    @property
    def confidence(self) -> str:
        """'95 %'."""
        return f"{100 * self.record['settings']['confidence']:g} %"

    def interval(self, sd: float | None) -> float | None:
        """Half interval (metres) of a height with this standard deviation; None where it is held or has none."""
        return sd * self.factor if sd and self.factor else None

    def said(self, key: str) -> str | None:
        """What [record] says under a key."""
        text: str | None = self.record["particulars"][key]
        return text

    def station_cell(self, name: object) -> Cell:
        """A station's name that leads to its row."""
        i = self.stations.get(str(name))
        return name_cell(name, "" if i is None else f"s{i}")

    def reading_cell(self, name: object) -> Cell:
        """A reading's id that leads to its row."""
        i = self.readings.get(str(name))
        return name_cell(name, "" if i is None or i not in self.in_page else f"o{i}")

    def ends(self, start: object, end: object) -> str:
        """'12-17': positions of two stations; '' where one of them is none."""
        a, b = self.stations.get(str(start)), self.stations.get(str(end))
        return "" if a is None or b is None else f"{a}-{b}"

    def sight(self, observation: Entry) -> str:
        """The ends of a reading's first sight."""
        return next((self.ends(*line) for line in pointed_lines(observation)), "")

    def title(self) -> str:
        """The job's title."""
        return plain(self.record["job"]["title"], 10 * NAME_MOST) or self.texts("page.untitled")


def reading_order(record: Entry) -> tuple[int, ...]:
    """Suspects in order of blame, then what nothing checks, then the book's order; the worst where there are many."""
    observations = record["observations"]
    blamed = {one["observation"]: k for k, one in enumerate(record["suspects"])}
    unchecked = {one["observation"] for one in record["unchecked"]}
    many = len(observations) > ROWS_MOST

    def rank(i: int) -> tuple[float, float, int]:
        one = observations[i]
        if one["id"] in blamed:
            return (0, blamed[one["id"]], i)
        if one["suspect"] or one["id"] in unchecked:
            return (1 if one["suspect"] else 2, 0, i)
        return (3, -abs(one["statistic"] or 0.0) if many else 0.0, i)

    return tuple(sorted(range(len(observations)), key=rank)[:ROWS_MOST])


def inputs_hash(record: Entry) -> str:
    """One SHA-256 for all inputs: of their hashes and names, a line each, as sha256sum prints them."""
    lines = "".join(f"{one['sha256']}  {one['file']}\n" for one in record["job"]["inputs"])
    return hashlib.sha256(lines.encode()).hexdigest()
