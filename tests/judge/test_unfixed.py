"""What nothing fixes or checks, in words: constructed defects, sound networks, unchecked and fighting readings."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

import adjust
from adjust.errors import NotConverged, Unsolvable
from adjust.judge.bridges import bridges
from adjust.judge.unfixed import Figure, warnings
from adjust.record.build import build
from adjust.record.summary import summary_lines
from adjust.solver import defects, engine
from adjust.solver.settle import beside, freedom_at
from adjust.solver.solve import prepare
from tests.judge.defects_study import (
    FORBIDDEN,
    SORTS,
    Sheet,
    chain_of_pieces,
    defective,
    hinge,
    judged,
    matches,
    one_mark,
    one_mark_no_scale,
    quadrilateral,
    sound,
    spur_distance,
    told,
)

JOBS = 66
"""Three of every sort; the study runs 200 and more."""


@pytest.mark.parametrize("seed", range(JOBS))
def test_the_right_stations_and_the_right_movement_are_named(seed: int) -> None:
    name, sheet = defective(seed)
    print(f"seed {seed} {name}: wanted {sheet.wanted}")
    right, sentences = judged(sheet)
    assert right, sentences


@pytest.mark.study
def test_two_hundred_and_twenty_defects() -> None:
    assert [seed for seed in range(220) if not judged(defective(seed)[1])[0]] == []


def test_every_sort_of_defect_takes_part() -> None:
    assert {defective(seed)[0] for seed in range(JOBS)} == {make.__name__ for make in SORTS}


@pytest.mark.parametrize("seed", range(24))
def test_a_sound_network_is_solved_without_a_word(seed: int) -> None:
    print(f"seed {seed}")
    assert told(sound(seed)) == []


@pytest.mark.parametrize("make", [one_mark, one_mark_no_scale, spur_distance, hinge, chain_of_pieces])
def test_without_starting_values_the_words_are_the_same(make: Callable[[Sheet], None], tmp_path: Path) -> None:
    """Guessed places stand in for the start that nothing gives; only the middle has coordinates, or nothing has."""
    sheet = sound(0, 9)
    make(sheet)
    folder = sheet.write(tmp_path)
    rows = (folder / "stations.csv").read_text().splitlines()
    loose = {name for _, names, _ in sheet.wanted for name in names}
    kept = [row for row in rows if row.split(",")[0] not in loose]
    (folder / "stations.csv").write_text("\n".join(kept) + "\n")
    with pytest.raises(Unsolvable) as refused:
        adjust.solve(adjust.read(folder))
    assert len(refused.value.sentences) == len(sheet.wanted)
    for one in sheet.wanted:
        assert any(matches(s, one, sheet) for s in refused.value.sentences), (one, refused.value.sentences)


@pytest.mark.parametrize("make", [spur_distance, hinge, quadrilateral, chain_of_pieces])
def test_one_more_reading_cures_what_it_is_said_to_cure(make: Callable[[Sheet], None]) -> None:
    """The negative control of the words: with the reading that the sentence asks for, it is gone."""
    sheet = sound(0)
    make(sheet)
    far = [n for n in sheet.middle if n not in sheet.used]
    for _, names, _ in sheet.wanted:
        sheet.distances.append((far.pop(), names[0]))
    assert told(sheet) == []


def test_a_loose_network_that_passes_the_factor_is_refused_all_the_same(monkeypatch: pytest.MonkeyPatch) -> None:
    """Rounding can leave a pivot in place of zero: with the limit on pivots taken away the words stay."""
    monkeypatch.setattr(engine, "PIVOT_LEAST", -1.0)
    for seed in (0, 2, 3, 4):
        assert judged(defective(seed)[1])[0], seed


def test_iterated_movements_span_the_same_as_all_vectors(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Both ways of finding the free movements, on a job with five of them."""
    sheet = sound(0, 16)
    for make in (spur_distance, hinge, quadrilateral, spur_distance, hinge):
        make(sheet)
    ready = prepare(adjust.read(sheet.write(tmp_path)))
    here = ready.iteration.at(beside(ready))
    dense = freedom_at(ready, here).moves.reshape(-1, 5)
    monkeypatch.setattr(defects, "DENSE_MOST", 0)
    iterated = freedom_at(ready, here).moves.reshape(-1, 5)
    a, b = np.linalg.qr(dense)[0], np.linalg.qr(iterated)[0]
    assert np.linalg.svd(a.T @ b, compute_uv=False).min() > 1 - 1e-10
    assert judged(sheet)[0]


