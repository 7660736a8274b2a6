"""The datum of free networks against dense linear algebra, minimal constraints, and what is said where a datum lacks.

With N the dense normal matrix over the coordinates (orientations eliminated by their Schur complement), G its null
space and D = G at the reference restricted to the datum stations:

    all stations, at the reference:   Q = N^+                                        (Moore and Penrose)
    any datum stations:               Q = (N + D D')^-1 N (N + D D')^-1              (so that D' Q = 0 and Q N Q = Q)
    held coordinates H instead of D:  Q_H = S Q S',  S = I - G (H'G)^-1 H'           (Baarda's S-transformation)

(Koch 1999, section 3.3; Baarda 1973.) The first two are formed here without any S-transformation.
"""

from __future__ import annotations

import math
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.errors import Unsolvable
from adjust.solver.design import State
from adjust.solver.engine import SingularPattern
from adjust.solver.solution import Solution
from adjust.solver.solve import prepare
from tests.helpers import close
from tests.networks import Array, Made, Row, Table, random_job, write_job
from tests.solver.oracle import Dense, order, positions
from tests.solver.pivot_study import SEED, linearised, networks, smallest_singular_value, thinned

KINDS = (
    ("distances", "directions"), ("distances", "angles"), ("directions",), ("distances",),
    ("levelled_lengths",), ("distances", "directions", "azimuths"),
)  # fmt: skip
FORBIDDEN = re.compile(r"singular|matri|rank|eigen|null|pivot|constraint|covariance|jacobian", re.IGNORECASE)


def free_job(folder: Path, seed: int, kinds: tuple[str, ...], datum: tuple[int, ...] = (), n: int = 7) -> Made:
    """A free job; ``datum`` numbers the stations that carry it, all where empty."""
    rng = np.random.default_rng([11, seed])
    print(f"seed [11, {seed}]")
    made = random_job(rng, folder, n, kinds, "free")
    return again(made, folder, chosen(made, datum)) if datum else made


def chosen(made: Made, datum: tuple[int, ...]) -> str:
    names = ", ".join(f'"{made.names[i]}"' for i in datum)
    return f'[datum]\nkind = "free"\nstations = [{names}]'


def again(made: Made, folder: Path, settings: str = "", start: Array | None = None) -> Made:
    """The same readings with other settings or other starting values."""
    made = replace(made, folder=folder, settings=settings or made.settings)
    if start is not None:
        rows = [
            {k: v if k == "station" else float(start[i, ("east", "north", "height").index(k)]) for k, v in row.items()}
            for i, row in enumerate(stations(made).rows)
        ]
        tables = [replace(t, rows=rows) if t.kind == "stations" else t for t in made.tables]
        made = replace(made, tables=tables, start=start)
    write_job(folder, made.tables, free=made.free, settings=made.settings)
    return made


def stations(made: Made) -> Table:
    return next(t for t in made.tables if t.kind == "stations")


def solve(made: Made) -> Solution:
    return adjust.solve(adjust.read(made.folder))


def reduced_normal(dense: Dense, xyz: Array) -> Array:
    """N (c, c) over the coordinates, groups eliminated."""
    A = dense.jacobian(np.nan_to_num(xyz)) / dense.made.readings.sd[:, None]
    N, c = A.T @ A, dense.first_group
    if c == dense.count:
        return N
    return N[:c, :c] - N[:c, c:] @ np.linalg.solve(N[c:, c:], N[c:, :c])


def cofactors(dense: Dense, solution: Solution) -> Array:
    """Q (c, c) of the coordinates as the solver has it."""
    numbers = solution.design.unknowns.coordinate[order(dense.made, solution)][dense.coordinate >= 0]
    return solution.cofactors.entries(*np.meshgrid(numbers, numbers, indexing="ij"))


def movements(dense: Dense, xyz: Array) -> Array:
    """G (c, d) over the coordinates."""
    return dense.free_movements(np.nan_to_num(xyz))[: dense.first_group]


def masked(dense: Dense, G: Array, datum: tuple[int, ...]) -> Array:
    """G with the rows of other stations zero."""
    D = np.zeros_like(G)
    at = dense.coordinate[list(datum)]
    D[at[at >= 0]] = G[at[at >= 0]]
    return D


