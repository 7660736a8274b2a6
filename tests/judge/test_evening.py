"""The evening in words: what check prints of raw books, corrections and closures, in its order."""

from __future__ import annotations

from pathlib import Path

import pytest

import adjust
from adjust.judge.check import look

NETWORKS = Path(__file__).parents[2] / "networks"


def lines(name: str) -> list[str]:
    return look(adjust.read(NETWORKS / name)).lines


def first(found: list[str], words: str) -> int:
    return next(k for k, line in enumerate(found) if words in line)


def test_rounds_in_the_order_of_the_evening() -> None:
    """The demo's instrument: 2C -22 and index 9 seconds (networks/simulate_books.py)."""
    found = lines("spillway-pillars")
    order = ["face mean 108", "K1: ", "read in one face only", "Distances: reflector constant -34.4 mm (108, here)",
             "Closures: 27 met", "height loop K1-S1-S2-K1, 305 m: height +0.7 mm",
             "height run K1-K2, 290 m: height +0.8 mm", "triangle K1-K2-S1-K1: angle",
             "plane and heights:"]  # fmt: skip
    places = [first(found, words) for words in order]
    assert places == sorted(places), found
    errors = [line for line in found if "2C -2" in line and "index +" in line]
    assert len(errors) == 6


def test_levels_in_the_order_of_the_evening() -> None:
    """The demo's level points up by 12 seconds; the two-peg test finds it to a second or so."""
    found = lines("river-levels")
    order = ["two-peg test", "The line of sight points up by 11.1 sec", "from 5 pairs", "Closures: 10 met",
             "level loop BM1-RB1-BM1, 555 m", "level run BM1-RB1-RB2-RB3-RB4-BM4", "heights: BM1"]  # fmt: skip
    places = [first(found, words) for words in order]
    assert places == sorted(places), found


def test_a_traverse_with_all_its_figures() -> None:
    found = lines("loop-traverse-feet")
    line = found[first(found, "loop traverse")]
    for words in ("2395 ft", "angle -29.0 sec, allowed", "linear 0.025 ft 1:97,644 (east -0.011 ft, north +0.022 ft)"):
        assert words in line


def test_nothing_closes(tmp_path: Path) -> None:
    (tmp_path / "job.toml").write_text('[units]\nlength = "m"\nangle = "dms"\n', "utf-8")
    (tmp_path / "levelled.csv").write_text("from,to,rise,sd\nA,B,1.0,0.001\n", "utf-8")
    seen = look(adjust.read(tmp_path))
    assert not seen.failed
    assert "Nothing closes: no loop, no run between known points, no triangle." in seen.lines


@pytest.mark.parametrize(("name", "count"), [("spillway-pillars", 27), ("river-levels", 10)])
def test_the_record_holds_what_check_says(name: str, count: int) -> None:
    from adjust.record.build import build

    job = adjust.read(NETWORKS / name)
    record = build(adjust.assess(adjust.solve(job)))
    assert len(record["closures"]) == count
    assert {one["verdict"] for one in record["closures"]} == {"met"}
    assert len(record["reductions"]) == len(job.reductions) > 100
    own = [one for one in record["ledger"] if not one["name"].endswith("to the plane")]
    assert len(own) == len(job.ledger)
    ids = {one["id"] for one in record["observations"]}
    assert {i for one in record["closures"] for i in one["observations"]} <= ids
    if name == "river-levels":
        assert {one["method"] for one in record["balances"]} == {"levels by length"} or record["balances"]


def test_the_ledger_of_a_distance_leads_from_the_book_to_the_plane() -> None:
    """Booked, corrected, adjusted, and on the plane between the marks: every step is a line or the residual."""
    from adjust.record.build import build

    job = adjust.read(NETWORKS / "spillway-pillars")
    record = build(adjust.assess(adjust.solve(job)))
    place = {one["station"]: (one["east"], one["north"]) for one in record["stations"]}
    distances = [one for one in record["observations"] if one["kind"] == "distance"]
    assert len(distances) == 108
    for one in distances[::9]:
        texts = [float(text) for text in one["booked"].split(" / ")]
        amounts = [x["amount"] for x in record["ledger"] if x["observation"] == one["id"]]
        assert [x["name"] for x in record["ledger"] if x["observation"] == one["id"]] == [
            "reflector constant", "atmosphere", "slope to the plane"
        ]  # fmt: skip
        plane = sum(texts) / len(texts) + sum(amounts) + one["residual"]
        (e0, n0), (e1, n1) = place[one["from"]], place[one["to"]]
        assert abs(plane - ((e1 - e0) ** 2 + (n1 - n0) ** 2) ** 0.5) < 1e-7
