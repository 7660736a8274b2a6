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
from adjust.judge import causes as module
from adjust.judge import slips_of_place, slips_of_text
from adjust.judge.assess import Judgement
from adjust.judge.causes import _weighed, slipped, slips
from adjust.kinds import KINDS
from tests.helpers import close
from tests.judge.blunders_study import shifted
from tests.judge.causes_study import Outcome, judged
from tests.judge.causes_study import clean as clean_of
from tests.judge.slipped import SOME, SORTS, Sort

SEED = 3
RAW = (("digits-swapped", "rounds"), ("wrong-station", "staff"))
NETWORKS = Path(__file__).parents[2] / "networks"


def changed(demo: str, folder: Path, file: str, old: str, new: str) -> Judgement:
    """A demo job with one text of its book changed."""
    job = folder / "job"
    shutil.copytree(NETWORKS / demo, job, ignore=shutil.ignore_patterns("record"))
    text = (job / file).read_text("utf-8")
    assert text.count(old) == 1, f"{old!r} stands {text.count(old)} times in {file}"
    (job / file).write_text(text.replace(old, new), "utf-8")
    return adjust.assess(adjust.solve(adjust.read(job)))


SHAPE = {"digits-swapped": "staff", "degree-slip": "traverse", "minute-slip": "traverse", "round-step": "level",
         "sign": "level", "other-way": "traverse", "half-circle": "traverse", "wrong-station": "traverse",
         "reflector-constant": "traverse", "feet-for-metres": "rounds", "pointings-swapped": "rounds",
         "height-forgotten": "rounds", "slope-for-horizontal": "space"}  # fmt: skip
CASES = [(sort, SHAPE[sort.slip]) for sort in SORTS] + [
    (sort, shape) for sort in SORTS for shape in ("staff", "rounds") if (sort.slip, shape) in RAW
]
AMOUNTS = ("level", "staff", "traverse") * 2


@pytest.fixture(scope="module")
def small(tmp_path_factory: pytest.TempPathFactory) -> list[tuple[Sort, str, Outcome, Judgement]]:
    """One network of the study a slip, and some amounts, adjusted once for all tests."""
    place = tmp_path_factory.mktemp("small")
    cleans = {shape: clean_of(shape, 0, place, SEED) for shape in sorted({*SHAPE.values()})}
    found = []
    for k, (sort, shape) in enumerate(CASES + [(SOME, shape) for shape in AMOUNTS]):
        one = judged(sort, cleans[shape], place / f"job-{k}", np.random.default_rng([SEED, k]))
        assert one and one[1], (sort.slip, shape, one)
        found.append((sort, shape, *one))
    return found  # type: ignore[return-value] # none of the judgements is None


def test_the_study_in_small(small: list[tuple[Sort, str, Outcome, Judgement]]) -> None:
    """The reading that is wrong comes first, or in its group, and its slip is told; one may be silent."""
    planted = [(sort.slip, shape, told.reading, told.cause, told.said) for sort, shape, told, _ in small
               if sort is not SOME]  # fmt: skip
    assert len(planted) == len(CASES)
    assert all(reading in ("first", "group") for _, _, reading, _, _ in planted), planted
    assert sum(cause == "right" for *_, cause, _ in planted) >= len(CASES) - 1, planted
    assert not any(cause == "wrong" for *_, cause, _ in planted), planted


def test_an_odd_amount_has_no_cause(small: list[tuple[Sort, str, Outcome, Judgement]]) -> None:
    told = [o.cause for sort, _, o, _ in small if sort is SOME]
    assert len(told) == len(AMOUNTS)
    assert told.count("silent") >= len(told) - 1


def test_other_weights_would_show(
    small: list[tuple[Sort, str, Outcome, Judgement]], monkeypatch: pytest.MonkeyPatch
) -> None:
    """The two tests above would fail if some other amount had far too much or far too little weight."""
    rows = slips()[1]

    def given(other: float, some: bool) -> int:
        monkeypatch.setattr(module, "slips", lambda: (other, rows))
        return sum(bool(j.causes(j.suspects[0])) for sort, _, _, j in small if (sort is SOME) == some)

    assert given(slips()[0], some=False) >= len(CASES) - 1
    assert given(1e4 * slips()[0], some=False) < len(CASES) - 1
    assert given(slips()[0], some=True) <= 1 < given(1e-9 * slips()[0], some=True)


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
    before = clean_of("traverse", 0, tmp_path, SEED).judgement
    job = before.solution.job
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
