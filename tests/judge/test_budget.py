"""Error budgets: shares add up to what the adjustment used, for every demo job and every source there is."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge import budget as judged
from adjust.judge.budget import Share, budget, station_budget
from adjust.judge.groupings import CENTRING, Grouping, by_instrument
from adjust.network import PARTS
from adjust.solver.design import State
from adjust.solver.solution import Solution
from tests.helpers import close
from tests.judge.dense_components import Dense
from tests.judge.test_components import MIXED, mixed, one_way, plain, solution_of

NETWORKS = Path(__file__).parents[2] / "networks"
DEMOS = sorted(p.parent.name for p in NETWORKS.glob("*/job.toml"))
SHARES = ("plane, held", "plane, weighted, centring", "plane, free, centring", "plane, held, given covariances")


def composed(shares: tuple[Share, ...]) -> float:
    """The standard deviation by the rule of composition."""
    linear = sum(s.sd for s in shares if s.linear)
    return float(np.sqrt(linear**2 + sum(s.sd**2 for s in shares if not s.linear)))


def holds(solution: Solution) -> None:
    """Shares sum to one and the total is what the adjustment used."""
    found = budget(solution)
    assert [not shares for shares in found] == solution.design.held.tolist()
    told = np.array([bool(shares) for shares in found])
    sds = np.array([composed(shares) for shares in found])[told]
    close(sds / solution.sd_readings[told], np.ones(told.sum()), atol=1e-12)
    close([sum(s.share for s in shares) for shares in found if shares], np.ones(told.sum()), atol=1e-12)
    assert all(s.share > 0 for shares in found for s in shares)


@pytest.mark.parametrize("name", DEMOS)
def test_budgets_of_the_demo_jobs(name: str) -> None:
    solution = adjust.solve(adjust.read(NETWORKS / name))
    holds(solution)
    sums_to_one(solution)


def test_demo_jobs_are_there() -> None:
    assert len(DEMOS) >= 7


@pytest.mark.parametrize("name", SHARES)
def test_budgets_with_centring_and_given_covariances(name: str, tmp_path: Path) -> None:
    _, solution = solution_of(name, tmp_path)
    holds(solution)
    if "covariances" in name:
        assert sum(shares[0].what == judged.GIVEN_COVARIANCE for shares in budget(solution)) >= 10


def whats(solution: Solution) -> list[list[tuple[str, float]]]:
    return [[(s.what, round(s.share, 4)) for s in shares] for shares in budget(solution)]


def test_terms_that_add_and_terms_by_their_squares(tmp_path: Path) -> None:
    """1.5 mm + 2 ppm of 100 m is 1.7 mm, of which the terms have 15/17 and 2/17; by squares 2.25 and 0.04 of 2.29."""
    table = "from,to,distance,count,sd,instrument\nA,P,100,,,sum\nB,P,100,,,squares\nC,P,100,4,,sum\nA,P,100,,0.005,\n"
    toml = """[instruments.sum]
distance = "1.5 mm + 2 ppm"
[instruments.squares]
distance = ["1.5 mm", "2 ppm"]
[[book]]
file = "control.csv"
[[book]]
file = "stations.csv"
[[book]]
file = "distances.csv"
sd_factor = 1.2
"""
    place = "station,east,north\nP,50,62\n"
    marks = "station,east,north\nA,0,149\nB,100,149\nC,50,-38\n"
    solution = plain(tmp_path, {"distances.csv": table, "stations.csv": place, "control.csv": marks}, toml)
    holds(solution)
    assert whats(solution) == [
        [('"1.5 mm" of sum, times 1.2', 0.8824), ('"2 ppm" of sum, times 1.2', 0.1176)],
        [('"1.5 mm" of squares, times 1.2', 0.9825), ('"2 ppm" of squares, times 1.2', 0.0175)],
        [('"1.5 mm" of sum, mean of 4, times 1.2', 0.8824), ('"2 ppm" of sum, mean of 4, times 1.2', 0.1176)],
        [("sd as booked, times 1.2", 1.0)],
    ]
    shares = budget(solution)
    close([s.sd for s in shares[0]], [0.0018, 0.00024], atol=1e-9)
    close([s.sd for s in shares[2]], [0.0009, 0.00012], atol=1e-9)
    assert [[s.linear for s in row] for row in shares] == [[True, True], [False, False], [True, True], [False]]


def test_a_slope_reduced_by_its_zenith_angle(tmp_path: Path) -> None:
    """100 m at 60 degrees: sin z of the slope's figure, and S cos z times the zenith angle's."""
    table = "from,to,distance,zenith_angle\nA,P,100,60\nB,P,100,60\nC,P,100,60\n"
    toml = """instruments.t = { distance = "2 mm", zenith = "10 sec" }
