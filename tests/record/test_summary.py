"""The summary: one screen, plain words, figures with the places their standard deviations allow."""

from __future__ import annotations

import copy
import math
from typing import Any

import pytest

from adjust.caution import CAUTION
from adjust.record.shown import Shown, places_for, plain, two_figures
from adjust.record.summary import MOST_LINES, WIDTH, summary_lines
from tests.record.samples import bare_record, grid_record, hostile_record, level_record, plane_record

SAMPLES = {"plane": plane_record, "level": level_record, "bare": bare_record, "hostile": hostile_record,
           "grid": lambda: grid_record(8)}  # fmt: skip


def text_of(record: dict[str, Any]) -> str:
    """The summary as one line, for words that may be wrapped."""
    return " ".join(" ".join(summary_lines(record)).split())


@pytest.mark.parametrize("name", SAMPLES)
def test_it_fits_one_screen_and_ends_with_the_caution(name: str) -> None:
    lines = summary_lines(SAMPLES[name]())
    assert len(lines) <= MOST_LINES
    assert max(map(len, lines)) <= WIDTH
    assert " ".join(" ".join(lines).split()).endswith(CAUTION)
    assert all(line.isprintable() for line in lines)


def full_record() -> dict[str, Any]:
    """Everything a summary could have to say, at once."""
    record = plane_record()
    record["stations"] = record["stations"] * 2
    record["suspects"] *= 4
    record["unchecked"] *= 9
    record["control"] = [{**one, "sentence": one["sentence"] * 8} for one in record["control"] * 5]
    record["left_out"] *= 7
    record["not_measured"] = [{"observation": "p.csv:1", "file": "p.csv", "line": 1, "kind": "distance"}]
    record["warnings"] = ["word " * 60] * 9
    record["solution"]["parts"] = record["solution"]["parts"] * 6
    record["units"].update(length="us-ft")
    for one in record["stations"]:
        one.update(east=one["east"] + 1234567.0, height=1234.5678, sd_height=0.0012, role_height="weighted")
    return record


def test_a_job_with_everything_wrong_still_fits_about_a_screen() -> None:
    lines = summary_lines(full_record())
    assert len(lines) <= MOST_LINES + 5
    assert max(map(len, lines)) <= WIDTH
    assert "and 5 more suspects: see the record" in " ".join(lines)
    assert "and 6 more warnings: see the record" in " ".join(lines)


def test_counts_and_datum_in_words() -> None:
    assert "Adjusted 8 stations from 26 readings: 12 unknowns, 14 degrees of freedom. Datum: held control." in text_of(
        plane_record()
    )


def test_one_is_singular() -> None:
    assert "Adjusted 2 stations from 1 reading: 0 unknowns" in text_of(bare_record())


@pytest.mark.parametrize(
    ("verdict", "words"),
    [
        ("met", "Overall test, plane: met"),
        ("not met", "Overall test, plane: NOT MET, readings scatter more than stated"),
        ("better than stated", "better than stated, readings scatter less"),
    ],
)
def test_overall_test_in_words(verdict: str, words: str) -> None:
    record = plane_record()
    record["solution"]["parts"][0]["overall_test"] = {"interval": [0.47, 1.73], "verdict": verdict}
    assert words in text_of(record)
    assert "(variance factor 1.06, limits 0.47 to 1.73)" in text_of(record)


def test_a_job_without_readings_to_spare_says_so() -> None:
    assert "Overall test, plane: cannot be tested, no reading is to spare." in text_of(bare_record())


def test_each_uncoupled_part_has_its_own_verdict() -> None:
    record = plane_record()
    heights = copy.deepcopy(record["solution"]["parts"][0])
    heights.update(what="heights", overall_test={"interval": [0.2, 2.5], "verdict": "not met"}, variance_factor=3.2)
    record["solution"]["parts"].append(heights)
    assert "Overall test, plane: met" in text_of(record)
    assert "Overall test, heights: NOT MET" in text_of(record)


def test_suspects_are_named_with_amount_statistic_and_cause() -> None:
    text = text_of(plane_record())
    assert "distances.csv:4: distance P2 to P3, reads 38.2 mm too much; statistic 14.2 (limit 3.29)" in text
    assert "two digits changed places" in text
    assert "angle at P7 from P4 to M2, reads 33.0 sec too little" in text
    assert "cannot be told from directions.csv:8" in text
    assert "expected by chance: 0.026" in text


def test_suspects_stand_before_the_table_and_the_worst_three_only() -> None:
    record = plane_record()
    record["suspects"] = [{**record["suspects"][0], "observation": f"distances.csv:{n}"} for n in (4, 5, 6, 7, 8)]
    lines = summary_lines(record)
    assert sum("distance " in line and "reads" in line for line in lines) == 3
    assert lines.index("  and 2 more suspects: see the record") < next(
        i for i, line in enumerate(lines) if line.startswith("Station ")
    )


def test_no_suspects_is_said() -> None:
    assert "No suspect readings (expected by chance: 0.008)." in text_of(level_record())


def test_amounts_in_the_jobs_units() -> None:
    record = plane_record()
    record["units"].update(length="ft", angle="gon", decimal=",")
    text = text_of(record)
    assert f"reads {0.0382 / 0.3048:.4f} ft too much".replace(".", ",") in text
    assert "reads 10,2 mgon too little" in text  # 33 seconds are 10.185 mgon
    assert "statistic 14,2 (limit 3,29)" in text


def test_large_blunders_are_in_metres_and_degrees() -> None:
    record = plane_record()
    record["suspects"][0].update(estimated_blunder=18.0, sd=0.0031)
    record["suspects"][1].update(estimated_blunder=math.radians(-1.0))
    text = text_of(record)
    assert "reads 18.0000 m too much" in text
    assert "reads 1 00 00 too little" in text


