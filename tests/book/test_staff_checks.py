"""What is looked at in a level book: pages, wires, the two-peg test, balance of sights, runs compared."""

from __future__ import annotations

import math
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.book.level_sections import per_root_km
from adjust.book.peg_test import collimation
from adjust.units import RHO_SEC
from tests.book.jobs import job
from tests.book.level_books import HEAD, readings, sums, table, truth
from tests.book.test_staff import BOOK, CONTROL, book, found
from tests.helpers import close


def values(reduction: adjust.book.reductions.Reduction, *names: str) -> list[float]:  # type: ignore[name-defined] # loaded by adjust.read
    return [reduction.values[name] or 0.0 for name in names]


def test_the_booking_by_rise_and_fall_and_by_height_of_collimation(tmp_path: Path) -> None:
    """Worked by hand from the readings of BOOK."""
    read = job(tmp_path, staff=BOOK, control=CONTROL)
    rows = found(read, "booking")[:5]
    assert [r.of for r in rows] == ["L1: M1", "L1: P5", "L1: L1/TP1", "L1: L1/TP2", "L1: M2"]
    assert [r.values["rise"] is None for r in rows] == [True, False, False, False, False]
    close([values(r, "rise")[0] for r in rows[1:]], [0.621, 0.0, 1.504, 0.0], atol=1e-9)
    close([values(r, "fall")[0] for r in rows[1:]], [0.0, 0.306, 0.0, 0.527], atol=1e-9)
    close([values(r, "height_of_collimation")[0] for r in rows], [51.532, 0, 52.419, 53.307, 0], atol=1e-9)
    close([values(r, "height")[0] for r in rows], [50.0, 50.621, 50.315, 51.819, 51.292], atol=1e-9)
    (check, _) = found(read, "line check")
    close(values(check, "sum_back", "sum_intermediate", "sum_fore", "sum_rise", "sum_fall"),
          [5.124, 0.911, 3.832, 2.125, 0.833], atol=1e-9)  # fmt: skip
    close(values(check, "back_minus_fore", "rise_minus_fall", "last_minus_first"), [1.292] * 3, atol=1e-9)
    close(values(check, "sum_heights", "sum_heights_by_collimation"), [204.047] * 2, atol=1e-9)


def test_heights_count_from_the_first_known_mark_of_the_line_else_from_zero(tmp_path: Path) -> None:
    later = job(tmp_path / "later", staff=BOOK, control="station,height\nM2,51.292\n")
    close([values(r, "height")[0] for r in found(later, "booking")[:1]], [50.0], atol=1e-9)
    none = job(tmp_path / "none", staff=BOOK)
    close([values(r, "height")[0] for r in found(none, "booking")[:5]], [0, 0.621, 0.315, 1.819, 1.292], atol=1e-9)


PAGES = {"sum_back": "{ 1 = 3.636, 2 = 1.488, 3 = 2.220 }", "sum_fore": "{ 1 = 1.217, 2 = 2.615, 3 = 3.512 }",
         "sum_intermediate": "{ 1 = 0.911 }", "sum_rise": "{ 1 = 0.621 }", "sum_fall": "{ 1 = 0.306 }"}  # fmt: skip


def pages(folder: Path, staff: str = BOOK, **changed: str) -> adjust.Job:
    return job(folder, book(**{**PAGES, **changed}), staff=staff, control=CONTROL)


