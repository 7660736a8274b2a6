"""The raw level book: what comes out of it, and that it is what the same rises typed as a table give."""

from __future__ import annotations

import math
import tomllib
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.book.reductions import Reduction
from adjust.record.build import build
from adjust.units import RHO_SEC
from tests.book.jobs import ends, job
from tests.book.level_books import HEAD, readings, table, truth
from tests.helpers import close

BOOK = """line,station,back,intermediate,fore,back_length,intermediate_length,fore_length,page,id,note
L1,M1,1.532,,,40,,,1,,brass cap
,P5,,0.911,,,25.5,,,P5 kerb,
,TP1,2.104,,1.217,31,,38,,,
,TP2,1.488,,0.600,30,,33,2,,
,M2,,,2.015,,,29,,last,
L2,M2,1.700,,,30,,,3,,
,TP1,0.520,,2.611,35,,30,,,
,M1,,,0.901,,,36,,,
"""
CONTROL = "station,height\nM1,50\nM2,51.2930\n"
TYPED = """from,to,rise,length,setups,id
M1,P5,0.621,65.5,1,P5 kerb
M1,L1/TP1,0.315,78,1,
L1/TP1,L1/TP2,1.504,64,1,
L1/TP2,M2,-0.527,59,1,last
M2,L2/TP1,-0.911,60,1,
L2/TP1,M1,-0.381,71,1,
"""


def found(job: adjust.Job, what: str) -> list[Reduction]:
    return [r for r in job.reductions if r.what == what]


def book(**keys: str) -> str:
    """job.toml with a block for the level book, and blocks for the other tables that may be there."""
    said = "\n".join(f"{key} = {value}" for key, value in keys.items())
    return f'{HEAD}[[book]]\nkind = "control"\n[[book]]\nkind = "staff"\n{said}\n'


def solved(folder: Path, toml: str = HEAD, **tables: str) -> adjust.Solution:
    return adjust.solve(job(folder, toml, **tables))


def test_the_raw_book_gives_what_its_rises_typed_as_a_table_give(tmp_path: Path) -> None:
    for model in ("1.2 mm*sqrt(km)", "0.4 mm*sqrt(setup)"):
        toml = HEAD.replace("1.2 mm*sqrt(km)", model)
        raw = solved(tmp_path / f"raw {model[:3]}", toml, staff=BOOK, control=CONTROL)
        same = solved(tmp_path / f"typed {model[:3]}", toml, levelled=TYPED, control=CONTROL)
        assert set(raw.names) == set(same.names)
        order = [raw.names.index(name) for name in same.names]
        for name in ("positions", "sd"):
            one, other = (getattr(s, name)[:, 2] for s in (raw, same))
            np.testing.assert_allclose(one[order], other, rtol=0, atol=1e-11)
        close(raw.design.observed, same.design.observed, atol=1e-12)
        close(raw.sd_readings, same.sd_readings, atol=1e-12)
        one, other = (build(adjust.assess(s)) for s in (raw, same))
        assert [s["statistic"] for s in one["observations"]] == pytest.approx(
            [s["statistic"] for s in other["observations"]], abs=1e-7
        )
    worse = solved(tmp_path / "worse", HEAD, levelled=TYPED.replace("1.504", "1.505"), control=CONTROL)
    assert not np.allclose(worse.positions[:, 2], same.positions[:, 2], rtol=0, atol=1e-6)


def test_every_reading_keeps_its_line_its_texts_and_its_name(tmp_path: Path) -> None:
    read = job(tmp_path, staff=BOOK, control=CONTROL)
    (block,) = read.network.blocks
    assert block.line.tolist() == [3, 4, 5, 6, 8, 9]
    assert [block.name(i) for i in range(6)] == [
        "P5 kerb", "staff.csv:4", "staff.csv:5", "last", "staff.csv:8", "staff.csv:9",
    ]  # fmt: skip
    assert ends(read) == [
        ("M1", "P5"), ("M1", "L1/TP1"), ("L1/TP1", "L1/TP2"), ("L1/TP2", "M2"), ("M2", "L2/TP1"), ("L2/TP1", "M1"),
    ]  # fmt: skip
    record = build(adjust.assess(adjust.solve(read)))
    assert [one["booked"] for one in record["observations"]] == [
        "1.532 - 0.911", "1.532 - 1.217", "2.104 - 0.600", "1.488 - 2.015", "1.700 - 2.611", "0.520 - 0.901",
    ]  # fmt: skip
    assert [s["station"] for s in record["side_shots"]] == ["P5"]


def test_a_change_point_in_two_rows_is_the_same_as_in_one(tmp_path: Path) -> None:
    two = BOOK.replace(",TP1,2.104,,1.217,31,,38,,,\n", ",TP1,,,1.217,,,38,,,\n,TP1,2.104,,,31,,,,,\n")
    one, other = (solved(tmp_path / name, staff=text, control=CONTROL) for name, text in (("1", BOOK), ("2", two)))
    assert one.names == other.names
    np.testing.assert_array_equal(one.positions, other.positions)


