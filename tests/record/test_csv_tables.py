"""stations.csv and observations.csv: units, axis order, decimal mark, quoting, and that nothing executes."""

from __future__ import annotations

import csv
import io
import math

import pytest

from adjust.caution import CAUTION
from adjust.record.csv_tables import observations_csv, safe_text, stations_csv
from adjust.units import US_FOOT, parse_angle, parse_bearing
from tests.helpers import close
from tests.record.samples import SEC, bare_record, hostile_record, level_record, plane_record


def rows_of(text: str, delimiter: str = ",") -> list[dict[str, str]]:
    """The table as a spreadsheet reads it, without the comment line."""
    comment, rest = text.split("\r\n", 1)
    assert comment == f"# {CAUTION}"
    return list(csv.DictReader(io.StringIO(rest, newline=""), delimiter=delimiter, strict=True))


def test_every_line_ends_with_crlf() -> None:
    for text in (stations_csv(plane_record()), observations_csv(plane_record())):
        assert text.endswith("\r\n")
        assert text.count("\n") == text.count("\r\n")


def test_station_figures_in_metres_and_millimetres() -> None:
    row = rows_of(stations_csv(plane_record()))[2]
    assert (row["station"], row["role"], row["height_m"]) == ("P1", "new", "")
    assert (row["east_m"], row["north_m"]) == ("1102.4180", "2151.2670")
    assert (row["sd_east_mm"], row["sd_north_mm"], row["sd_height_mm"]) == ("2.10", "1.40", "")
    assert row["covariance_east_north_mm2"] == "0.8820"  # 0.3 · 2.1 · 1.4
    assert row["confidence"] == "0.9500"


def test_ellipse_cells_are_those_of_the_record() -> None:
    record = plane_record()
    for row, one in zip(rows_of(stations_csv(record)), record["stations"], strict=True):
        if row["ellipse_semi_major_mm"] != "0.00":
            close(
                float(row["ellipse_confidence_semi_major_mm"]),
                1000 * one["ellipse_confidence"]["semi_major"],
                atol=0.006,
            )
            close(parse_angle(row["ellipse_azimuth_dms"], "dms") + 1, one["ellipse"]["azimuth"] + 1, atol=0.51 * SEC)


def test_us_survey_feet_north_first_and_decimal_comma() -> None:
    record = plane_record()
    record["units"].update(length="us-ft", decimal=",", axis_order="north, east", bearings="quadrant", angle="gon")
    text = stations_csv(record)
    header = text.split("\r\n")[1].split(";")
    assert header[3:5] == ["north_us_ft", "east_us_ft"]
    assert header.index("sd_north_us_ft") + 1 == header.index("sd_east_us_ft")
    row = rows_of(text, ";")[2]
    close(float(row["east_us_ft"].replace(",", ".")) * US_FOOT, 1102.418, atol=2e-5)
    azimuth = record["stations"][2]["ellipse"]["azimuth"]
    close(parse_bearing(row["ellipse_azimuth_quadrant"], "gon", ","), azimuth, atol=1e-6)
    assert "." not in row["east_us_ft"]


def test_lengths_and_angles_fill_their_own_columns() -> None:
    rows = rows_of(observations_csv(plane_record()))
    distance, direction = rows[2], next(row for row in rows if row["kind"] == "direction")
    assert (distance["residual_mm"], distance["residual_sec"], distance["observed_dms"]) == ("-21.00", "", "")
    assert (direction["residual_mm"], direction["observed_m"], direction["sd_sec"]) == ("", "", "3.00")
    close(float(direction["residual_sec"]), 2 * math.sin(1), atol=0.006)
    assert distance["suspect"] == "yes"
    assert direction["suspect"] == "no"


def test_observed_plus_residual_is_adjusted_in_the_printed_figures() -> None:
    for row in rows_of(observations_csv(plane_record())):
        if row["kind"] == "distance":
            difference = float(row["adjusted_m"]) - float(row["observed_m"])
            close(1000 * difference + 100, float(row["residual_mm"]) + 100, atol=0.02)


def test_gon_jobs_show_milligon() -> None:
    record = plane_record()
    record["units"]["angle"] = "gon"
    row = rows_of(observations_csv(record))[-1]
    close(float(row["residual_mgon"]), 18 * (400 / 1296), atol=0.006)  # one second is 400/1296 mgon


def test_an_adjusted_direction_just_below_zero_is_printed_on_the_circle() -> None:
    record = plane_record()
    one = next(o for o in record["observations"] if o["kind"] == "direction")
    one.update(observed=0.0, adjusted=-1 * SEC)
    assert "359 59 59.00" in observations_csv(record)
    one["adjusted"] = -1e-13  # rounds to a full circle
    row = next(r for r in rows_of(observations_csv(record)) if r["kind"] == "direction")
    assert row["adjusted_dms"] == "0 00 00.00"


@pytest.mark.parametrize(
    "text", ["=1+1", "+A1", "-A1", "@SUM(A1)", "\tx", "\r=1", "\n=1", "-1-cmd|' /C calc'!A0", "+1*2"]
)
def test_text_a_spreadsheet_would_execute_gets_an_apostrophe(text: str) -> None:
    assert safe_text(text) == "'" + text


@pytest.mark.parametrize("text", ["-0.123", "+12.5", "-45 30 15.2", "-1,5", "P1", "", "a=b", "12-3"])
def test_numbers_and_plain_text_are_not_touched(text: str) -> None:
    assert safe_text(text) == text


def test_booked_text_that_is_a_number_stays() -> None:
    record = level_record()
    record["observations"][0]["booked"] = "-1.6141"
    record["observations"][1]["booked"] = "=2+3"
    booked = [row["booked"] for row in rows_of(observations_csv(record))]
    assert booked[:2] == ["-1.6141", "'=2+3"]


def test_hostile_names_come_back_whole() -> None:
    record = hostile_record()
    names = [row["station"].removeprefix("'") for row in rows_of(stations_csv(record))]
    assert names == [one["station"] for one in record["stations"]]
    assert "'=1+1" in stations_csv(record)


@pytest.mark.parametrize("name", ["#7", 'a"b', "a,b", " lead", "trail "])
def test_names_that_need_quotes_have_them(name: str) -> None:
    record = bare_record()
    record["stations"][0]["station"] = name
    text = stations_csv(record)
    assert rows_of(text)[0]["station"] == name
    assert text.split("\r\n")[2].startswith('"')


def test_a_minus_zero_is_zero() -> None:
    record = bare_record()
    record["stations"][0].update(east=-0.0, north=-0.00001)
    row = rows_of(stations_csv(record))[0]
    assert (row["east_m"], row["north_m"]) == ("0.0000", "0.0000")


def test_untested_readings_have_empty_cells() -> None:
    row = rows_of(observations_csv(bare_record()))[0]
    empty = ("statistic", "critical", "smallest_detectable_mm", "external_effect_station", "external_effect_mm", "at")
    assert [row[name] for name in empty] == [""] * len(empty)


def test_heights_only() -> None:
    row = rows_of(stations_csv(level_record()))[1]
    assert (row["east_m"], row["height_m"], row["sd_height_mm"], row["ellipse_semi_major_mm"]) == (
        "",
        "214.0172",
        "1.40",
        "",
    )
