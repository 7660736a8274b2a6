"""Likely causes: every slip is named where it was made and on its line, and nothing is offered where none fits."""

from __future__ import annotations

import math
import re
import shutil
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.book.raw_texts import raw_texts
from adjust.judge import causes as module
from adjust.judge import slips_of_place, slips_of_text
from adjust.judge.assess import Judgement
from adjust.judge.blunders import adjusted_without
from adjust.judge.causes import _weighed, slipped, slips
from adjust.kinds import KINDS
from tests.helpers import close
from tests.judge.blunders_study import shifted
from tests.judge.causes_study import Outcome, judged
from tests.judge.causes_study import clean as clean_of
from tests.judge.slip_networks import Sheet
from tests.judge.slipped import SOME, SORTS, UNKNOWN, Sort

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
AMOUNTS = ("level", "staff", "traverse", "rounds")
DRAWS = 30


@pytest.fixture(scope="module")
def small(tmp_path_factory: pytest.TempPathFactory) -> list[tuple[Sort, str, Outcome, Judgement]]:
    """One network of the study a slip, and some amounts, adjusted once for all tests."""
    place = tmp_path_factory.mktemp("small")
    cleans = {shape: clean_of(shape, 0, place, SEED) for shape in sorted({*SHAPE.values()})}
    found = []
    for k, (sort, shape) in enumerate(CASES + [(SOME, shape) for shape in AMOUNTS]):
        one = judged(sort, cleans[shape], place / f"job-{k}", np.random.default_rng([SEED, k]))
        assert one, (sort.slip, shape)
        assert one[1], one[0]
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


def offered(small: list[tuple[Sort, str, Outcome, Judgement]]) -> float:
    """Share of arbitrary errors, uniform from 2 to 50 smallest detectable sizes, for which a cause is offered."""
    rng, told = np.random.default_rng(SEED), []
    for judgement in [j for sort, _, _, j in small if sort is SOME]:
        suspect = judgement.suspects[0]
        for _ in range(DRAWS):
            size = float(rng.uniform(2, 50) * rng.choice([-1, 1])) * judgement.smallest_detectable[suspect.row]
            one = replace(suspect, blunder=size, statistic=-size / suspect.sd)
            told.append(bool(module.causes(judgement, one)))
    assert len(told) == DRAWS * len(AMOUNTS)
    return float(np.mean(told))


def test_an_odd_amount_has_seldom_a_cause(
    small: list[tuple[Sort, str, Outcome, Judgement]], monkeypatch: pytest.MonkeyPatch
) -> None:
    """Under one in six of so few; if every form counted that is near there would be many more."""
    other, rows = slips()
    share = offered(small)
    assert share < 1 / 6, (SEED, share)
    monkeypatch.setattr(module, "slips", lambda: (1e-60 * other, rows))
    monkeypatch.setattr(module, "FARTHEST", 15.0)
    assert offered(small) > 1 / 6, SEED


def test_with_too_much_weight_for_other_amounts_slips_would_not_be_told(
    small: list[tuple[Sort, str, Outcome, Judgement]], monkeypatch: pytest.MonkeyPatch
) -> None:
    other, rows = slips()
    monkeypatch.setattr(module, "slips", lambda: (1e4 * other, rows))
    assert sum(bool(j.causes(j.suspects[0])) for sort, *_, j in small if sort is not SOME) < len(CASES) - 1


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