def test_which_names_last(tmp_path: Path) -> None:
    """A name of another table, an end of a line, or a side shot of one line; other names are private to their line."""
    staff = (
        "line,station,back,intermediate,fore\n"
        "A,M1,1,,\n,BM7,1,,1\n,X,,1,\n,TP1,1,,1\n,TBM2,1,,1\n,P9,,,1\n"
        "B,P9,1,,\n,X,,1,\n,TBM2,1,,1\n,TP1,1,,1\n,BM7,1,,1\n,M1,,,1\n"
    )
    control = "station,height\nM1,50\nBM7,50\n"
    read = job(tmp_path, HEAD.replace("1.2 mm*sqrt(km)", "1 mm*sqrt(setup)"), staff=staff, control=control)
    assert set(read.network.stations.names) == {
        "M1", "BM7", "P9", "A/X", "B/X", "A/TP1", "B/TP1", "A/TBM2", "B/TBM2",
    }  # fmt: skip
    assert [w for w in read.warnings if "TBM2" in w] == [
        "X, TBM2: read in several lines (X in A and B), and taken as a change point of each line alone; if it is one "
        "mark, name it in stations.csv or control.csv."
    ]
    joined = job(
        tmp_path, HEAD.replace("1.2 mm*sqrt(km)", "1 mm*sqrt(setup)"), staff=staff, control=control,
        stations="station,height\nTBM2,50\nX,50\n",
    )  # fmt: skip
    assert {"X", "TBM2"} <= set(joined.network.stations.names)
    assert joined.warnings == ()


def test_change_points_with_numbers_only_are_no_look_alikes(tmp_path: Path) -> None:
    """Line 1, point 11 and line 11, point 1 would both read 111."""
    staff = "line,station,back,fore\n1,M1,1,\n,11,1,1\n,M2,,1\n11,M2,1,\n,1,1,1\n,M1,,1\n"
    read = job(tmp_path, HEAD.replace("km", "setup"), staff=staff, control=CONTROL)
    assert {"1/11", "11/1"} <= set(read.network.stations.names)
    assert read.warnings == ()


def test_a_set_up_left_out_stays_in_the_booking_and_leaves_the_network(tmp_path: Path) -> None:
    staff = BOOK.replace(",note\n", ",note,use,reason\n").replace("38,,,\n", "38,,,,no,staff sank\n")
    staff = "\n".join(row if "use" in row or "sank" in row else f"{row},," for row in staff.splitlines()) + "\n"
    read = job(tmp_path, staff=staff, control=CONTROL)
    assert [(a.observation, a.kind, a.reason) for a in read.left_out] == [("staff.csv:4", "staff", "staff sank")]
    assert ("M1", "L1/TP1") not in ends(read)
    assert found(read, "sections") == []
    close([r.values["height"] for r in found(read, "booking")][:5], [50, 50.621, 50.315, 51.819, 51.292], atol=1e-9)


def test_known_collimation_and_curvature_reduce_to_the_truth(tmp_path: Path) -> None:
    rng = np.random.default_rng(20260514)
    tilt, k, pegs = -18.0 / RHO_SEC, 0.13, (30.0, 30.0, 65.0, 5.0)
    line = truth(rng, ["M1", "TP1", "TP2", "TP3", "TP4", "M2"], uneven=30.0)
    bend = [(1 - k) * s**2 / (2 * 6371008.8) for s in pegs]
    shown = [h + tilt * s + b for h, s, b in zip((1.5, 1.3, 1.9, 1.7), pegs, bend, strict=True)]
    lengths = ",".join(str(s) for s in pegs)
    peg = (
        "near_a,near_b,far_a,far_b,near_a_length,near_b_length,far_a_length,far_b_length\n"
        + ",".join(f"{x:.7f}" for x in shown) + f",{lengths}\n"
    )  # fmt: skip
    toml = book(collimation='"peg_test"', curvature='"with-refraction"') + (
        '[[book]]\nkind = "peg_test"\ncurvature = "with-refraction"\n'
    )
    staff = table({"L1": readings(rng, line, tilt, k, places=7)})
    control = f"station,height\nM1,{line.heights[0]:.7f}\n"
    read = job(tmp_path / "with", toml, staff=staff, peg_test=peg, control=control)
    (test,) = found(read, "two-peg test")
    assert test.values["collimation"] is not None
    close(test.values["collimation"] * RHO_SEC, -18.0, atol=0.001)
    assert test.sentence == "The line of sight points down by 18.0 sec, 8.7 mm in 100 m."
    solution = adjust.solve(read)
    names = ["M1", *(f"L1/TP{i}" for i in range(1, 5)), "M2"]
    got = solution.positions[[solution.names.index(n) for n in names], 2]
    close(got, line.heights, atol=1e-6)
    (block,) = read.network.blocks
    amounts = dict(block.corrections)
    close(amounts["collimation"], -tilt * (line.lengths[:, 0] - line.lengths[:, 1]), atol=1e-7)
    close(
        amounts["curvature and refraction"][:1],
        -(1 - k) / (2 * 6371008.8) * -np.diff(line.lengths[:1] ** 2)[0],
        atol=1e-9,
    )
    (entry, *_) = found(read, "set-up")
    assert entry.values["collimation"] == pytest.approx(amounts["collimation"][0])
    plain = job(tmp_path / "without", book(collimation='"none"'), staff=staff, control=control)
    off = adjust.solve(plain).positions[-1, 2] - line.heights[-1]
    close(off, (tilt * -np.diff(line.lengths).sum()) + (1 - k) / (2 * 6371008.8) * -np.diff(line.lengths**2).sum(),
          atol=1e-5)  # fmt: skip
    assert abs(off) > 0.010


