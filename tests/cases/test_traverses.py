"""Loop traverses and a level line of worked examples: components, misclosures, compass and transit rule, areas.

Sources and confidence stand in each case. The sources round components before adding them up, and so do the tests
where the case says so; that the program gives the same from the unrounded readings is tested at the end.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from itertools import pairwise
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import pytest

import adjust
from adjust.judge.balances import area, compass, summed_up, transit
from adjust.judge.booked import Booked
from adjust.judge.closures import Closure, closures, computed_traverses
from adjust.network import Array
from adjust.units import LENGTHS
from tests.cases.worked import Case, Check, checks_of
from tests.helpers import close

TRAVERSES = (
    # Ghilani and Wolf, Elementary Surveying, chapter 10; confidence: memory
    "loop_traverse_compass_rule",
    # University of Memphis, CIVL 1112; confidence: memory
    "loop_traverse_compass_rule_and_area",
    # Purdue University, ASM 215; confidence: read
    "loop_traverse_compass_rule_coordinates",
    # Mahun, Open Access Surveying Library; confidence: read
    "loop_traverse_four_sides",
    # class slides, author not named; confidence: read
    "loop_traverse_rough_compass_survey",
    # class notes, author not named; confidence: read
    "loop_traverse_transit_rule",
)
# teaching slides, author not named; confidence: read
LEVEL_LINE = "level_line_closing_on_bench_mark"


@dataclass(frozen=True)
class Hand:
    """A traverse as the source computes it, in its unit: (k, 2) components east, north, and (k,) lengths."""

    courses: list[str]
    components: Array
    length: Array
    start: Array

    @property
    def misclosure(self) -> tuple[float, float]:
        east, north = self.components.sum(axis=0)
        return float(east), float(north)

    @property
    def by_compass(self) -> Array:
        return self.components + compass(self.length, self.misclosure)

    @property
    def corners(self) -> Array:
        return summed_up(self.start, self.by_compass)[:-1]

    def course(self, values: Array, of: str) -> float:
        return float(values[self.courses.index(of)])

    def corner(self, of: str) -> Array:
        return self.corners[[course.split("-")[0] for course in self.courses].index(of)]


@cache
def job(name: str) -> adjust.Job:
    with TemporaryDirectory() as folder:
        return adjust.read(Case(name).write(Path(folder)))


@cache
def hand(name: str) -> Hand:
    """Components as the program finds them, rounded as the source rounds, or as the source gives them."""
    data, read = Case(name).data, job(name)
    unit = LENGTHS[read.settings.units.length]
    (one,) = computed_traverses(Booked.of(read))
    names = [read.network.stations.names[i] for i in one.traverse.stations]
    length = np.array([leg.value for leg in one.legs]) / unit
    bearing = np.array([a.value for a in one.booked])
    components = length[:, None] * np.column_stack([np.sin(bearing), np.cos(bearing)])
    if "component" in data:
        components = np.array([[given["east"], given["north"]] for given in data["component"]])
    elif "round_components" in data:
        components = components.round(data["round_components"])
    start = read.network.stations.known[one.traverse.stations[0], :2] / unit
    return Hand([f"{a}-{b}" for a, b in pairwise(names)], components, length, start)


QUANTITIES: dict[str, Callable[[Hand, str], float]] = {
    "east component": lambda t, of: t.course(t.components[:, 0], of),
    "north component": lambda t, of: t.course(t.components[:, 1], of),
    "closure in east": lambda t, of: t.misclosure[0],
    "closure in north": lambda t, of: t.misclosure[1],
    "linear misclosure": lambda t, of: math.hypot(*t.misclosure),
    "length over misclosure": lambda t, of: float(t.length.sum()) / math.hypot(*t.misclosure),
    "traverse length": lambda t, of: float(t.length.sum()),
    "east component by compass rule": lambda t, of: t.course(t.by_compass[:, 0], of),
    "north component by compass rule": lambda t, of: t.course(t.by_compass[:, 1], of),
    "size of east correction by compass rule": lambda t, of: abs(
        t.course(compass(t.length, t.misclosure)[:, 0], of)),
    "size of north correction by compass rule": lambda t, of: abs(
        t.course(compass(t.length, t.misclosure)[:, 1], of)),
    "size of east correction by transit rule": lambda t, of: abs(
        t.course(transit(t.components, t.misclosure)[:, 0], of)),
    "size of north correction by transit rule": lambda t, of: abs(
        t.course(transit(t.components, t.misclosure)[:, 1], of)),
    "balanced east": lambda t, of: float(t.corner(of)[0]),
    "balanced north": lambda t, of: float(t.corner(of)[1]),
    "enclosed area after compass rule": lambda t, of: area(t.corners),
}  # fmt: skip


@pytest.mark.parametrize("check", checks_of(*TRAVERSES), ids=str)
def test_traverses_give_the_printed_digits(check: Check) -> None:
    check.passes(QUANTITIES[check.what](hand(check.case), check.of))


@pytest.mark.parametrize("name", [name for name in TRAVERSES if "transit" not in name])
def test_the_program_closes_the_readings_as_booked_alike(name: str) -> None:
    """The closure of the job against the source's, which may differ by what rounding k components makes."""
    (one,) = closures(job(name))
    by_hand, unit = hand(name), LENGTHS[job(name).settings.units.length]
    slack = len(by_hand.length) * 0.5 * 10.0 ** -Case(name).data.get("round_components", 9) + 1e-9
    close([one.misclosure["east"] / unit, one.misclosure["north"] / unit], by_hand.misclosure, atol=slack)
    assert one.length is not None
    close(one.length / unit, by_hand.length.sum(), atol=1e-9)
    assert (one.counted, one.count) == ("legs", len(by_hand.length))
    assert "angles" in one.sentence  # bearings of every leg leave nothing to sum


@pytest.mark.parametrize("check", checks_of(LEVEL_LINE), ids=str)
def test_a_level_line_gives_the_printed_digits(check: Check) -> None:
    def five_a_root(one: Closure) -> tuple[dict[str, float], str]:
        return {"height": 0.005 * math.sqrt(one.count)}, "5 mm a root of set-ups"

    read = job(LEVEL_LINE)
    (one,) = closures(read, five_a_root)
    assert (one.kind, one.count, one.verdict) == ("level run", 3, "met")
    check.passes({
        "closing height": float(read.network.stations.known[one.stations[-1], 2]) + one.misclosure["height"],
        "misclosure": one.misclosure["height"],
        "allowed misclosure in millimetres": 1000 * one.allowable["height"],
    }[check.what])  # fmt: skip
