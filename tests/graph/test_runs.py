"""Levelled loops and runs, traverses and triangles: what is found, in which order, and what is left out."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np

from adjust.graph.runs import LENGTH, SETUPS, VARIANCE, Lines, level_loops, level_runs, signs
from adjust.graph.sights import Sights
from adjust.graph.traverses import Traverse, find_traverses, find_triangles
from adjust.network import Network
from tests.graph.sketch import Sketch
from tests.helpers import close

RING = {f"T{k}": (200 * math.sin(k * math.pi / 3), 200 * math.cos(k * math.pi / 3)) for k in range(6)}
LEVELS = {name: (0.0, 0.0, height) for name, height in zip("ABCDE", (50.0, 51.0, 53.0, 52.0, 55.0), strict=True)}


def names(network: Network, stations: tuple[int, ...]) -> str:
    return "-".join(network.stations.names[i] for i in stations)


def walked(network: Network, walks: list[tuple[float, float]]) -> Network:
    (block,) = network.blocks
    return replace(network, blocks=(replace(block, walked=np.array(walks)),))


def known(network: Network, *stations: str) -> Network:
    """The network with these heights known: Sketch marks them by their roles only."""
    heights = network.stations.known.copy()
    for name in stations:
        heights[network.stations.index[name], 2] = LEVELS[name][2]
    return replace(network, stations=replace(network.stations, known=heights))


def test_loops_of_levels_are_the_small_ones_and_begin_at_a_known_height() -> None:
    network = Sketch(**LEVELS).rises("A-B", "B-C", "C-A", "C-D", "D-A").network()
    assert [names(network, run.stations) for run in level_loops(network)] == ["A-B-C-A", "A-C-D-A"]
    loops = level_loops(known(network, "D"))
    assert [names(network, run.stations) for run in loops] == ["A-B-C-A", "D-C-A-D"]


def test_lengths_decide_which_loops_are_small() -> None:
    network = Sketch(**LEVELS).rises("A-B", "B-C", "C-D", "D-A", "A-C").network()
    long_diagonal = walked(network, [(100, 1), (100, 1), (100, 1), (100, 1), (900, 1)])
    assert {len(run.rows) for run in level_loops(long_diagonal)} == {4, 3}
    assert {len(run.rows) for run in level_loops(network)} == {3}


def test_sizes_are_lengths_else_setups_else_variances() -> None:
    network = Sketch(**LEVELS).rises("A-B", "B-C").network()
    lacking = [(100.0, 2.0), (math.nan, 3.0)]
    assert Lines.of(walked(network, [(100.0, 2.0), (300.0, 3.0)])).measure == LENGTH
    assert Lines.of(walked(network, lacking)).measure == SETUPS
    assert Lines.of(network).measure == VARIANCE
    assert Lines.of(walked(network, lacking)).size.tolist() == [2000, 3000]


def test_signs_follow_the_walk_for_two_lines_between_two_stations_too() -> None:
    network = Sketch(**LEVELS).rises("A-B", "A-B", "B-A").network()
    for run in level_loops(network):
        rises = np.array([network.blocks[0].values[row, 0] for (row,) in run.rows])
        assert len(run.rows) == 2
        close(signs(network, run) @ rises, 0.0, atol=1e-12)
        assert np.abs(rises).min() > 0.9


def test_runs_lead_from_known_to_known_by_the_shortest_way() -> None:
    network = known(Sketch(**LEVELS).rises("A-B", "B-C", "C-D", "D-E", "B-D", "A-E").network(), "A", "E")
    assert [names(network, run.stations) for run in level_runs(network)] == ["A-E", "A-B-D-E"]
    assert level_runs(known(network, "A")) != ()
    assert level_runs(Sketch(**LEVELS).rises("A-B", "B-C").network()) == ()


def test_a_run_between_three_known_heights_takes_two_of_three_ways() -> None:
    network = known(Sketch(**LEVELS).rises("A-D", "B-D", "C-D").network(), "A", "B", "C")
    runs = level_runs(network)
    assert len(runs) == 2
    assert all(len(run.stations) == 3 for run in runs)


def traverses(network: Network) -> tuple[Traverse, ...]:
    sights = Sights.of(network)
    places = dict(enumerate([*RING.values(), (400.0, 400.0)]))
    lengths = {(i, j): math.dist(places[i], places[j]) for i, j in sights.legs}
    return find_traverses(network, sights, lengths)


def ring(without: str = "") -> Sketch:
    sketch = Sketch(**RING).distances(*[f"T{k}-T{(k + 1) % 6}" for k in range(6)])
    return sketch.sets(*[f"T{k}: T{(k + 5) % 6} T{(k + 1) % 6}" for k in range(6) if f"T{k}" != without])


def test_a_loop_traverse_begins_at_its_known_station() -> None:
    network = ring().network()
    stations = network.stations.known.copy()
    stations[2, :2] = RING["T2"]
    (one,) = traverses(replace(network, stations=replace(network.stations, known=stations)))
    assert (one.kind, one.missing) == ("loop traverse", ())
    assert one.stations[0] == one.stations[-1] == 2
    run = one.run(Sights.of(network))
    assert [len(rows) for rows in run.rows] == [1] * 6 + [2] * 6


def test_a_loop_begins_where_the_angle_was_never_turned() -> None:
    (one,) = traverses(ring("T3").network())
    assert one.missing == (3,)
    assert one.stations[0] == 3


def test_two_angles_missing_is_no_traverse() -> None:
    sketch = Sketch(**RING).distances(*[f"T{k}-T{(k + 1) % 6}" for k in range(6)])
    sketch.sets(*[f"T{k}: T{(k + 5) % 6} T{(k + 1) % 6}" for k in (0, 1, 3, 4)])
    assert traverses(sketch.network()) == ()


def test_a_cross_leg_makes_two_loops_and_a_side_shot_none() -> None:
    sketch = Sketch(**RING, S=(400.0, 400.0)).distances(*[f"T{k}-T{(k + 1) % 6}" for k in range(6)], "T1-T4", "T2-S")
    for k in range(6):
        others = [f"T{(k + 5) % 6}", f"T{(k + 1) % 6}", *(["T4"] if k == 1 else ["T1"] if k == 4 else [])]
        sketch.sets(f"T{k}: {' '.join(others)} {'S' if k == 2 else ''}")
    found = traverses(sketch.network())
    assert [len(one.stations) for one in found] == [5, 5]


def test_a_braced_quadrilateral_is_judged_by_independent_triangles() -> None:
    corners = ["T0", "T1", "T3", "T4"]
    sketch = Sketch(**RING).distances(*[f"{a}-{b}" for a in corners for b in corners if a < b])
    sketch.sets(*[f"{a}: {' '.join(b for b in corners if b != a)}" for a in corners])
    network = sketch.network()
    assert traverses(network) == ()
    found = find_triangles(Sights.of(network), set())
    assert len(found) == 3  # the fourth is their sum
    assert all(len(rows) == 2 for run in found for rows in run.rows)