[[book]]
file = "control.csv"
[[book]]
file = "stations.csv"
[[book]]
file = "distances.csv"
surface = "slope"
"""
    place = "station,east,north\nP,50,50\n"
    marks = "station,east,north\nA,0,120.7\nB,100,120.7\nC,50,-36.6\n"
    solution = plain(tmp_path, {"distances.csv": table, "stations.csv": place, "control.csv": marks}, toml)
    holds(solution)
    along, across = 0.002 * np.sin(np.pi / 3), 50 * 10 / 206264.80625
    found = budget(solution)[0]
    assert [s.what for s in found] == ['"2 mm" of t', 'zenith angle, "10 sec" of t']
    close([s.sd for s in found], [along, across], atol=1e-9)
    close(found[1].share, across**2 / (along**2 + across**2), atol=1e-7)


def test_centring_of_an_angle_is_told_end_by_end(tmp_path: Path) -> None:
    solution = mixed(tmp_path, MIXED)
    holds(solution)
    first = budget(solution)[0]
    block = solution.network.blocks[0]
    at, back, fore = (solution.names[i] for i in block.stations[0])
    assert [s.what for s in first] == [
        '"2 sec" of total-station, two pointings', f"centring of the instrument at {at}",
        f"centring of the target at {back}", f"centring of the target at {fore}",
    ]  # fmt: skip
    a, b, c = (solution.positions[i, :2] for i in block.stations[0])
    # an angle's own part is s d12/(d1 d2) for the instrument and s/d for a target
    d1, d2 = np.hypot(*(b - a)), np.hypot(*(c - a))
    wanted = [0.0005 * np.hypot(*(c - b)) / (d1 * d2), 0.0005 / d1, 0.0005 / d2]
    close([s.sd for s in first[1:]], wanted, atol=1e-12)


def sums_to_one(solution: Solution) -> None:
    found = station_budget(solution)
    assert found
    for one in found:
        sd = solution.sd[solution.names.index(one.station), PARTS.index(one.part)]
        close(one.sd, sd, atol=1e-9 * sd)
        close(sum(share for _, share in one.shares), 1.0, atol=1e-9)
        assert list(one.shares) == sorted(one.shares, key=lambda s: -s[1])


@pytest.mark.parametrize("name", SHARES)
def test_budgets_of_coordinates_are_those_of_dense_matrices(name: str, tmp_path: Path) -> None:
    """The variance that is left when only one group has errors, carried by the dense solution."""
    _, solution = solution_of(name, tmp_path)
    sums_to_one(solution)
    by = by_instrument(solution.design)
    grouping = Grouping(CENTRING, by.names, by.of_row, solution.design.vectors.any)
    dense = Dense.of(solution, grouping)
    parts = dense.parts(np.ones(grouping.count))
    # with the misclosures a unit vector, dx = Q A'P e: columns of the program's own answer to a unit error
    carried = answers(solution)
    numbers = solution.design.unknowns.coordinate
    sd = solution.design.sd
    for one in station_budget(solution):
        line = carried[numbers[solution.names.index(one.station), PARTS.index(one.part)]] * sd
        variance = [line @ V @ line for V in parts]
        shares = dict(one.shares)
        close([shares.get(n, 0.0) for n in grouping.labels], np.array(variance) / sum(variance), atol=1e-7)


def answers(solution: Solution) -> np.ndarray:
    """dx (u, R) for a unit error in every reading, from dense normal equations with the datum of the solution."""
    grouping = by_instrument(solution.design)
    dense = Dense.of(solution, grouping)
    design, scale = solution.design, solution.design.sd
    numbers = design.linearise(State(solution.positions, solution.groups))
    u, g = design.unknowns.count, len(solution.groups)
    A = np.zeros((len(scale), u + g + 1))
    for r in range(len(scale)):
        np.add.at(A[r], np.where(design.columns[r] >= 0, design.columns[r], -1), numbers.coefficients[r])
        A[r, u + numbers.local[r] if numbers.local[r] >= 0 else -1] += numbers.by_local[r]
    A = A[:, :-1] / scale[:, None]
    P = np.linalg.inv(dense.covariance(np.ones(grouping.count)))
    C = solution.setting.iteration.datum.constraint
    C = np.concatenate([C, np.zeros((g, C.shape[1]))])
    used = np.linalg.norm(A, axis=0) > 0
    size = 1 / np.linalg.norm(A[:, used], axis=0)
    N = (A[:, used] * size).T @ P @ (A[:, used] * size)
    D = C[used] * size[:, None]
    d = D.shape[1]
    full = np.block([[N, D], [D.T, np.zeros((d, d))]])
    x = np.linalg.solve(full, np.concatenate([(A[:, used] * size).T @ P, np.zeros((d, len(scale)))]))[: len(N)]
    out = np.zeros((u + g, len(scale)))
    out[used] = x * size[:, None] / scale
    return np.asarray(out[:u])


def test_a_large_network_has_no_budgets_of_coordinates(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    _, solution = solution_of("plane, held", tmp_path)
    assert station_budget(solution)
    monkeypatch.setattr(judged, "STATIONS_MOST", 2)
    assert station_budget(solution) == ()


def test_a_scale_from_residuals_scales_the_sizes_alone(tmp_path: Path) -> None:
    solution, _ = one_way([3, 4, 5], tmp_path)
    one, four = station_budget(solution), station_budget(solution, 4.0)
    close([b.sd for b in four], [2 * b.sd for b in one], atol=1e-12)
    assert [b.shares for b in four] == [b.shares for b in one]
    assert [name for name, _ in one[0].shares] == ["centring", "distances of e"]