def test_pages_that_add_up(tmp_path: Path) -> None:
    read = pages(tmp_path)
    assert [(r.of, r.verdict) for r in found(read, "page check")] == [
        ("page 1", "met"), ("page 2", "met"), ("page 3", "met"),
    ]  # fmt: skip
    assert read.warnings == ()
    whole = job(tmp_path / "whole", book(sum_back="7.344"), staff=BOOK, control=CONTROL)
    assert [(r.of, r.verdict) for r in found(whole, "page check")][-1] == ("the whole table", "met")
    assert found(job(tmp_path / "plain", staff=BOOK), "page check")[0].verdict == ""


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"sum_back": "{ 1 = 2.104 }"}, "1.532 m more than the booked sum of back sights (perhaps 1.532 in line 2 was "
         "not added)"),
        ({"sum_back": "{ 1 = 5.740 }"}, "2.104 m less than the booked sum of back sights (perhaps 2.104 in line 4 was "
         "added twice)"),
        ({"sum_back": "{ 1 = 3.627 }"}, "0.009 m more than the booked sum of back sights (perhaps 1.532 in line 2 is "
         "1.523 in the book)"),
        ({"sum_back": "{ 1 = 3.336 }"}, "0.300 m more than the booked sum of back sights (a step of one digit: a slip "
         "of adding, or a digit misread)"),
        ({"sum_intermediate": "{ 1 = 0 }", "sum_fore": "{ 1 = 2.128 }"}, "0.911 m less than the booked sum of fore "
         "sights (perhaps 0.911 in line 3 stands under fore in the book)"),
        ({"sum_rise": "{ 1 = 0.734 }"}, "0.113 m less than the booked sum of rises"),
    ],
)  # fmt: skip
def test_a_page_that_does_not_add_up(change: dict[str, str], said: str, tmp_path: Path) -> None:
    read = pages(tmp_path, **change)
    assert [r.verdict for r in found(read, "page check") if r.of == "page 1"] == ["not met"]
    (warning,) = read.warnings
    assert warning.startswith("staff.csv, page 1 does not add up: the readings give ")
    assert said in warning


def test_a_page_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(adjust.errors.InputError) as caught:
        pages(tmp_path, sum_back="{ 4 = 1.5 }")
    assert str(caught.value) == 'job.toml:11: column book.sum_back: "4": no such page; pages here: 1, 2, 3'


def test_forty_books_with_a_reading_copied_wrongly_are_found_on_their_page(tmp_path: Path) -> None:
    """Digits swapped, a whole metre, or a reading in the other column, against sums booked in the field."""
    rng = np.random.default_rng(5)
    named = 0
    for trial in range(40):
        lines = {f"L{p}": readings(rng, truth(rng, [f"M{p}", "TP1", "TP2", "TP3", "TP4", f"N{p}"]), places=3)
                 for p in range(3)}  # fmt: skip
        said = {key: "{ " + ", ".join(f"{p} = {sums(lines[f'L{p}'], c)}" for p in range(3)) + " }"
                for key, c in (("sum_back", 1), ("sum_fore", 2))}  # fmt: skip
        page, slip = int(rng.integers(3)), trial % 2
        row = lines[f"L{page}"][1 + int(rng.integers(4))]
        old = row[1]
        row[1] = f"{float(old) + 1:.3f}" if slip else next(
            (old[:k] + old[k + 1] + old[k] + old[k + 2 :] for k in (3, 2) if old[k] != old[k + 1]), old)  # fmt: skip
        text = table(lines).replace("line,", "line,page,")
        head, *body = text.splitlines()
        now, rows = "", [head]
        for one in body:
            name, rest = one.split(",", 1)
            now = name or now
            rows.append(f"{name},{now.removeprefix('L')},{rest}")
        read = job(tmp_path / str(trial), book(**said), staff="\n".join(rows) + "\n", control="station,height\nM0,50\n")
        off = [r.of for r in found(read, "page check") if r.verdict == "not met"]
        assert off == ([f"page {page}"] if row[1] != old else []), f"seed 5, trial {trial}"
        named += any(f"{row[1]} in line" in w and f"{old} in the book" in w for w in read.warnings)
    assert named >= 15, "of 20 with swapped digits nearly all are told with the reading of the book"


WIRES = """line,station,back,fore,back_upper,back_lower,fore_upper,fore_lower
L1,M1,1.532,,1.732,1.332,,
,TP1,2.104,1.217,2.260,1.950,1.412,1.022
,M2,,1.120,,,1.270,0.968
"""


def test_wires_give_lengths_and_check_the_middle(tmp_path: Path) -> None:
    read = job(tmp_path / "good", staff=WIRES, control=CONTROL)
    wires = found(read, "wires")
    assert [(r.of, r.verdict) for r in wires] == [
        ("back sight on M1", "met"), ("back sight on L1/TP1", "met"), ("fore sight on L1/TP1", "met"),
        ("fore sight on M2", "met"),
    ]  # fmt: skip
    close([values(r, "length")[0] for r in wires], [40.0, 31.0, 39.0, 30.2], atol=1e-9)
    close([values(r, "difference")[0] for r in wires], [0.0, 0.001, 0.0, -0.001], atol=1e-9)
    (block,) = read.network.blocks
    close(block.sd[:, 0], 0.0012 * np.sqrt([0.079, 0.0612]), atol=1e-12)
    strict = job(tmp_path / "strict", book(wire_limit='"0.5 mm"'), staff=WIRES, control=CONTROL)
    assert [r.verdict for r in found(strict, "wires")] == ["met", "not met", "met", "not met"]


