"""Height loops and runs by zenith angles: against an independent computation and simulation, verdicts, hints."""

from __future__ import annotations

from dataclasses import replace
from itertools import combinations
from pathlib import Path

import networkx
import numpy as np
import pytest

import adjust
from adjust.graph.runs import HEIGHT_LOOP, HEIGHT_RUN, LOOP, height_walks
from adjust.judge.closures import MET, NOT_MET, Closure, closures
from adjust.judge.evening import closure_words
from adjust.judge.tolerances import declared_rule
from adjust.network import HELD, NEW, Network, Stations
from tests.helpers import close
from tests.judge import rising
from tests.judge.rising import LEVELLED, SLOPE, ZENITH, Net, Reading


def heights(job: adjust.Job) -> list[Closure]:
    return [one for one in closures(job) if one.kind in (HEIGHT_LOOP, HEIGHT_RUN)]


def lines(job: adjust.Job, net: Net, one: Closure) -> list[rising.Line]:
    network, rows = job.network, job.network.rows
    ids = [network.blocks[rows.block[r]].name(int(rows.row[r])) for r in one.rows]
    return rising.walked(net, [network.stations.names[i] for i in one.stations], ids)


@pytest.mark.parametrize("seed", range(4))
def test_random_nets_agree_with_an_independent_computation(seed: int, tmp_path: Path) -> None:
    """Standard deviations differ by the places where the partials are taken: 1e-3 of themselves at most in 100 nets."""
    rng = np.random.default_rng(seed)
    net = rising.random_net(rng)
    values = rising.write(net, rising.noisy(rng, net), tmp_path)
    job = adjust.read(tmp_path)
    found = heights(job)
    for one in found:
        walk = lines(job, net, one)
        assert any(row < 0 for _, _, row in walk)
        close(one.misclosure["height"], rising.misclosure(net, values, walk), atol=1e-8)
        sd = rising.deviation(net, values, walk)
        close(one.sd["height"], sd, atol=1e-3 * sd)
        assert (one.count, one.counted) == (len(walk), "lines")
    levelled = [(r.at, r.to) for r in net.readings if r.table == LEVELLED]
    seen = {(min(r.at, r.to), max(r.at, r.to)) for r in net.readings if r.table == ZENITH}
    loops = sum(one.kind == HEIGHT_LOOP for one in found)
    assert loops == loops_of([*levelled, *sorted(seen)]) - loops_of(levelled) > 0


def loops_of(ends: list[tuple[int, int]]) -> int:
    graph = networkx.MultiGraph(ends)
    return len(ends) - graph.number_of_nodes() + networkx.number_connected_components(graph)


TRIANGLE = np.array([[1000.0, 2000.0, 90.0], [1180.0, 2040.0, 126.0], [1090.0, 2190.0, 101.5]])


def triangle(k_known: bool = False) -> Net:
    """Three marks sighted round, 0-1 from both ends; exact."""
    net = Net(TRIANGLE, [0, 2], [], k_known)
    for a, b, i, t in ((0, 1, 1.55, 1.5), (1, 0, 1.62, 1.4), (1, 2, 1.62, 1.7), (2, 0, 1.48, 1.3)):
        for table, sd in ((ZENITH, rising.SD_ZENITH), (SLOPE, rising.SD_LENGTH)):
            one = Reading(table, a, b, 0.0, sd, i, t)
            net.readings.append(replace(one, value=rising.seen(TRIANGLE[a], TRIANGLE[b], one, rising.K)))
    return net


def exact(net: Net) -> list[float]:
    return [one.value for one in net.readings]


def test_a_thousand_draws_have_the_standard_deviation_that_is_stated(tmp_path: Path) -> None:
    """Errors of readings, centring, heights and refraction; five sd of a sample's sd are 5 / sqrt(2000) = 11 %."""
    net = triangle()
    rising.write(net, exact(net), tmp_path)
    job = adjust.read(tmp_path)
    rng = np.random.default_rng(7)
    draws = [rising.noisy(rng, net) for _ in range(1000)]
    found = heights(job)
    assert sorted(one.kind for one in found) == [HEIGHT_LOOP, HEIGHT_RUN]
    for one in found:
        walk = lines(job, net, one)
        sample = np.array([rising.misclosure(net, values, walk) for values in draws])
        assert abs(sample.std() / one.sd["height"] - 1) < 0.11
        assert abs(sample.mean()) < 5 * one.sd["height"] / np.sqrt(1000)
        assert abs(one.misclosure["height"]) < 1e-6  # the digits that are booked
        assert one.verdict == MET