def test_more_movements_than_the_first_block_holds(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(defects, "DENSE_MOST", 0)
    sheet = sound(4, 24)
    for _ in range(2 * defects.BLOCK_FIRST):
        spur_distance(sheet)
    assert judged(sheet)[0]


def test_more_movements_than_are_sought_are_not_told_apart(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(defects, "DENSE_MOST", 0)
    monkeypatch.setattr(defects, "MOST_NUMBERS", 200)
    sheet = sound(4, 24)
    for _ in range(6):
        spur_distance(sheet)
    (only,) = told(sheet)
    assert only.startswith(f"nothing fixes {', '.join(names[0] for _, names, _ in sheet.wanted)}: ")
    assert "movements or more are free" in only


def test_a_start_on_the_line_by_chance_is_no_defect(tmp_path: Path) -> None:
    """P's row lies on the line A-B, and P far off it on either side: two places, no defect; a better row decides."""
    sheet = Sheet(np.random.default_rng(5))
    a, b, p = (sheet.new(z) for z in (0j, 100 + 0j, 50 + 60j))
    sheet.known, sheet.distances = [a, b], [(a, p), (b, p)]
    folder = sheet.write(tmp_path)
    (folder / "stations.csv").write_text(f"station,east,north\n{p},50,0\n")
    with pytest.raises(Unsolvable, match="mirror image fit all readings equally well"):
        adjust.solve(adjust.read(folder))
    (folder / "stations.csv").write_text(f"station,east,north\n{p},50,25\n")
    solution = adjust.solve(adjust.read(folder))
    assert abs(solution.positions[2, 1] - 60) < 0.05


def test_fixed_only_just_is_a_warning_in_the_record(tmp_path: Path) -> None:
    """10 cm off the line: the two distances do fix it, badly; 40 m off there is nothing to say."""
    said = {}
    for off in (1.0, 40.0):
        sheet = sound(0, 9)
        sheet.known = sheet.middle[:]
        a, b = sheet.neighbours(2)
        way = sheet.at[b] - sheet.at[a]
        p = sheet.new(sheet.at[a] + way * (0.5 + 1j * off / abs(way)))
        sheet.distances += [(a, p), (b, p)]
        folder = tmp_path / f"{off}"
        folder.mkdir()
        solution = adjust.solve(adjust.read(sheet.write(folder)))
        said[off] = warnings(solution)
        shown = [w for w in build(adjust.assess(solution))["warnings"] if p in w]
        assert shown == said[off]
    assert len(said[1.0]) == 1
    assert "two distances do not fix it sideways" in said[1.0][0]
    assert "nearly so" in said[1.0][0]
    assert said[40.0] == []


def test_islands_are_told(tmp_path: Path) -> None:
    sheet = sound(0, 9)
    names = sheet.grid(4, sheet.outside(), "both")
    lines = adjust.check(adjust.read(sheet.write(tmp_path)))
    told_of = [line for line in lines if line.startswith("Islands in the plane that share no reading: ")]
    assert len(told_of) == 1
    assert f"; {', '.join(names)}" in told_of[0]


# ---- unchecked readings


def polar(sheet: Sheet) -> tuple[str, str]:
    """A station by one pointing and one distance; (from, to)."""
    a, b = sheet.neighbours(2)
    p = sheet.new(sheet.outside())
    sheet.sets.append((a, [b, p]))
    sheet.distances.append((a, p))
    return a, p


def reasons(sheet: Sheet, folder: Path) -> tuple[dict[str, str], dict[str, object]]:
    """Reason of each unchecked reading by id, and the record."""
    record = build(adjust.assess(adjust.solve(adjust.read(sheet.write(folder)))))
    assert not any(FORBIDDEN.search(one["why"]) for one in record["unchecked"])
    return {one["observation"]: one["why"] for one in record["unchecked"]}, record


@pytest.mark.parametrize("seed", [0, 2])  # held, free
def test_a_polar_spur_hangs_on_its_two_readings(seed: int, tmp_path: Path) -> None:
    sheet = sound(seed, 9)
    _, p = polar(sheet)
    why, record = reasons(sheet, tmp_path)
    assert sorted(why.values()) == [
        f"an error in this distance goes unseen into {p}, because {p} hangs on it and one pointing alone",
        f"an error in this pointing goes unseen into {p}, because {p} hangs on it and one distance alone",
        f"an error in this pointing goes unseen into {p}: it orients the set that alone leads there",
    ]
    (shot,) = record["side_shots"]
    assert shot["station"] == p
    assert set(shot["readings"]) < set(why)
    station = next(s for s in record["stations"] if s["station"] == p)
    assert {key: shot[key] for key in ("east", "sd_north")} == {key: station[key] for key in ("east", "sd_north")}


def test_side_shots_count_in_no_verdict(tmp_path: Path) -> None:
    sheet = sound(0, 9)
    _, p = polar(sheet)
    _, record = reasons(sheet, tmp_path)
    lines = summary_lines(record)
    worst = next(line for line in lines if line.startswith("Least certain position"))
    assert f": {p}," not in worst
    uncertain = max(record["stations"], key=lambda s: (s["ellipse"] or {"semi_major": 0})["semi_major"] or 0)
    assert uncertain["station"] == p, "the side shot is the least certain, so leaving it out is seen"
    assert any(line.startswith("Side shots") and p in line for line in lines)


def test_a_resection_of_three_has_nothing_to_spare(tmp_path: Path) -> None:
    sheet = sound(3, 9)
    a, b, c = sheet.neighbours(3)
    p = sheet.new(sheet.at[a] + 40 + 20j)
    sheet.sets.append((p, [a, b, c]))
    why, _ = reasons(sheet, tmp_path)
    assert set(why.values()) == {
        f"{p} has as many readings as unknowns: three pointings fix it but nothing checks them"
    }
    assert len(why) == 3


@pytest.mark.parametrize("seed", [4, 5])
def test_the_only_angle_that_turns_a_piece(seed: int, tmp_path: Path) -> None:
    sheet = sound(seed, 9)
    hinge(sheet)
    _, names, about = sheet.wanted[0]
    other = next(m for m in sheet.middle if m != about)
    sheet.angles.append((about, other, names[0]))
    why, record = reasons(sheet, tmp_path)
    assert why == {
        "angles.csv:2": f"an error in this angle goes unseen into the turn of {', '.join(names)} about {about}: "
        "nothing else ties them"
    }
    assert record["side_shots"] == []


def test_a_levelled_line_that_is_the_only_way(tmp_path: Path) -> None:
    sheet = Sheet(np.random.default_rng(1))
    a, b, c, d, e = (sheet.new(complex(100 * k, 0)) for k in range(5))
    sheet.known_heights = [a]
    sheet.levelled = [(a, b), (b, c), (c, a), (c, d), (d, e)]
    why, record = reasons(sheet, tmp_path)
    assert why == {"levelled.csv:5": f"the levelled line {c}-{d} is the only way to {d}, {e}",
                   "levelled.csv:6": f"the levelled line {d}-{e} is the only way to {e}"}  # fmt: skip
    assert [s["station"] for s in record["side_shots"]] == [d, e]


def test_the_only_reading_of_a_set(tmp_path: Path) -> None:
    sheet = sound(0, 9)
    a, b = sheet.neighbours(2)
    sheet.sets.append((a, [b]))
    why, _ = reasons(sheet, tmp_path)
    assert list(why.values()) == ["the only reading of its set: it gives that set its orientation and nothing else"]


def test_check_prints_reasons_and_side_shots(tmp_path: Path) -> None:
    sheet = sound(0, 9)
    _, p = polar(sheet)
    lines = adjust.check(adjust.read(sheet.write(tmp_path)))
    assert any(line.startswith("3 readings are checked by no other") for line in lines)
    assert sum(f"into {p}" in line for line in lines) == 3
    assert f"Side shots, fixed by unchecked readings only: {p}." in lines


def test_check_refuses_with_the_same_words_as_the_adjustment(tmp_path: Path) -> None:
    for seed in range(len(SORTS)):
        name, sheet = defective(seed)
        if "between" in name or "along_two" in name or "circle" in name:
            continue  # fixed only just: that shows when the iteration settles
        folder = tmp_path / name
        folder.mkdir()
        job = adjust.read(sheet.write(folder))
        with pytest.raises(Unsolvable) as checked:
            adjust.check(job)
        with pytest.raises(Unsolvable) as solved:
            adjust.solve(job)
        assert checked.value.sentences == solved.value.sentences, name


# ---- bridges


@pytest.mark.parametrize("seed", range(20))
def test_bridges_are_the_edges_whose_removal_cuts(seed: int) -> None:
    rng = np.random.default_rng(seed)
    n, m = int(rng.integers(2, 25)), int(rng.integers(1, 40))
    start, end = rng.integers(0, n, m), rng.integers(0, n, m)
    print(f"seed {seed}: {n} nodes, {m} edges")
    found = bridges(n, start, end, [0])

    def pieces(kept: np.ndarray) -> tuple[int, np.ndarray]:
        matrix = coo_array((np.ones(kept.sum()), (start[kept], end[kept])), shape=(n, n))
        return connected_components(matrix, directed=False)

    every = np.ones(m, dtype=bool)
    whole, _ = pieces(every)
    cut = {e for e in range(m) if pieces(np.arange(m) != e)[0] > whole}
    assert set(found) == cut
    for e, far in found.items():
        _, label = pieces(np.arange(m) != e)
        assert len(set(label[far])) == 1
        assert set(np.flatnonzero(label == label[far[0]])) == set(far)
        assert (0 in far) == (label[0] == label[far[0]]) == False  # noqa: E712  # three things at once are meant


def test_a_long_chain_does_not_exhaust_the_stack() -> None:
    n = 50_000
    assert len(bridges(n, np.arange(n - 1), np.arange(1, n), [0])) == n - 1


# ---- readings that fight


def test_the_reading_that_fights_is_named_with_its_amount(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """With the iterations cut short; left to itself the damped iteration settles on most of these too."""
    monkeypatch.setattr("adjust.solver.gauss.MOST_ITERATIONS", 4)
    monkeypatch.setattr("adjust.solver.gauss.MOST_NEWTON", 4)
    for seed in (1, 3, 7, 17):
        sheet = sound(seed)
        folder = tmp_path / str(seed)
        folder.mkdir()
        sheet.write(folder)
        lines = (folder / "distances.csv").read_text().splitlines()
        k = len(lines) // 2
        a, b, d, sd = lines[k].split(",")
        wrong = 20 * float(d)
        lines[k] = f"{a},{b},{wrong!r},{sd}"
        (folder / "distances.csv").write_text("\n".join(lines) + "\n")
        with pytest.raises(NotConverged) as stopped:
            adjust.solve(adjust.read(folder))
        off = float(f"{wrong - float(d):.2g}")
        head = f"distances.csv:{k + 1} (distance {a} to {b}, {wrong!r} m) disagrees with the others by about {off:g} m"
        assert stopped.value.sentences[0].startswith(head), (seed, stopped.value.sentences)


def test_pointings_that_fight_are_given_in_degrees(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """One pointing of a set of four turned half round: the iteration is stopped, since the start is good."""
    monkeypatch.setattr("adjust.solver.gauss.MOST_ITERATIONS", 4)
    monkeypatch.setattr("adjust.solver.gauss.MOST_NEWTON", 4)
    sheet = sound(216)
    folder = sheet.write(tmp_path)
    lines = (folder / "directions.csv").read_text().splitlines()
    cells = lines[294].split(",")
    lines[294] = ",".join([*cells[:3], repr((float(cells[3]) + 180) % 360), cells[4]])
    (folder / "directions.csv").write_text("\n".join(lines) + "\n")
    with pytest.raises(NotConverged) as stopped:
        adjust.solve(adjust.read(folder))
    (only,) = stopped.value.sentences
    head = f"directions.csv:295 (pointing {cells[0]} to {cells[1]}, {(float(cells[3]) + 180) % 360!r}) disagrees"
    assert only.startswith(f"{head} with the others by about 180 degrees: ")


def test_the_solver_alone_refuses_with_the_stations(tmp_path: Path) -> None:
    """Loose carries the movements, and names the stations without any words from the judge."""
    sheet = sound(0)
    spur_distance(sheet)
    from adjust.solver.solve import solve

    with pytest.raises(defects.Loose) as refused:
        solve(adjust.read(sheet.write(tmp_path)))
    names = adjust.read(tmp_path).network.stations.names
    freedom = refused.value.freedom
    assert [names[i] for i in freedom.stations] == list(sheet.wanted[0][1])
    assert Figure(replace(freedom, moves=freedom.moves[:, :, :0])).sentences() == []


def test_a_chain_of_spurs_peels_from_its_end(tmp_path: Path) -> None:
    sheet = sound(0)
    walk = [sheet.free_station(), *(sheet.new(900 + 70j * k + 30 * (k % 2)) for k in range(6))]
    sheet.distances += list(pairwise(walk))
    for name in walk[1:]:
        sheet.want("held by one distance only", [name])
    assert judged(sheet)[0]