def test_a_misread_metre_shows_in_the_wires(tmp_path: Path) -> None:
    read = job(tmp_path, staff=WIRES.replace("2.104,", "2.004,"), control=CONTROL)
    assert [w for w in read.warnings if "wires" in w] == [
        "staff.csv:3: the half-sum of the wires of the back sight leaves the middle reading by 101.0 mm (limit 3 mm): "
        "the middle is misread by that, or one wire by 202.0 mm."
    ]


def test_the_two_peg_formula() -> None:
    """Worked by hand: midway the difference is 0.100, at B 0.104 over 60 m: 4 mm in 60 m, 13.75 sec."""
    c = collimation(np.array([[1.5, 1.4, 1.704, 1.6]]), np.array([[30.0, 30.0, 60.0, 0.0]]))
    close(c * RHO_SEC, [0.004 / 60 * RHO_SEC], atol=1e-9)
    anywhere = np.array([[20.0, 45.0, 70.0, 8.0]])
    rise, tilt = 0.37, 3e-5
    shown = np.array([[2.0, 2.0 - rise, 1.5, 1.5 - rise]]) + tilt * anywhere
    close(collimation(shown, anywhere), [tilt], atol=1e-12)


PEG = "level,near_a,near_b,far_a,far_b,length\nlevel-1,1.500,1.400,1.704,1.600,60\n"


def test_the_standard_deviation_of_a_two_peg_test(tmp_path: Path) -> None:
    """From the level's figure for two set-ups, from the test's own column, and by the spread of many tests."""
    plain = book(collimation='"none"') + '[[book]]\nkind = "peg_test"\n'
    by_model = job(tmp_path / "a", plain, staff=BOOK, control=CONTROL, peg_test=PEG)
    close(values(found(by_model, "two-peg test")[0], "sd_collimation"),
          [0.0012 * math.sqrt(0.06) * math.sqrt(2) / 60], atol=1e-12)  # fmt: skip
    own = PEG.replace("length\n", "length,sd\n").replace(",60\n", ",60,0.0005\n")
    by_sd = job(tmp_path / "b", plain, staff=BOOK, control=CONTROL, peg_test=own)
    close(values(found(by_sd, "two-peg test")[0], "sd_collimation"), [2 * 0.0005 / 60], atol=1e-12)
    rng = np.random.default_rng(8)
    many = collimation(np.array([1.5, 1.4, 1.704, 1.6]) + rng.normal(0, 0.0005, (20000, 4)),
                       np.tile([30.0, 30.0, 60.0, 0.0], (20000, 1)))  # fmt: skip
    assert many.std() / (2 * 0.0005 / 60) == pytest.approx(1.0, abs=0.02)


def test_two_tests_of_a_level_are_meaned_or_said_to_differ(tmp_path: Path) -> None:
    toml = book(collimation='"peg_test"') + '[[book]]\nkind = "peg_test"\n'
    again = PEG + "level-1,1.500,1.400,1.7046,1.600,60\n"
    read = job(tmp_path / "near", toml, staff=BOOK, control=CONTROL, peg_test=again)
    assert read.warnings == ()
    (block,) = read.network.blocks
    close(dict(block.corrections)["collimation"][:1], [-(0.0043 / 60) * 14.5], atol=1e-9)
    one_test = 0.0012 * math.sqrt(0.06) * math.sqrt(2) / 60
    close(values(found(read, "sight balance")[0], "imbalance", "collimation", "sd_collimation"),
          [1.0, -0.0043 / 60, one_test / math.sqrt(2)], atol=1e-10)  # fmt: skip
    apart = job(tmp_path / "far", toml, staff=BOOK, control=CONTROL, peg_test=PEG + "level-1,1.5,1.4,1.712,1.6,60\n")
    assert [w for w in apart.warnings if "two-peg" in w] == [
        "the two-peg tests of level-1 give +13.8 sec and +41.3 sec, more than their standard deviations allow: was it "
        "adjusted between? Then name it as two levels."
    ]