def constrained(N: Array, D: Array) -> Array:
    """(N + D D')^-1 N (N + D D')^-1 with D brought to the size of N."""
    D = D / np.linalg.norm(D, axis=0) * np.sqrt(np.trace(N) / len(N))
    K = np.linalg.inv(N + D @ D.T)
    return K @ N @ K


def same(got: Array, wanted: Array, atol: float) -> None:
    """Covariances in units of the standard deviations."""
    size = np.sqrt(np.diagonal(wanted))
    scale = np.maximum(size, 1e-3 * size.max())
    close(got / scale[:, None] / scale, wanted / scale[:, None] / scale, atol=atol)


@pytest.mark.parametrize(("seed", "kinds"), list(enumerate(KINDS)), ids=list(map("-".join, KINDS)))
def test_all_stations_give_the_pseudo_inverse(seed: int, kinds: tuple[str, ...], tmp_path: Path) -> None:
    """With the reference at the answer, so that both sides know the same turn: Q is N^+ of the coordinates."""
    first = free_job(tmp_path / "first", seed, kinds)
    xyz = positions(first, solve(first))
    made = again(first, tmp_path / "second", start=np.nan_to_num(xyz))
    solution, dense = solve(made), Dense.of(made)
    G = movements(dense, xyz)
    assert solution.total.datum_missing == G.shape[1]
    N = reduced_normal(dense, positions(made, solution))
    values, vectors = np.linalg.eigh(N)
    kept = values > 1e-9 * values[-1]
    assert (~kept).sum() == G.shape[1]
    pseudo = vectors[:, kept] / values[kept] @ vectors[:, kept].T
    same(cofactors(dense, solution), pseudo, atol=1e-9)
    close(np.nan_to_num(positions(made, solution)), np.nan_to_num(xyz), atol=1e-9)


@pytest.mark.parametrize(("seed", "kinds"), list(enumerate(KINDS)), ids=list(map("-".join, KINDS)))
@pytest.mark.parametrize("datum", [(0, 2, 5), (0, 1, 2, 3, 4, 5, 6)], ids=["three", "all"])
def test_the_datum_stations_carry_the_datum(
    seed: int, kinds: tuple[str, ...], datum: tuple[int, ...], tmp_path: Path
) -> None:
    made = free_job(tmp_path, seed, kinds, datum)
    solution, dense = solve(made), Dense.of(made)
    xyz = positions(made, solution)
    D = masked(dense, movements(dense, made.start), datum)
    step = (np.nan_to_num(xyz) - made.start)[dense.coordinate >= 0]
    assert np.abs(step).max() > 0.01
    close(D.T @ step, np.zeros(D.shape[1]), atol=1e-10)
    Q = cofactors(dense, solution)
    same(Q, constrained(reduced_normal(dense, xyz), D), atol=1e-9)
    close(D.T @ Q / np.sqrt(np.diagonal(Q)).max() ** 2, np.zeros_like(D.T), atol=1e-9)


@pytest.mark.parametrize("seed", range(3))
def test_all_stations_lie_as_near_to_the_reference_as_they_can(seed: int, tmp_path: Path) -> None:
    """No rigid motion brings the adjusted figure nearer: the closed-form best turn is zero."""
    made = free_job(tmp_path, seed, ("distances", "directions"))
    a = positions(made, solve(made))[:, :2]
    b = made.start[:, :2]
    close(a.mean(axis=0), b.mean(axis=0), atol=1e-10)
    a, b = a - a.mean(axis=0), b - b.mean(axis=0)
    turn = np.arctan2((a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]).sum(), (a * b).sum())
    assert abs(turn) < 1e-13, turn


@pytest.mark.parametrize("seed", range(3))
def test_the_trace_is_least(seed: int, tmp_path: Path) -> None:
    """Of all choices of datum stations, all of them together give the least trace; three the least over themselves."""
    made = free_job(tmp_path / "all", seed, ("distances", "directions"))
    solution, dense = solve(made), Dense.of(made)
    xyz = np.nan_to_num(positions(made, solution))
    at = again(made, tmp_path / "at", start=xyz)
    least = np.trace(cofactors(dense, solve(at)))
    for k, datum in enumerate([(0, 1), (0, 3, 6), (1, 2, 4, 5)]):
        other = again(at, tmp_path / str(k), chosen(made, datum))
        Q, own = cofactors(dense, solve(other)), dense.coordinate[list(datum), :2].ravel()
        assert np.trace(Q) > least * (1 + 1e-6)
        assert Q[own, own].sum() < cofactors(dense, solve(at))[own, own].sum()