def test_unchecked_control_left_out_and_warnings() -> None:
    text = text_of(plane_record())
    assert "Unchecked: 1 reading nothing else would contradict: distances.csv:7." in text
    assert (
        "Control compared (2 coordinates): 1 disagrees, 1 agrees. C9 stands 13.1 mm north of its known place." in text
    )
    assert "Left out: 1 reading: distances.csv:12 (tripod was knocked)." in text
    assert "Warning: TP1 and TP01" in text


def test_least_certain_position_and_height() -> None:
    assert "Least certain position: P7, 95 % ellipse 12 by 4.4 mm (half axes), long axis 20 deg." in text_of(
        plane_record()
    )
    assert "Least certain height: TP5, standard deviation 2.6 mm." in text_of(level_record())


def test_the_table_of_many_stations_shows_the_least_certain() -> None:
    record = grid_record(8)
    lines = summary_lines(record)
    assert any(line.startswith("The 8 least certain of 64 stations (all in stations.csv)") for line in lines)
    worst = max(record["stations"], key=lambda one: one["ellipse_confidence"]["semi_major"])["station"]
    assert any(line.startswith(worst + " ") for line in lines)


def test_axis_order_of_the_table() -> None:
    record = plane_record()
    header = next(line for line in summary_lines(record) if line.startswith("Station "))
    assert header.index("East") < header.index("North")
    record["units"]["axis_order"] = "north, east"
    header = next(line for line in summary_lines(record) if line.startswith("Station "))
    assert header.index("North") < header.index("East")
    assert header.index("sd N") < header.index("sd E")


def test_decimal_marks_stand_below_each_other() -> None:
    record = level_record()
    for i, one in enumerate(record["stations"]):
        one["sd_height"] = one["sd_height"] and one["sd_height"] * 10 ** (i % 3)
    lines = summary_lines(record)
    start = next(i for i, line in enumerate(lines) if line.startswith("Station "))
    table = lines[start + 1 : start + 8]
    assert len({line.index(".") for line in table}) == 1
    assert len({line.split()[2] for line in table}) == 7


def test_an_unsettled_solution_is_not_passed_off() -> None:
    record = plane_record()
    record["solution"].update(converged=False, iterations=30)
    assert "NOT SETTLED after 30 iterations: do not use these figures." in text_of(record)


def test_control_signs_and_direction_marks_are_shown_as_escapes() -> None:
    record = plane_record()
    record["job"]["title"] = "evil \x1b[31m \u202e title"
    assert "\\x1b[31m" in text_of(record)
    assert "\\u202e" in text_of(record)


@pytest.mark.parametrize(
    ("sd", "places"),
    [(0.0023, 4), (0.012, 3), (0.0996, 2), (0.099, 3), (0.85, 2), (2.3, 1), (12.0, 0), (130.0, 0), (None, 4)],
)
def test_two_significant_figures_decide_the_places(sd: float | None, places: int) -> None:
    assert places_for(sd) == places


@pytest.mark.parametrize(
    ("sd", "text"), [(0.851, "0.85"), (2.34, "2.3"), (11.6, "12"), (130.4, "130"), (0.0996, "0.10")]
)
def test_two_figures(sd: float, text: str) -> None:
    assert two_figures(sd) == text


def test_plain_cuts_and_joins() -> None:
    assert plain("a  b", 10) == "a b"
    assert plain("abcdef", 4) == "abc…"
    assert plain(None) == ""


@pytest.mark.parametrize(
    ("angle", "bearings", "azimuth", "text"),
    [
        ("dms", "azimuth", 45.4, "45 deg"),
        ("gon", "azimuth", 90.0, "100 gon"),
        ("mil", "azimuth", 45.0, "800 mil"),
        ("dms", "quadrant", 20.0, "N 20 E (deg)"),
        ("dms", "quadrant", 150.0, "N 30 W (deg)"),
        ("dms", "azimuth", 179.9, "0 deg"),
    ],
)
def test_rough_bearing_of_a_long_axis(angle: str, bearings: str, azimuth: float, text: str) -> None:
    record = plane_record()
    record["units"].update(angle=angle, bearings=bearings)
    assert Shown.of(record).rough_bearing(math.radians(azimuth)) == text


def test_control_verdicts_agree_in_number() -> None:
    record = plane_record()
    record["control"] = [{**record["control"][0], "part": part} for part in ("east", "north")]
    assert "Control compared (2 coordinates): 2 agree." in text_of(record)


def closure(verdict: str, stations: list[str], sentence: str = "") -> dict[str, Any]:
    return {"kind": "level loop", "stations": stations, "verdict": verdict, "sentence": sentence}


def test_closures_are_counted_and_the_worst_told() -> None:
    record = plane_record()
    assert "Closures" not in text_of(record)
    record["closures"] = [closure("met", ["A", "B", "A"])] * 3
    assert "Closures: 3 met. " in text_of(record)
    record["closures"].append(closure("cannot be tested", ["A", "C", "A"]))
    assert "Closures: 3 met, 1 cannot be tested. " in text_of(record)
    bad = closure("not met", [f"P{k}" for k in range(12)], "The misclosure is a decimetre.")
    record["closures"] += [bad] * 5
    text = text_of(record)
    assert "Closures: 3 met, 1 cannot be tested, 5 NOT MET:" in text
    assert text.count("level loop P0-(10 more)-P11. The misclosure is a decimetre.") == 3
    assert "and 2 more: see brasscap check" in text