@pytest.mark.parametrize(("figure", "seconds"), [("-18 sec", -18.0), ("0.05 mm/m", 10.3132), ("2 mgon", 6.48)])
def test_a_stated_collimation(figure: str, seconds: float, tmp_path: Path) -> None:
    read = job(tmp_path, book(collimation=f'"{figure}"'), staff=BOOK, control=CONTROL)
    (block,) = read.network.blocks
    uneven = np.array([40 - 25.5, 40 - 38, 31 - 33, 30 - 29, 0, 35 - 36])
    close(dict(block.corrections)["collimation"], -seconds / RHO_SEC * uneven, atol=1e-8)
    close(block.values[:, 0] - dict(block.corrections)["collimation"],
          [0.621, 0.315, 1.504, -0.527, -0.911, -0.381], atol=1e-12)  # fmt: skip


def test_the_published_level_line(tmp_path: Path) -> None:
    """Level line closing on a bench mark: teaching slides on misclosure (author not named), read
    there: back sights 3.975, fore sights 4.892, from 10.000 to a bench mark of 9.090 over three set-ups, closing height
    9.083, misclosure -0.007. Single readings are not printed: those here are made to these sums."""
    staff = "line,station,back,fore\nslides,A,1.325,\n,1,1.500,1.690\n,2,1.150,1.602\n,B,,1.600\n"
    read = job(
        tmp_path, HEAD.replace("km", "setup"), staff=staff, control="station,height,role\nA,10,held\nB,9.09,check\n"
    )
    (check,) = found(read, "line check")
    close([check.values[name] or 0 for name in ("sum_back", "sum_fore", "last_minus_first")],
          [3.975, 4.892, -0.917], atol=5e-5)  # fmt: skip
    closing = found(read, "booking")[-1].values["height"]
    assert closing is not None
    close(closing, 9.083, atol=5e-5)
    close(closing - 9.09, -0.007, atol=5e-5)


def test_lengths_and_readings_in_feet(tmp_path: Path) -> None:
    toml = HEAD.replace('length = "m"', 'length = "ft"')
    feet = solved(tmp_path / "ft", toml, staff=BOOK, control="station,height\nM1,50\n")
    metres = solved(tmp_path / "m", HEAD, staff=BOOK, control="station,height\nM1,50\n")
    close(feet.positions[:, 2] / 0.3048, metres.positions[:, 2], atol=1e-9)
    close(feet.sd_readings, metres.sd_readings * math.sqrt(0.3048), atol=1e-12)


def test_readings_above_the_staff_are_warned_about(tmp_path: Path) -> None:
    read = job(tmp_path, staff=BOOK.replace("2.104", "5.104"), control="station,height\nM1,50\n")
    assert [w for w in read.warnings if "above" in w] == [
        "staff.csv:4: the back 5.104 is above the end of the staff (5 m): look at the book, or set staff_length."
    ]
    quiet = job(tmp_path, book(staff_length='"6 m"'), staff=BOOK.replace("2.104", "5.104"), control=CONTROL)
    assert not [w for w in quiet.warnings if "above" in w]


def test_keys_of_the_level_book_are_in_the_settings(tmp_path: Path) -> None:
    toml = book(collimation='"-8 sec"', wire_limit='"2 mm"', staff_length="4", sum_back='{ 1 = 3.636, 2 = "1.488" }')
    read = job(tmp_path, toml, staff=BOOK, control=CONTROL)
    level = read.tables[1].level
    assert tomllib.loads(toml)["book"][1]["collimation"] == level.collimation
    close([level.tilt or 0.0], [-8.0 / RHO_SEC], atol=1e-12)
    assert (level.wire_limit, level.staff_length, level.sums) == (0.002, 4.0, {"sum_back": {"1": 3.636, "2": 1.488}})
