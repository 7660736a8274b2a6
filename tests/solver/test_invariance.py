"""What must not matter does not: origin, orientation of the frame, names, order of rows, files, units of the tables.

Each property compares two whole jobs, read from files: the adjusted figure (distances between all stations, so that
the frame drops out), the adjusted readings, standard deviations, redundancy numbers, statistics and the square sum.
Tolerances: 1e-9 m for the figure and 1e-6 of a statistic. A coordinate of 1e6 m carries 1e-10 m, which is 1e-7 of a
standard deviation of a millimetre: the larger shifts have their own, stated below.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, replace
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import adjust
from tests.helpers import close
from tests.networks import Array, Made, Row, Table, random_job, renamed, write_job

KINDS = {
    "plane": ("distances", "directions", "angles"),
    "azimuths": ("distances", "directions", "azimuths"),
    "levels": ("levelled_lengths", "levelled_setups"),
    "both": ("distances", "directions", "levelled_lengths"),
}
FIGURE_M, SHARE = 1e-9, 1e-6
few = settings(derandomize=True, max_examples=25, deadline=None, database=None)
jobs = st.tuples(st.integers(0, 10**6), st.sampled_from(sorted(KINDS)), st.sampled_from(["held", "weighted", "free"]))
Job = tuple[int, str, str]


@dataclass(frozen=True)
class Figures:
    """What is compared: by station name, and by row in the order of the made job."""

    distances: Array
    rises: Array
    sd: Array
    residuals: Array
    redundancy: Array
    statistic: Array
    square_sum: float


def figures(folder: Path, names: list[str], ids: list[str]) -> Figures:
    """Adjust a folder and bring stations and rows into the given order."""
    solution = adjust.solve(adjust.read(folder))
    judgement = adjust.assess(solution)
    at = [solution.network.stations.index[n] for n in names]
    xyz = np.nan_to_num(solution.positions[at])
    d = xyz[:, None, :] - xyz[None, :, :]
    cov = np.nan_to_num(solution.covariance[at])
    sd = np.sqrt(np.column_stack([np.trace(cov[:, :2, :2], axis1=1, axis2=2), np.linalg.det(cov[:, :2, :2]) ** 0.5,
                                  cov[:, 2, 2]]).clip(0))  # fmt: skip
    row = rows_by_id(solution)
    order = [r for i in ids for r in row[i]]
    assert sorted(order) == list(range(len(solution.residuals)))
    return Figures(
        distances=np.hypot(d[..., 0], d[..., 1]),
        rises=d[..., 2],
        sd=sd,
        residuals=solution.residuals[order] / solution.design.sd[order],
        redundancy=judgement.reliability.redundancy[order],
        statistic=np.nan_to_num(judgement.statistic[order]),
        square_sum=solution.total.square_sum,
    )


def rows_by_id(solution: adjust.Solution) -> dict[str, list[int]]:
    """Scalar rows by the id in the table; a weighted mark goes by its station."""
    rows, found = solution.network.rows, {}
    for i in range(len(rows)):
        block = solution.network.blocks[rows.block[i]]
        name = block.ids[rows.row[i]] if block.ids else f"mark {solution.names[block.stations[rows.row[i], 0]]}"
        found.setdefault(name, []).append(i)
    return found


def identified(made: Made) -> tuple[Made, list[str]]:
    """The job with an id in every row of readings; ids in order, weighted marks first."""
    tables, ids, count = [], [], 0
    for table in made.tables:
        if table.kind in ("control", "stations"):
            tables.append(table)
            ids += [f"mark {r['station']}" for r in table.rows if r.get("role") == "weighted"]
            continue
        rows: list[Row] = []
        for row in table.rows:
            rows.append(row | {"id": f"r{count}"})
            ids.append(f"r{count}")
            count += 1
        tables.append(replace(table, rows=rows))
    return replace(made, tables=tables), ids


def unchanged(job: Job, change: Callable[[Made, np.random.Generator], list[Table]], *, share: float = SHARE,
              figure_m: float = FIGURE_M, names: Callable[[str], str] = str, **written: str) -> None:  # fmt: skip
    """Adjust a random job as made and as changed, and compare."""
    seed, kinds, control = job
    rng = np.random.default_rng([51, seed])
    print(f"seed [51, {seed}]")
    with TemporaryDirectory() as place:
        made, ids = identified(random_job(rng, Path(place) / "a", 5, KINDS[kinds], control))
        one = figures(write_job(Path(place) / "a", made.tables, free=made.free), made.names, ids)
        other = write_job(Path(place) / "b", change(made, rng), free=made.free, **written)
        new_ids = [f"mark {names(i[5:])}" if i.startswith("mark ") else i for i in ids]
        two = figures(other, [names(n) for n in made.names], new_ids)
    close(two.distances, one.distances, atol=figure_m)
    close(two.rises, one.rises, atol=figure_m)
    size = one.sd.max()
    close(two.sd / size, one.sd / size, atol=share)
    for name in ("residuals", "redundancy", "statistic"):
        close(getattr(two, name), getattr(one, name), atol=share)
    close(two.square_sum / one.square_sum, 1.0, atol=share)


def moved(made: Made, place: Callable[[float, float, float], tuple[float, float, float]]) -> list[Table]:
    """The tables with every given coordinate carried to another place."""

    def change(row: Row) -> Row:
        given = {k: row[k] for k in ("east", "north", "height") if k in row}
        there = place(*(float(str(given.get(k, 0.0))) for k in ("east", "north", "height")))
        return row | {k: v for k, v in zip(("east", "north", "height"), there, strict=True) if k in given}

    return [
        replace(t, rows=[change(r) for r in t.rows]) if t.kind in ("control", "stations") else t for t in made.tables
    ]


@few
@given(jobs, st.floats(-5e3, 5e3), st.floats(-5e3, 5e3), st.floats(-500, 500))
def test_a_shift_of_all_coordinates(job: Job, east: float, north: float, up: float) -> None:
    unchanged(job, lambda made, _: moved(made, lambda e, n, h: (e + east, n + north, h + up)))


@few
@given(jobs, st.sampled_from([500000.0, 4000000.0]))
def test_a_shift_to_the_size_of_map_coordinates(job: Job, far: float) -> None:
    """At 4e6 m a coordinate is rounded to 5e-10 m: 1e-8 m in the figure, 1e-4 of a statistic at the most."""
    unchanged(job, lambda made, _: moved(made, lambda e, n, h: (e + far, n + far, h)), share=1e-4, figure_m=1e-8)


@few
@given(jobs, st.floats(0.01, 6.28))
def test_a_turn_of_the_frame(job: Job, turn: float) -> None:
    """Coordinates are turned clockwise and azimuths with them. Weighted marks have one standard deviation each."""
    c, s = math.cos(turn), math.sin(turn)

    def change(made: Made, _: np.random.Generator) -> list[Table]:
        tables = moved(made, lambda e, n, h: (c * e + s * n, c * n - s * e, h))
        return [turned(t, turn) for t in tables]

    seed, kinds, control = job
    unchanged((seed, kinds, "held" if control == "weighted" else control), change)


def turned(table: Table, turn: float) -> Table:
    if table.kind != "azimuths":
        return table
    # rows of a set have a turn of their own, which takes up any turn of the frame: they may be left alone
    rows = [r if r["set"] else r | {"azimuth": (float(str(r["azimuth"])) + turn) % math.tau} for r in table.rows]
    return replace(table, rows=rows)


@few
@given(jobs, st.sampled_from(["", "é", "站", "\U0001d54f", " x", "'"]))
def test_other_names(job: Job, extra: str) -> None:
    """Names are text: reversed in order and lengthened they give the same answer."""

    def name(old: str) -> str:
        return f"{chr(155 - ord(old[0]))}{old}{extra}"

    unchanged(job, lambda made, _: renamed(made, {n: name(n) for n in made.names}), names=name)


@few
@given(jobs)
def test_another_order_of_rows_and_tables(job: Job) -> None:
    def change(made: Made, rng: np.random.Generator) -> list[Table]:
        tables = [replace(t, rows=[t.rows[i] for i in rng.permutation(len(t.rows))]) for t in made.tables]
        return [tables[i] for i in rng.permutation(len(tables))]

    unchanged(job, change)


@few
@given(jobs, st.floats(0.2, 0.8))
def test_a_table_split_in_two_files(job: Job, where: float) -> None:
    """Sets stay whole: a set is told apart by its file, station and name, so a split between its rows makes two."""
    unchanged(job, lambda made, _: [part for t in made.tables for part in split(t, where)])


def split(table: Table, where: float) -> list[Table]:
    if table.kind == "stations" or len(table.rows) < 3:
        return [table]
    groups: dict[tuple[object, ...], list[Row]] = {}
    for k, row in enumerate(table.rows):
        whole = table.kind == "directions" or (table.kind == "azimuths" and row["set"])
        groups.setdefault((row.get("at"), row.get("set")) if whole else (k,), []).append(row)
    parts = list(groups.values())
    cut = max(1, round(where * len(parts)))
    halves = [[r for part in half for r in part] for half in (parts[:cut], parts[cut:])]
    return [replace(table, file=f"{i}_{table.file}", rows=rows) for i, rows in enumerate(halves) if rows]


@few
@given(jobs, st.sampled_from(["m", "ft", "us-ft"]), st.sampled_from(["dms", "deg", "gon", "mil", "packed"]))
def test_other_units_of_the_job(job: Job, length: str, angle: str) -> None:
    unchanged(job, lambda made, _: made.tables, length=length, angle=angle)


@few
@given(jobs, st.lists(st.sampled_from(["m", "ft", "us-ft"]), min_size=5, max_size=5),
       st.lists(st.sampled_from(["dms", "deg", "gon", "mil", "packed"]), min_size=5, max_size=5))  # fmt: skip
def test_other_units_of_each_table(job: Job, lengths: list[str], angles: list[str]) -> None:
    def change(made: Made, _: np.random.Generator) -> list[Table]:
        return [replace(t, units={"length": a, "angle": b})
                for t, a, b in zip(made.tables, lengths, angles, strict=False)]  # fmt: skip

    unchanged(job, change)


def test_a_change_that_matters_is_seen() -> None:
    """Splitting a set between its rows frees an orientation: the comparison must fail."""

    def change(made: Made, _: np.random.Generator) -> list[Table]:
        out = []
        for t in made.tables:
            if t.kind != "directions":
                out.append(t)
                continue
            half = len(t.rows) // 2 + 1
            out += [replace(t, rows=t.rows[:half]), replace(t, file="more.csv", rows=t.rows[half:])]
        return out

    with pytest.raises(AssertionError):
        unchanged((1, "plane", "held"), change)