@pytest.mark.parametrize("seed", range(3))
def test_starting_values_of_other_stations_do_not_matter(seed: int, tmp_path: Path) -> None:
    datum, rng = (0, 3, 6), np.random.default_rng([12, seed])
    made = free_job(tmp_path / "a", seed, ("distances", "directions"), datum)
    start = made.start + rng.uniform(-2.0, 2.0, made.start.shape)
    start[list(datum)] = made.start[list(datum)]
    other = again(made, tmp_path / "b", start=start)
    one, two = solve(made), solve(other)
    close(positions(made, one)[:, :2], positions(other, two)[:, :2], atol=1e-9)
    dense = Dense.of(made)
    same(cofactors(dense, one), cofactors(dense, two), atol=1e-8)


@pytest.mark.parametrize("seed", range(3))
def test_the_path_of_the_iteration_does_not_matter(seed: int, tmp_path: Path) -> None:
    """Begun elsewhere with the same reference, turned by three degrees and shaken, it ends at the same place."""
    made = free_job(tmp_path, seed, ("distances", "directions"))
    job, rng = adjust.read(made.folder), np.random.default_rng([13, seed])
    wanted = adjust.solve(job).positions
    ready = prepare(job)
    turn = np.radians(3.0)
    spun = ready.start.positions.copy()
    spun[:, :2] = spun[:, :2] @ np.array([[np.cos(turn), -np.sin(turn)], [np.sin(turn), np.cos(turn)]])
    spun[:, :2] += rng.uniform(-1.0, 1.0, spun[:, :2].shape)
    groups = ready.start.groups + turn + rng.uniform(-0.01, 0.01, len(ready.start.groups))
    got = ready.iteration.run(State(spun, groups)).last.state.positions
    close(got[:, :2], wanted[:, :2], atol=1e-9)


def test_the_zero_of_a_circle_does_not_matter(tmp_path: Path) -> None:
    """Orientations take no part in the datum: turning one circle moves nothing."""
    made = free_job(tmp_path / "a", 0, ("distances", "directions"))
    table = next(t for t in made.tables if t.kind == "directions")
    at = table.rows[0]["at"]
    rows = [
        r | {"direction": (float(str(r["direction"])) + 2.0) % (2 * np.pi)} if r["at"] == at else r for r in table.rows
    ]
    other = again(
        replace(made, tables=[replace(t, rows=rows) if t is table else t for t in made.tables]), tmp_path / "b"
    )
    one, two, dense = solve(made), solve(other), Dense.of(made)
    close(positions(made, one)[:, :2], positions(other, two)[:, :2], atol=1e-9)
    same(cofactors(dense, one), cofactors(dense, two), atol=1e-9)
    assert np.abs(one.groups - two.groups).max() > 1.0


HELD: dict[str, tuple[tuple[str, ...], list[tuple[int, int]]]] = {
    "shift and turn": (("distances", "directions"), [(0, 0), (0, 1), (5, 0)]),
    "shift, turn and scale": (("directions",), [(0, 0), (0, 1), (6, 0), (6, 1)]),
    "shift": (("distances", "directions", "azimuths"), [(3, 0), (3, 1)]),
    "height": (("levelled_lengths",), [(2, 2)]),
}


