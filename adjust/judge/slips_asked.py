"""The forms of the slips of text in one reading, where no adjustment is there to ask: closures, starts, trials.

What a slip changes is read off the book alone; slips of where and how (the wrong station, a constant, a height) need
places and are not asked.
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

from adjust.book.job import Job
from adjust.book.raw_texts import RawText, raw_texts
from adjust.book.settings import Table
from adjust.errors import InputError
from adjust.judge import slips_of_text
from adjust.judge.causes import (
    AS_GOOD,
    LARGEST_M,
    LISTED,
    NOUNS,
    SILENT_BELOW,
    Cause,
    different,
    faces_agree,
    slips,
)
from adjust.judge.readings import kind_word
from adjust.judge.slip_forms import Form
from adjust.kinds import KINDS
from adjust.network import Block
from adjust.units import TURN


@dataclass(frozen=True)
class Asked:
    """What the slips of text need of a reading; it is Written (adjust.judge.slip_forms)."""

    block: Block
    i: int
    raws: tuple[RawText, ...]
    kind: str
    noun: str
    wraps: bool


@dataclass(frozen=True)
class Books:
    """The tables of a job, each read once: a closure asks for the texts of hundreds of readings."""

    job: Job

    @property
    def tables(self) -> tuple[Table, ...]:
        """Those of the job."""
        return self.job.tables

    @cached_property
    def _read(self) -> dict[tuple[str, tuple[str, ...]], dict[int, tuple[str, ...]]]:
        return {}

    def booked(self, file: str, columns: tuple[str, ...] = ()) -> dict[int, tuple[str, ...]]:
        """The cells of a table by line; none of a book that was moved away or changed since."""
        if (file, columns) not in self._read:
            try:
                self._read[file, columns] = self.job.booked(file, columns)
            except (OSError, InputError):
                self._read[file, columns] = {}
        return self._read[file, columns]


@dataclass(frozen=True)
class Weighed:
    """One form of a slip in a reading; ``prior`` is its share of the slip's weight."""

    asked: Asked
    slip: dict[str, Any]
    """Its row in the data file."""
    form: Form
    prior: float


def asked(books: Books, block: Block, i: int) -> Asked:
    """Row ``i`` of a block with its texts."""
    kind, line = KINDS[block.kind], int(block.line[i])
    there = len(kind.parts) <= 1 and line in books.booked(block.file, block.booked or kind.value)
    raws = raw_texts(books, block, i) if there else ()
    return Asked(block, i, raws, block.kind, NOUNS.get(block.kind, block.kind), kind.wraps)


def forms(books: Books, block: Block, i: int) -> list[Weighed]:
    """Every form that a slip of text can take in a reading."""
    case = asked(books, block, i)
    out = []
    for slip in slips()[1]:
        function = getattr(slips_of_text, slip["key"].replace("-", "_"), None)
        if function is None or not case.raws:
            continue
        here = list(different(function(case)))
        for form in here:
            agree = faces_agree(case, form)
            out.append(Weighed(case, slip, form, slip["prior"] / len(here) * form.weight * agree))
    return out


def other(kind: str, amount: float, sd: float) -> float:
    """Density of some other amount, spread evenly over the orders of magnitude from one sd."""
    largest = TURN / 2 if KINDS[kind].dimension == "angle" else LARGEST_M
    return 1 / (2 * max(abs(amount), sd) * math.log(max(largest / sd, 10.0)))


def listed(weights: list[tuple[Weighed, float]]) -> list[tuple[Weighed, float]]:
    """Those worth naming of forms with their support: the best, and up to two about as good; none if all are weak."""
    order = sorted(weights, key=lambda one: -one[1])
    good = [one for one in order if one[1] >= AS_GOOD * order[0][1]][:LISTED]
    return good if sum(support for _, support in good) >= SILENT_BELOW else []


def cause(one: Weighed, reading: str, support: float) -> Cause:
    """The cause in words, begun with the reading it is in where that is given."""
    case, slip, form = one.asked, one.slip, one.form
    if slip["key"] == "sign" and case.kind == "levelled":
        form = replace(form, told=f"{form.told} or the ends are turned round")
    notation = case.raws[0].units.angle
    pattern = slip.get("gon", slip["sentence"]) if notation in ("gon", "mil", "deg") else slip["sentence"]
    text = pattern.format(would=form.would, booked=form.booked, told=form.told)
    sentence = f"in the {reading} {text}" if reading else text
    line = form.line or int(case.block.line[case.i])
    return Cause(slip=slip["key"], sentence=sentence, would_read=form.would, support=support,
                 place=f"{case.block.file}:{line}")  # fmt: skip


def reading(names: tuple[str, ...], block: Block, i: int) -> str:
    """'angle B to D at C', 'rise A to B', 'pointing A to B'."""
    ends = [names[s] for s in block.stations[i]]
    where = " to ".join(ends) if len(ends) < 3 else " at ".join([" to ".join(ends[1:]), ends[0]])
    return f"{NOUNS.get(block.kind, kind_word(block.kind))} {where}"


def told(causes: tuple[Cause, ...]) -> str:
    """'Likeliest slip: ... Look at FILE:LINE.' of a reading's causes; '' of none."""
    if not causes:
        return ""
    texts = "; or ".join(one.sentence for one in causes)
    places = " and ".join(dict.fromkeys(one.place for one in causes))
    return f"Likeliest slip{'s' if len(causes) > 1 else ''}: {texts}. Look at {places}."


def texts_of(found: tuple[Cause, ...]) -> Iterator[str]:
    """Each with its place behind."""
    for one in found:
        yield f"{one.sentence} ({one.place})"
