"""Likely causes: every slip is named where it was made and on its line, and nothing is offered where none fits."""

from __future__ import annotations

import math
import re
import shutil
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.book.raw_texts import raw_texts
from adjust.judge import slips_of_place, slips_of_text
from adjust.judge.assess import Judgement
from adjust.judge.causes import _weighed, slipped, slips
from adjust.kinds import KINDS
from tests.helpers import close
from tests.judge.blunders_study import clean, shifted
from tests.judge.causes_study import SOME, outcome
from tests.judge.slipped import SORTS

NETWORKS = Path(__file__).parents[2] / "networks"


def changed(demo: str, folder: Path, file: str, old: str, new: str) -> Judgement:
    """A demo job with one text of its book changed."""
    job = folder / "job"
    shutil.copytree(NETWORKS / demo, job, ignore=shutil.ignore_patterns("record"))
    text = (job / file).read_text("utf-8")
    assert text.count(old) == 1, f"{old!r} stands {text.count(old)} times in {file}"
    (job / file).write_text(text.replace(old, new), "utf-8")
    return adjust.assess(adjust.solve(adjust.read(job)))


@pytest.mark.parametrize("sort", SORTS, ids=lambda s: s.slip)
def test_the_study_in_small(sort: object, tmp_path: Path) -> None:
    """Of the first three networks of the study the slip is named in all, or stands among those listed."""
    found = []
    for number in range(40):
        one = outcome(sort, number, tmp_path / str(number))  # type: ignore[arg-type] # a Sort, by its own name above
        if one:
            found.append(one[0])
        if len(found) == 3:
            break
    assert sum(what in ("right", "right among the listed") for what in found) >= 2, found
    assert not any(what.startswith("wrong") for what in found), found


def test_an_odd_amount_has_no_cause(tmp_path: Path) -> None:
    found = [outcome(SOME, number, tmp_path / str(number)) for number in range(6)]
    assert [one[0] for one in found if one].count("silent") >= sum(one is not None for one in found) - 1


def test_a_minute_misread_in_one_face_is_found_on_its_line(tmp_path: Path) -> None:
    """The mean of both faces is five minutes off; the slip stands in the line of one of them."""
    job = tmp_path / "job"
    shutil.copytree(NETWORKS / "spillway-pillars", job, ignore=shutil.ignore_patterns("record"))
    toml = (job / "job.toml").read_text("utf-8")
    assert "[rejection]" in toml  # with its limits the pointing would not even come to the adjustment
    (job / "job.toml").write_text(re.sub(r"\[rejection\][^\n]*\n(?:[^\[\n].*\n|\n)*", "", toml), "utf-8")
    text = (job / "rounds.csv").read_text("utf-8")
    (job / "rounds.csv").write_text(text.replace("322 41 33.8", "322 51 33.8"), "utf-8")
    judgement = adjust.assess(adjust.solve(adjust.read(job)))
    (suspect, *_) = judgement.suspects
    cause = judgement.causes(suspect)[0]
    assert (cause.slip, cause.would_read, cause.place) == ("minute-slip", "322 41 33.8", "rounds.csv:7")
    assert cause.support > 0.9


def test_a_staff_misread_by_a_metre_is_a_round_step_of_that_sight(tmp_path: Path) -> None:
    judgement = changed("river-levels", tmp_path, "staff.csv", "0.6082", "1.6082")
    suspect = next(s for s in judgement.suspects if judgement.ids[s.row].startswith("staff.csv:8"))
    forms = {(f.would, f.line) for w in _weighed(slipped(judgement, suspect)) if w.support > 0.1 for f in (w.form,)}
    assert ("0.6082", 7) in forms


def test_an_angle_turned_the_other_way_in_a_booked_traverse(tmp_path: Path) -> None:
    judgement = changed("link-traverse", tmp_path, "traverse.csv", "133 25 20.1", "226 34 39.9")
    cause = judgement.causes(judgement.suspects[0])[0]
    assert (cause.slip, cause.would_read, cause.place) == ("other-way", "133 25 20.1", "traverse.csv:7")


@pytest.mark.parametrize(
    "demo", ["access-road", "loop-traverse-feet", "spillway-pillars", "river-levels", "valley-side"]
)
def test_the_texts_behind_a_reading_give_its_value_by_their_factors(demo: str) -> None:
    """A small change of each text, by its factor, is the change of the reading that a new reading of the table has."""
    job = adjust.read(NETWORKS / demo)
    seen = 0
    for block in job.network.blocks:
        for i in range(0, len(block), max(1, len(block) // 3)):
            raws = raw_texts(job, block, i)
            if block.file == "job.toml" or block.kind in ("control", "refraction"):
                continue
            value = sum(r.factor * r.parse(r.text) for r in raws)
            off = float(block.values[i, 0]) - value
            turns = off / math.pi if KINDS[block.kind].dimension == "angle" else 0.0
            assert abs(turns - round(turns * 2) / 2) < 1e-3 or abs(off) < 0.02, block.name(i)
            seen += 1
    assert seen > 3


def test_support_is_the_rule_of_bayes(tmp_path: Path) -> None:
    """A metre in a distance, by hand: every form that could explain it, and some other amount."""
    job = clean(0, tmp_path)
    before = adjust.assess(adjust.solve(job))
    row = next(r for r, b in enumerate(job.network.rows.block) if job.network.blocks[b].kind == "distance"
               and before.reliability.checked_share[r] > 0.5)  # fmt: skip
    judgement = adjust.assess(adjust.solve(shifted(job, np.array([row]), np.array([1.0]))))
    (suspect,) = [s for s in judgement.suspects if s.row == row]
    case = slipped(judgement, suspect)
    other, rows = slips()
    weight = other / (2 * abs(suspect.blunder) * math.log(1e5 / suspect.sd))
    total = weight
    wanted = 0.0
    for one in rows:
        function = getattr(slips_of_text, one["key"].replace("-", "_"), None) or getattr(
            slips_of_place, one["key"].replace("-", "_"))  # fmt: skip
        forms = {(f.would or f"{f.change:.9g}", f.line): f for f in function(case)}
        for form in forms.values():
            t = (suspect.blunder - form.change) / suspect.sd
            if abs(t) <= 2.5:
                p = (
                    one["prior"]
                    / len(forms)
                    * form.weight
                    * math.exp(-t * t / 2)
                    / (math.sqrt(2 * math.pi) * suspect.sd)
                )
                total += p
                wanted = p if one["key"] == "round-step" else wanted
    best = next(w for w in _weighed(case) if w.row["key"] == "round-step")
    close(best.support, wanted / total, atol=1e-9)
    assert judgement.causes(suspect)[0].slip == "round-step"


def test_every_slip_of_the_table_is_one_function_and_every_function_a_row() -> None:
    other, rows = slips()
    keys = [one["key"] for one in rows]
    assert keys == sorted(set(keys), key=keys.index)
    assert set(keys) == {
        "digits-swapped", "degree-slip", "minute-slip", "round-step", "sign", "other-way", "half-circle",
        "pointings-swapped", "wrong-station", "reflector-constant", "feet-for-metres", "slope-for-horizontal",
        "height-forgotten",
    }  # fmt: skip
    functions = {
        name.replace("_", "-") for module in (slips_of_text, slips_of_place) for name, thing in vars(module).items()
        if callable(thing) and getattr(thing, "__module__", "") == module.__name__ and not name.startswith("_")
    }  # fmt: skip
    assert functions - {"stepped"} == set(keys)
    assert 0 < other < 1
    assert all(0 < one["prior"] < 1 for one in rows)