@pytest.mark.parametrize("name", HELD)
def test_minimal_constraints_are_an_s_transformation_of_the_free_network(name: str, tmp_path: Path) -> None:
    """Holding just enough coordinates at their freely adjusted values changes Q by S and nothing that can be seen."""
    kinds, held = HELD[name]
    made = free_job(tmp_path / "free", 21, kinds)
    free, dense = solve(made), Dense.of(made)
    xyz = positions(made, free)
    marks: dict[int, Row] = {}
    for station, part in held:
        row = marks.setdefault(station, {"station": made.names[station]})
        row[("east", "north", "height")[part]] = float(xyz[station, part])
    tables = [Table("control.csv", "control", list(marks.values())), *made.tables]
    fixed = solve(again(replace(made, tables=tables, free=False), tmp_path / "held"))
    close(np.nan_to_num(positions(made, fixed)), np.nan_to_num(xyz), atol=1e-9)
    close(fixed.total.square_sum, free.total.square_sum, atol=1e-9 * free.total.square_sum)
    assert fixed.total.degrees_of_freedom == free.total.degrees_of_freedom
    assert fixed.total.datum_missing == 0
    one, two = adjust.assess(free), adjust.assess(fixed)
    close(one.reliability.redundancy, two.reliability.redundancy, atol=1e-9)
    close(np.nan_to_num(one.statistic), np.nan_to_num(two.statistic), atol=1e-6)
    G, H = movements(dense, xyz), np.zeros((dense.first_group, len(held)))
    for k, (station, part) in enumerate(held):
        H[dense.coordinate[station, part], k] = 1.0
    S = np.eye(dense.first_group) - G @ np.linalg.solve(H.T @ G, H.T)
    same(cofactors(dense, fixed), S @ cofactors(dense, free) @ S.T, atol=1e-8)


def marked(made: Made, folder: Path, rows: list[Row], settings: str = "") -> Path:
    """The job with other control."""
    tables = [Table("control.csv", "control", rows), *(t for t in made.tables if t.kind != "control")]
    return write_job(folder, tables, settings=settings)


LACKING: dict[str, tuple[tuple[str, ...], list[tuple[str, int]], list[str]]] = {
    "turn": (("distances", "directions"), [("en", 0)], ["nothing fixes the turn of"]),
    "turn and scale": (("directions",), [("en", 3)], ["nothing fixes the turn of", "nothing fixes the scale of"]),
    "position": (("distances", "directions", "levelled_lengths"), [("h", 1)], ["nothing fixes the position of"]),
    "height": (
        ("distances", "directions", "levelled_lengths"),
        [("en", 0), ("en", 4)],
        ["nothing fixes the height of"],
    ),
    "position in one direction": (("distances", "directions", "azimuths"), [("e", 2)], ["in one direction"]),
}
PARTS = {"e": ("east",), "en": ("east", "north"), "h": ("height",)}


@pytest.mark.parametrize("name", LACKING)
def test_lacking_control_is_said_in_words(name: str, tmp_path: Path) -> None:
    kinds, control, wanted = LACKING[name]
    made = free_job(tmp_path / "a", 31, kinds)
    rows: list[Row] = [
        {"station": made.names[i]}
        | {p: float(made.truth[i, ("east", "north", "height").index(p)]) for p in PARTS[which]}
        for which, i in control
    ]
    folder = marked(made, tmp_path / "b", rows, '[datum]\nkind = "control"')
    with pytest.raises(Unsolvable) as caught:
        adjust.solve(adjust.read(folder))
    sentences = caught.value.sentences
    assert len(sentences) == len(wanted)
    for sentence, words in zip(sentences, wanted, strict=True):
        assert words in sentence
        assert any(re.search(rf"\b{n}\b", sentence) for n in made.names), "no station is named"
        assert not FORBIDDEN.search(sentence), sentence


def test_one_station_cannot_carry_a_plane_datum(tmp_path: Path) -> None:
    made = free_job(tmp_path, 32, ("distances", "directions"), (3,))
    with pytest.raises(Unsolvable) as caught:
        solve(made)
    (sentence,) = caught.value.sentences
    assert f"the datum stations {made.names[3]} cannot carry the datum" in sentence
    assert not FORBIDDEN.search(sentence)


SPURS = {"distances": "held by one distance only", "angles": "held by one angle only"}