def test_another_station_is_as_uncertain_as_the_network_without_the_reading(tmp_path: Path) -> None:
    """sigma^2 + a Q a' with the cofactors of an adjustment without the reading and partials by differences."""
    before = clean_of("traverse", 0, tmp_path, SEED).judgement
    job = before.solution.job
    row = next(r for r, b in enumerate(job.network.rows.block)
               if job.network.blocks[b].kind == "distance" and before.reliability.checked_share[r] > 0.3)  # fmt: skip
    job = shifted(job, np.array([row]), np.array([7.3]))
    judgement = adjust.assess(adjust.solve(job))
    case = slipped(judgement, next(s for s in judgement.suspects if s.row == row))
    outcome = adjusted_without(judgement.solution, [row])
    assert outcome
    design, sds = case.solution.design, []
    positions = np.where(np.isnan(case.state.positions), design.unasked, case.state.positions)
    forms = list(slips_of_place.wrong_station(case))
    others = np.setdiff1d(np.arange(len(positions)), case.block.stations[case.i])
    for form, k in list(zip(forms, others, strict=False))[:4]:  # the first column is the standing station
        at = case.block.take(np.array([case.i]))
        at.stations[0, 0] = k
        a = np.zeros(design.unknowns.count)
        for (s, p), u in np.ndenumerate(design.unknowns.coordinate):
            if u >= 0:
                up, down = positions.copy(), positions.copy()
                up[s, p] += 0.01
                down[s, p] -= 0.01
                a[u] = (design.values(at, up, case.state.groups) - design.values(at, down, case.state.groups))[
                    0, 0
                ] / 0.02
        sd = math.sqrt(float(case.block.sd[case.i, 0] ** 2 + a @ outcome.cofactors.times(a[:, None])[:, 0]))
        assert form.miss_sd is not None
        close(form.miss_sd / sd, 1.0, atol=1e-4)
        sds.append(sd / case.sd)
    assert max(abs(x - 1) for x in sds) > 0.02  # the uncertainty of the reading's own place would not do


def test_a_sight_to_an_unknown_point_needs_all_its_readings(tmp_path: Path) -> None:
    """Pointing, zenith angle and distance fail together: a point that is not in the job; one alone says nothing."""
    one = clean_of("rounds", 0, tmp_path, SEED)
    found = judged(UNKNOWN, one, tmp_path / "all", np.random.default_rng(SEED))
    assert found
    told, judgement = found
    assert judgement
    assert (told.cause, told.said) == ("right", "wrong-station")
    sentence = judgement.causes(judgement.suspects[0])[0].sentence
    assert "one that is not in the job" in sentence
    assert sentence.count("rounds.csv") == 2
    (odd,) = [r for r in range(len(judgement.ids)) if judgement.ids[r] == judgement.ids[judgement.suspects[0].row]]
    alone = adjust.assess(adjust.solve(shifted(one.judgement.solution.job, np.array([odd]), np.array([0.0123]))))
    assert alone.suspects[0].row == odd
    assert not any("not in the job" in c.sentence for c in alone.causes(alone.suspects[0]))


def test_the_texts_of_readings_that_cannot_be_told_apart_are_all_looked_at(tmp_path: Path) -> None:
    """Of two set-ups between the same marks either may be wrong: the swapped digits tell which."""
    clean_of("staff", 0, tmp_path, SEED)
    folder = tmp_path / "staff-0"
    sheet = Sheet.of(folder / "staff.csv")
    i = next(
        i for i in range(len(sheet.rows)) if sheet.get(i, "station") == "TP1" and len(set(sheet.get(i, "back"))) > 4
    )
    right = sheet.get(i, "back")
    k = next(k for k in range(2, 5) if abs(int(right[k]) - int(right[k + 1])) > 1)
    sheet.put(i, "back", right[:k] + right[k + 1] + right[k] + right[k + 2 :])
    judgement = adjust.assess(adjust.solve(adjust.read(folder)))
    suspect = judgement.suspects[0]
    assert len(judgement.confusable(suspect)) == 1
    found = {(c.slip, c.would_read, c.place): c for c in judgement.causes(suspect)}
    cause = found["digits-swapped", right, f"staff.csv:{i + 2}"]
    other = not judgement.ids[suspect.row].startswith(f"staff.csv:{i + 3}")  # its set-up ends in the next row
    assert cause.sentence.startswith("the reading in error may be") == other


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
