"""What no construction reaches is said in trade words, by station, with what is missing."""

from __future__ import annotations

import numpy as np

from adjust.graph.starts import find_start
from tests.graph.sketch import Sketch
from tests.helpers import close

PLACES = {
    "A": (1000.0, 2000.0),
    "B": (1210.0, 2035.0),
    "C": (1105.0, 2190.0),
    "D": (1290.0, 2240.0),
    "E": (1400.0, 2110.0),
}


def sketch(names: str) -> Sketch:
    return Sketch(**{k: PLACES[k] for k in names})


def test_one_distance_only() -> None:
    one = sketch("ABC").distances("A-C")
    assert find_start(one.network("A B")).failures == (
        "C is held by one reading only (distance distances.csv:2): nothing fixes it sideways; measure to it once more, "
        "or give a row in stations.csv",
    )


def test_one_sight_only() -> None:
    one = sketch("ABC").sets("A: B C")
    (sentence,) = find_start(one.network("A B")).failures
    assert sentence.startswith(
        "C is held by one reading only (direction directions.csv:3): nothing fixes it along the line"
    )


def test_a_piece_that_hangs_on_one_station() -> None:
    one = sketch("ABCDE").sets("C: D E", "D: C E").distances("C-D", "A-C").sets("A: B")
    (sentence,) = find_start(one.network("A B")).failures
    assert sentence.startswith("C, D, E are held by distance distances.csv:3, from which no position follows")


def test_no_reading_at_all_leads_there() -> None:
    one = sketch("ABCDE").sets("A: B C", "B: A C").distances("D-E")
    one.azimuths("D-E", "A-B", turn=0.1)
    sentences = find_start(one.network("A B")).failures
    assert any(s.startswith("D, E: no reading leads there from known stations") for s in sentences)


def test_a_row_mends_what_the_sentence_asks_for() -> None:
    one = sketch("ABC").distances("A-C")
    start = find_start(one.network("A B", rows="C"))
    assert start.failures == ()
    close(start.positions[2, :2], one.truth[2, :2], atol=1e-9)


def test_places_that_are_found_are_kept_beside_the_failure() -> None:
    one = sketch("ABCD").sets("A: B C", "B: A C").distances("C-D")
    start = find_start(one.network("A B"))
    assert len(start.failures) == 1
    close(start.positions[2, :2], one.truth[2, :2], atol=1e-6)
    assert np.isnan(start.positions[3, :2]).all()
