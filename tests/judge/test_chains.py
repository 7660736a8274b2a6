"""Chains of levelled lines: against correlations of the statistics, and ties by really adding the line."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge.chains import chains
from adjust.judge.influence import Influence
from adjust.network import Array
from adjust.solver.solution import Solution

NETWORKS = Path(__file__).parents[2] / "networks"
SAME = 1 - 1e-6
"""Correlation from which two statistics count as one."""
LOOP = ("A,B", "B,C", "C,D", "D,E", "E,F", "F,A")

Rise = tuple[str, float]
"""'FROM,TO' and the standard deviation in metres."""


def levels(folder: Path, lines: list[Rise], known: str = "", role: str = "held", places: str = "") -> Solution:
    folder.mkdir(exist_ok=True)
    free = "" if known else '[datum]\nkind = "free"\n'
    (folder / "job.toml").write_text(f'[units]\nlength = "m"\nangle = "dms"\n{free}', "utf-8")
    text = "".join(f"{ends},0.0,{sd!r}\n" for ends, sd in lines)
    (folder / "levelled.csv").write_text(f"from,to,rise,sd\n{text}", "utf-8")
    if known:
        sd = ",sd_height" if role == "weighted" else ""
        rows = "".join(f"{name},{role},10.0{',0.002' if sd else ''}\n" for name in known.split())
        (folder / "control.csv").write_text(f"station,role,height{sd}\n{rows}", "utf-8")
    if places:
        (folder / "stations.csv").write_text(f"station,east,north\n{places}", "utf-8")
    return adjust.solve(adjust.read(folder))


def correlation(solution: Solution) -> Array:
    """Correlations (R, R) of the statistics, NaN where nothing checks a row."""
    m = Influence.of(solution).columns(np.arange(len(solution.residuals)))
    p = 1 / solution.sd_readings**2
    size = np.sqrt(np.where(np.diagonal(m) > 1e-6 * p, np.diagonal(m), np.nan))
    return np.asarray(m / size / size[:, None])


def rows_of(solution: Solution, kind: str) -> list[int]:
    network = solution.network
    return [r for r, b in enumerate(network.rows.block.tolist()) if network.blocks[b].kind == kind]


def alike(solution: Solution) -> set[frozenset[int]]:
    """Groups of two or more levelled lines with statistics correlated +-1."""
    rho = np.abs(correlation(solution))
    lines = rows_of(solution, "levelled")
    groups = {frozenset(k for k in lines if rho[r, k] > SAME) for r in lines}
    return {g for g in groups if len(g) > 1}


def random_lines(rng: np.random.Generator) -> tuple[list[Rise], str, str]:
    n = int(rng.integers(3, 15))
    ends = [(int(rng.integers(i)), i) for i in range(1, n)]
    for _ in range(int(rng.integers(1, 6))):
        i, j = rng.choice(n, 2, replace=False).tolist()
        ends.append((i, j))
    known = " ".join(f"P{i}" for i in sorted(rng.choice(n, int(rng.integers(0, 3)), replace=False).tolist()))
    lines = [(f"P{i},P{j}", float(rng.uniform(0.001, 0.003))) for i, j in ends]
    return lines, known, str(rng.choice(["held", "weighted"]))


@pytest.mark.parametrize("seed", range(24))
def test_chains_are_the_lines_whose_statistics_are_one_and_their_ties_split_them(seed: int, tmp_path: Path) -> None:
    """Random levels: trees with a few lines more, lines levelled twice, no to two known heights."""
    lines, known, role = random_lines(np.random.default_rng([34, seed]))
    solution = levels(tmp_path / "job", lines, known, role)
    found = chains(solution)
    assert {frozenset(c.rows) for c in found} == alike(solution), f"seed {seed}"
    for k, one in enumerate(found):
        assert one.tie is not None
        names = [solution.names[i] for i in one.tie]
        again = levels(tmp_path / f"tie{k}", [*lines, (",".join(names), 0.002)], known, role)
        of = {frozenset(r) & frozenset(one.rows) for r in alike(again)}
        left = [group for group in (one.rows[: one.split[0]], one.rows[one.split[0] :]) if len(group) > 1]
        assert {g for g in of if len(g) > 1} == {frozenset(g) for g in left}, f"seed {seed}: {one.sentence}"
        assert f"from {names[0]} to {names[1]} would split them best, {one.split[0]} and {one.split[1]}" in one.sentence


def test_random_levels_have_chains_of_every_sort() -> None:
    """A negative control of the test above: without known heights and with two, rings with gaps, and long ones."""
    samples = [random_lines(np.random.default_rng([34, seed])) for seed in range(24)]
    assert {len(known.split()) for _, known, _ in samples} == {0, 1, 2}
    assert {role for _, known, role in samples if known} == {"held", "weighted"}


def test_a_loop_in_words(tmp_path: Path) -> None:
    (one,) = chains(levels(tmp_path, [(line, 0.001) for line in LOOP], "A"))
    assert one.sentence == (
        "A slip in any of the 6 levelled lines A-B-C-D-E-F-A looks the same: their one closure cannot tell which. "
        "One more line from D to A would split them best, 3 and 3."
    )
    assert one.stations == (0, 1, 2, 3, 4, 5, 0)
    assert one.rows == tuple(range(6))


def test_no_other_line_splits_better(tmp_path: Path) -> None:
    """By brute force: every line from a station of the loop to its mark; the larger sum of variances is least."""
    sds = [0.001, 0.004, 0.001, 0.001, 0.002, 0.001]
    lines = list(zip(LOOP, sds, strict=True))
    (one,) = chains(levels(tmp_path / "job", lines, "A"))
    assert one.tie is not None
    worst = {}
    for name in "BCDEF":
        again = levels(tmp_path / name, [*lines, (f"{name},A", 0.001)], "A")
        groups = [g & frozenset(range(6)) for g in alike(again)]
        worst[name] = max(sum(sds[r] ** 2 for r in g) for g in groups)
    assert "ABCDEF"[one.tie[0]] == min(worst, key=lambda k: worst[k]) == "C"
    assert len(set(worst.values())) > 2


def test_the_nearest_station_is_told_where_places_are_known(tmp_path: Path) -> None:
    """A chain P-X-Y-Z-Q on a braced frame P, Q, R, S: Y stands nearest to R."""
    frame = ["P,Q", "Q,R", "R,P", "R,S", "S,P", "S,Q"]
    lines = [(line, 0.001) for line in [*frame, "P,X", "X,Y", "Y,Z", "Z,Q"]]
    places = "P,0,0\nQ,400,0\nR,200,150\nS,200,500\nX,100,100\nY,200,100\nZ,300,100\n"
    (one,) = chains(levels(tmp_path / "job", lines, "P", places=places))
    assert one.sentence == (
        "A slip in any of the 4 levelled lines P-X-Y-Z-Q looks the same: their one closure cannot tell which. "
        "One more line from Y to R would split them best, 2 and 2."
    )
    (without,) = chains(levels(tmp_path / "none", lines, "P"))
    assert "from Y to P would split" in without.sentence


def test_a_ring_through_a_braced_piece_leaves_a_gap(tmp_path: Path) -> None:
    """Two braced triangles joined by two lines through X and one direct: one closure, two runs."""
    lines = ["A,B", "B,C", "C,A", "D,E", "E,F", "F,D", "B,X", "X,D", "E,C"]
    (ring, *_) = [c for c in chains(levels(tmp_path, [(line, 0.001) for line in lines], "A")) if len(c.rows) == 3]
    assert ring.walk == "B-X-D, E-C"
    assert "any of the 3 levelled lines B-X-D, E-C looks the same" in ring.sentence


def test_heights_by_zenith_angles_tie_but_are_not_named() -> None:
    (one,) = chains(adjust.solve(adjust.read(NETWORKS / "valley-side")))
    assert one.sentence.startswith("A slip in either of the 2 levelled lines BM2-V1-BM2 looks the same")


def test_set_ups_of_a_staff_book_are_called_so_and_change_points_are_no_marks() -> None:
    found = chains(adjust.solve(adjust.read(NETWORKS / "river-levels")))
    told = [one.sentence for one in found]
    assert (
        "A slip in any of the 5 set-ups BM1-RB1 looks the same: their one closure cannot tell which. "
        "No mark that lasts lies between: only levelling a part of it again can tell."
    ) in told
    assert any("13 set-ups BM1-LB1-LB2 " in one and "from LB1 to BM1 " in one for one in told)
    assert all((c.tie is not None) == (c.split[0] > 0) for c in found)


def test_long_chains_show_both_their_ends(tmp_path: Path) -> None:
    n = 40
    lines = [(f"N{i},N{(i + 1) % n}", 0.001) for i in range(n)]
    (one,) = chains(levels(tmp_path, lines, "N0"))
    assert "any of the 40 levelled lines N0-N1-N2-N3-N4-N5-...-N35-N36-N37-N38-N39-N0 " in one.sentence
    assert one.split == (20, 20)


def test_lines_without_an_error_and_jobs_without_levels_have_none(tmp_path: Path) -> None:
    assert chains(adjust.solve(adjust.read(NETWORKS / "access-road"))) == ()
    assert chains(levels(tmp_path, [("A,B", 0.001)], "A")) == ()