def test_uneven_sights_are_said_where_a_collimation_would_matter(tmp_path: Path) -> None:
    """10 sec over 100 m are 4.8 mm (needs of the trade; 100 x 10/206265)."""
    staff = "line,station,back,fore,back_length,fore_length\nL1,M1,1.5,,60,\n,TP1,1.2,1.1,60,10\n,M2,,1.3,,10\n"
    read = job(tmp_path, staff=staff, control="station,height\nM1,50\n")
    (balance,) = found(read, "sight balance")
    close(values(balance, "imbalance", "by_10_sec"), [100.0, 0.00484814], atol=1e-8)
    assert (
        balance.sentence
        == read.warnings[0]
        == (
            "Line L1: the back sights are 100 m longer in all than the fore sights; a collimation of 10 sec is 4.8 mm "
            "there, more than the standard deviation 0.4 mm of the line."
        )
    )
    even = job(tmp_path, staff=staff.replace("60", "12"), control="station,height\nM1,50\n")
    assert (found(even, "sight balance")[0].sentence, even.warnings) == ("", ())
    bare = "line,station,back,fore\nL1,M1,1.5,\n,TP1,1.2,1.1\n,M2,,1.3\n"
    untold = job(tmp_path, HEAD.replace("km", "setup"), staff=bare, control="station,height\nM1,50\n")
    assert found(untold, "sight balance")[0].verdict == "cannot be tested"


def test_forward_and_back_runs_are_compared(tmp_path: Path) -> None:
    """Worked by hand from BOOK: forward 0.315 + 1.504 - 0.527 over 201 m, back -0.911 - 0.402 over 131 m."""
    staff = BOOK.replace(",M1,,,0.901,", ",M1,,,0.922,")
    read = job(tmp_path, staff=staff, control=CONTROL)
    (pair,) = found(read, "sections")
    assert (pair.of, pair.verdict) == ("M1 to M2, L1 and L2", "not met")
    close(values(pair, "first", "second", "difference", "length", "accumulated"),
          [1.292, 1.313, -0.021, 166.0, -0.021], atol=1e-9)  # fmt: skip
    close(values(pair, "sd_difference"), [0.0012 * math.sqrt(0.332)], atol=1e-9)
    close(values(pair, "allowable"), [1.959964 * 0.0012 * math.sqrt(0.332)], atol=1e-8)
    assert pair.sentence in read.warnings
    assert pair.sentence == (
        "M1 to M2, L1 and L2, forward and back: the two runs differ by 21.0 mm, more than the 1.4 mm which their "
        "standard deviations allow."
    )
    (all_,) = found(read, "sections together")
    close(values(all_, "sd_one_run_per_root_km", "sd_mean_per_root_km"),
          [0.021 / math.sqrt(2 * 0.166), 0.021 / math.sqrt(4 * 0.166)], atol=1e-9)  # fmt: skip


def test_runs_the_same_way_and_marks_between(tmp_path: Path) -> None:
    staff = (
        "line,station,back,fore,back_length,fore_length\n"
        "A,M1,1.500,,30,\n,TP1,1.4,1.2,30,30\n,BM,1.3,1.1,30,30\n,M2,,1.0,,30\n"
        "B,M1,1.501,,30,\n,TP1,1.4,1.2,30,30\n,BM,1.3,1.1,30,30\n,M2,,1.0,,30\n"
    )  # fmt: skip
    read = job(tmp_path, staff=staff, control="station,height\nM1,50\nBM,50.6\n")
    assert [(r.of, r.verdict) for r in found(read, "sections")] == [
        ("M1 to BM, A and B", "met"), ("BM to M2, A and B", "met"),
    ]  # fmt: skip
    close([values(r, "difference")[0] for r in found(read, "sections")], [-0.001, 0.0], atol=1e-9)
    assert found(read, "sections together")[0].values["pairs"] == 2.0


def test_the_figure_of_a_double_levelling_is_that_of_its_runs() -> None:
    """Simulated: runs of 1.5 mm*sqrt(km) give 1.5 for one run and 1.5/sqrt(2) for the mean; 1.6 would be told apart."""
    rng = np.random.default_rng(11)
    lengths = rng.uniform(200, 2000, 20000)
    d = rng.normal(0, 0.0015 * np.sqrt(lengths / 1000)) - rng.normal(0, 0.0015 * np.sqrt(lengths / 1000))
    one, mean = per_root_km(d, lengths)
    close([one, mean], [0.0015, 0.0015 / math.sqrt(2)], atol=0.00003)