@pytest.mark.parametrize("control", ["held", "weighted", "free"])
@pytest.mark.parametrize("kind", SPURS)
def test_a_spur_is_named_with_what_holds_it(kind: str, control: str, tmp_path: Path) -> None:
    """The last station keeps its one row of ``kind``; its other rows are taken away."""
    made = random_job(
        np.random.default_rng([41, len(control)]), tmp_path / "a", 6, ("distances", "angles"), control, spur=True
    )
    tables = [
        t if t.kind not in SPURS or t.kind == kind else replace(t, rows=[r for r in t.rows if "spur" not in r.values()])
        for t in made.tables
    ]
    folder = write_job(tmp_path / "b", tables, free=made.free)
    with pytest.raises(Unsolvable) as caught:
        adjust.solve(adjust.read(folder))
    (sentence,) = caught.value.sentences
    assert sentence.startswith(f"spur is {SPURS[kind]}: nothing fixes it")
    assert not FORBIDDEN.search(sentence)
    # a distance leaves it free across the line, an angle along it
    assert ("sideways" if kind == "distances" else "along that line") in sentence


@pytest.mark.parametrize("control", ["held", "free"])
def test_two_loose_stations_are_told_one_by_one(control: str, tmp_path: Path) -> None:
    made = random_job(np.random.default_rng(42), tmp_path / "a", 6, ("distances", "angles"), control)
    loose: list[Row] = [
        {"from": made.names[i], "to": name, "distance": 80.0} for i, name in ((1, "one way"), (4, "other way"))
    ]
    places: list[Row] = [
        {"station": str(row["to"]), "east": float(made.truth[i, 0]) + 64.0, "north": float(made.truth[i, 1]) + 48.0}
        for row, i in zip(loose, (1, 4), strict=True)
    ]
    more = {"distances": loose, "stations": places}
    tables = [replace(t, rows=[*t.rows, *more.get(t.kind, [])]) for t in made.tables]
    with pytest.raises(Unsolvable) as caught:
        adjust.solve(adjust.read(write_job(tmp_path / "b", tables, free=made.free)))
    assert [s.partition(":")[0] for s in sorted(caught.value.sentences)] == [
        "one way is held by one distance only", "other way is held by one distance only",
    ]  # fmt: skip


@pytest.mark.parametrize("control", ["held", "free"])
def test_two_pieces_hinged_at_a_station_are_told_apart(control: str, tmp_path: Path) -> None:
    """A second figure tied by one station alone can swing about it: every station that moves is named, no other.

    Without control either figure may be said to swing about the hinge, B.
    """
    names = ["A", "B", "C", "D", "E"]
    xy = [(0.0, 0.0), (100.0, 0.0), (60.0, 90.0), (210.0, 40.0), (160.0, 130.0)]
    lines = [(0, 1), (0, 2), (1, 2), (1, 3), (1, 4), (3, 4)]
    rows: list[Row] = [{"from": names[i], "to": names[j], "distance": math.dist(xy[i], xy[j])} for i, j in lines]
    places: list[Row] = [{"station": name, "east": e, "north": n} for name, (e, n) in zip(names, xy, strict=True)]
    marks = [0, 2] if control == "held" else []
    tables = [
        Table("control.csv", "control", [places[i] for i in marks]),
        Table("stations.csv", "stations", [places[i] for i in range(5) if i not in marks]),
        Table("distances.csv", "distances", rows, "station"),
    ]
    with pytest.raises(Unsolvable) as caught:
        adjust.solve(adjust.read(write_job(tmp_path, [t for t in tables if t.rows], free=control == "free")))
    (sentence,) = caught.value.sentences
    assert sentence.startswith("nothing fixes the turn of ")
    assert sentence.endswith("one angle, pointing or second distance between them and the rest, or an azimuth, would")
    moving, _, hinge = sentence.partition(":")[0].removeprefix("nothing fixes the turn of ").partition(" about ")
    assert moving in (["D, E"] if control == "held" else ["D, E", "A, C"])
    assert hinge == "B"
    assert not FORBIDDEN.search(sentence)


def test_a_pivot_that_rounding_left_holds_nothing(tmp_path: Path) -> None:
    """Network 235 of the study does not hold, yet its smallest pivot is 2.6e-10: an unlucky order of elimination."""
    made = next(networks(1, tmp_path, (("directions",),), "free", spur=False, first=235))
    ready = prepare(adjust.read(thinned(made, np.random.default_rng([SEED, 1, 235])).folder))
    here = linearised(ready)
    assert smallest_singular_value(ready, here) < 1e-14
    with pytest.raises(SingularPattern):
        ready.iteration.pattern.factor(here.whitened)