@pytest.mark.parametrize("seed", range(12))
def test_loops_are_the_shortest_that_do_not_depend_on_levelled_ones(seed: int) -> None:
    """Against all simple loops of a small graph, taken by size."""
    rng = np.random.default_rng(seed)
    pairs = [pair for pair in combinations(range(6), 2) if rng.random() < 0.7]
    levelled = sorted(rng.choice(len(pairs), len(pairs) // 2, replace=False).tolist())
    ends = np.array([*(pairs[k] for k in levelled), *(p for k, p in enumerate(pairs) if k not in levelled)])
    size = rng.integers(1, int(rng.choice([3, 2000])), len(ends))
    number = {frozenset(pair): k for k, pair in enumerate(ends.tolist())}
    everything = []
    for nodes in networkx.simple_cycles(networkx.Graph(ends.tolist())):
        edges = [number[frozenset(pair)] for pair in zip(nodes, [*nodes[1:], nodes[0]], strict=True)]
        everything.append((int(size[edges].sum()), edges))
    pure = [edges for _, edges in everything if max(edges) < len(levelled)]
    taken = [edges for edges in pure if edges]
    wanted = []
    for total, edges in sorted(everything):
        if rank([*taken, edges]) > rank(taken):
            taken.append(edges)
            wanted.append(total)
    found = height_walks(bare(6), ends, size, len(levelled))
    assert {walk.kind for walk in found} <= {HEIGHT_LOOP}
    assert [int(size[list(walk.lines)].sum()) for walk in found] == wanted
    assert rank([*pure, *(list(walk.lines) for walk in found)]) == rank([edges for _, edges in everything])


def rank(loops: list[list[int]]) -> int:
    """Rank modulo two."""
    leading: dict[int, int] = {}
    for edges in loops:
        mask = sum(1 << e for e in edges)
        while mask and mask.bit_length() in leading:
            mask ^= leading[mask.bit_length()]
        if mask:
            leading[mask.bit_length()] = mask
    return len(leading)


def bare(n: int, known: tuple[int, ...] = ()) -> Network:
    """Stations with some known heights, and no readings."""
    nothing = np.full((n, 3), np.nan)
    heights, role = nothing.copy(), np.full((n, 3), NEW)
    heights[list(known), 2], role[list(known), 2] = 10.0, HELD
    return Network(Stations(tuple(f"P{i}" for i in range(n)), heights, nothing, role, nothing), ())


def test_runs_join_known_heights_and_need_a_zenith_angle() -> None:
    """0-1 and 1-2 levelled, 0-2 and 2-3 by zenith angles; 0, 2 and 3 known: 0-1-2 is a level run, the rest are ours."""
    ends = np.array([(0, 1), (1, 2), (0, 2), (2, 3)])
    found = height_walks(bare(4, (0, 2, 3)), ends, np.array([100, 100, 150, 80]), 2)
    assert [(walk.kind, walk.stations, walk.lines) for walk in found] == [
        (HEIGHT_LOOP, (0, 1, 2, 0), (0, 1, 2)), (HEIGHT_RUN, (2, 3), (3,)),
    ]  # fmt: skip


def slipped(folder: Path, true: float, booked: float) -> Closure:
    """The loop of the triangle; its target at P2, seen from P1, stood ``true`` metres high and is booked otherwise."""
    net = triangle(k_known=True)
    for n, one in enumerate(net.readings):
        if (one.at, one.to) == (1, 2):
            value = rising.seen(TRIANGLE[1], TRIANGLE[2], replace(one, target=true), rising.K)
            net.readings[n] = replace(one, target=booked, value=value)
    rising.write(net, exact(net), folder)
    (one,) = (one for one in heights(adjust.read(folder)) if one.kind == HEIGHT_LOOP)
    close(abs(one.misclosure["height"]), abs(true - booked), atol=0.01)
    assert one.verdict == NOT_MET
    return one


@pytest.mark.parametrize(
    ("true", "booked", "words"),
    [
        (1.5, 0.0, "was perhaps not applied: that would leave 1.500 m (1.500 m is booked"),
        (0.0, 1.7, "was perhaps applied twice: that would leave 1.700 m (1.700 m is booked"),
        (1.7, -1.7, "may have the wrong sign: that would leave 3.400 m (1.700 m is booked"),
    ],
)
def test_slips_with_a_target_height(true: float, booked: float, words: str, tmp_path: Path) -> None:
    """Not applied: 1.5 m is what stands of another target of the loop."""
    found = slipped(tmp_path, true, booked).sentence
    assert f"the target height at P2 seen from P1 {words}" in found
    assert found.count("seen from") == 1


def test_a_whole_metre(tmp_path: Path) -> None:
    one = slipped(tmp_path, 1.7, 2.7)
    assert one.sentence.startswith("the misclosure is a whole metre: a height of instrument or target, or a staff, "
                                   "wrong by that (within ")  # fmt: skip


def test_declared_limits_of_heights(tmp_path: Path) -> None:
    net = triangle()
    rising.write(net, exact(net), tmp_path)
    text = (tmp_path / "job.toml").read_text()
    (tmp_path / "job.toml").write_text(text + '[tolerance]\nheights = "20 mm*sqrt(km)"\n')
    job = adjust.read(tmp_path)
    found = [one for one in closures(job, declared_rule(job)) if one.kind in (HEIGHT_LOOP, HEIGHT_RUN)]
    assert len(found) == 2
    for one in found:
        assert one.length is not None
        close(one.allowable["height"], 0.020 * np.sqrt(one.length / 1000), atol=1e-9)
        assert (one.declared, one.rule) == (("height",), "20 mm*sqrt(km), [tolerance] heights of the job")
    assert closure_words(job, found[0]).startswith("height loop P0-P2-P1-P0, 570 m: height ")


def test_places_in_the_plane_are_not_asked(tmp_path: Path) -> None:
    """Heights alone close as well, and equally: for the partials by centring the lengths give places of their own."""
    net = triangle(k_known=True)
    rising.write(net, exact(net), tmp_path)
    placed = heights(adjust.read(tmp_path))
    text = (tmp_path / "job.toml").read_text()
    (tmp_path / "job.toml").write_text(text.replace('[[book]]\nfile = "stations.csv"\n', ""))
    (tmp_path / "stations.csv").unlink()
    found = heights(adjust.read(tmp_path))
    assert len(found) == len(placed) == 2
    for one, other in zip(found, sorted(placed, key=lambda c: c.kind), strict=True):
        assert abs(one.misclosure["height"]) < 2e-6
        close(one.sd["height"], other.sd["height"], atol=1e-5 * other.sd["height"])


def test_levelled_lines_without_a_length_go_by_their_variances(tmp_path: Path) -> None:
    net = triangle()
    rows = [(0, 2, float(TRIANGLE[2, 2] - TRIANGLE[0, 2])), (0, 2, float(TRIANGLE[2, 2] - TRIANGLE[0, 2] + 0.001))]
    net.readings += [Reading(LEVELLED, i, j, rise, 0.001, length=100.0) for i, j, rise in rows]
    rising.write(net, exact(net), tmp_path)
    levelled = (tmp_path / "levelled.csv").read_text().replace("length", "sd").replace(",100\n", ",0.001\n")
    (tmp_path / "levelled.csv").write_text(levelled)
    found = closures(adjust.read(tmp_path))
    assert [one.kind for one in found if one.kind == LOOP] == [LOOP]
    loops = [one for one in found if one.kind == HEIGHT_LOOP]
    assert [len(one.stations) - 1 for one in loops] == [2, 3]
    assert {one.length is None for one in loops} == {True}


def test_the_same_of_a_job_and_of_its_solution() -> None:
    """The places of a solution change the distances to the plane by less than a micrometre."""
    job = adjust.read(Path(__file__).parents[2] / "networks" / "spillway-pillars")
    solution = adjust.solve(job)
    again = [one for one in closures(solution) if one.kind in (HEIGHT_LOOP, HEIGHT_RUN)]
    for one, other in zip(heights(job), again, strict=True):
        assert one.stations == other.stations
        close(other.misclosure["height"], one.misclosure["height"], atol=1e-7)
        assert 0.0003 < one.sd["height"] < 0.003
