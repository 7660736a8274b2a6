"""One slip in many readings: a unit, a station occupied or sighted under another name, heights of a set-up.

The full study is tests/judge/group_causes_study.py; here a few networks of each sort, seeded by its SEED.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.errors import BrasscapError
from adjust.judge.mix_up_rows import RowsInCommon
from adjust.judge.mix_ups import mix_up_of_refused, name_mixed_up, unit_mixed_up
from adjust.judge.reliability import reliability
from tests.helpers import close
from tests.judge.group_causes_study import SORTS, outcome
from tests.judge.slipped import Sheet, booked_job


@pytest.mark.parametrize(
    ("what", "number"), [("feet", 60), ("occupied", 0), ("occupied", 3), ("sighted", 1), ("target", 2)]
)
def test_named_as_one_cause(tmp_path: Path, what: str, number: int) -> None:
    assert outcome(what, number, tmp_path) == "named"


def test_the_sentence_says_what_where_and_how_it_would_fit(tmp_path: Path) -> None:
    rng = np.random.default_rng([20261208, 0, len("occupied")])
    job, _ = SORTS["occupied"](rng, 0, tmp_path)
    judged = adjust.assess(adjust.solve(adjust.read(job)))
    first = judged.systematic[0]
    assert (first.what, first.cause, first.readings) == ("station occupied", "wrong-station", 6)
    assert first.sentence == (
        "Likeliest slip: the 6 readings booked at Ia were made at Ba. From Ba they fit the others, from Ia they do "
        "not. Look at distances.csv:10 and directions.csv:26 to 30."
    )
    assert judged.suspects == ()


def test_a_blunder_besides_is_named_with_it(tmp_path: Path) -> None:
    job, _ = SORTS["occupied"](np.random.default_rng([20261208, 0, len("occupied")]), 0, tmp_path)
    sheet = Sheet.of(job / "distances.csv")
    sheet.put(3, "distance", f"{float(sheet.get(3, 'distance')) + 0.5:.4f}")
    first = adjust.assess(adjust.solve(adjust.read(job))).systematic[0]
    assert first.what == "station occupied"
    assert first.sentence.endswith("Once that is put right, distances.csv:5 still fails.")


def _job(folder: Path, seed: int) -> Path:
    return booked_job(np.random.default_rng(seed), folder, 12, ("distances", "directions"), "held")


def test_sound_networks_and_single_blunders_are_no_mix_up(tmp_path: Path) -> None:
    """The control: two gross readings at one station, which no other name explains."""
    sheet = Sheet.of(_job(tmp_path, 5) / "directions.csv")
    sound = adjust.solve(adjust.read(tmp_path))
    assert unit_mixed_up(sound, reliability(sound)) is None
    assert name_mixed_up(sound, [0, 1]) is None
    at = sheet.get(0, "at")
    mine = [i for i in range(len(sheet.rows)) if sheet.get(i, "at") == at][:2]
    for i in mine:
        d, m, s = sheet.get(i, "direction").split()
        sheet.put(i, "direction", f"{(int(d) + 7 + 20 * i) % 360} {m} {s}")
    wrong = adjust.solve(adjust.read(tmp_path))
    blocks = wrong.network.blocks
    b = next(b for b, one in enumerate(blocks) if one.kind == "direction")
    rows = wrong.network.rows.of_block(b, len(blocks[b]))[mine].tolist()
    assert name_mixed_up(wrong, rows) is None
    assert not any(e.what.startswith(("unit", "station")) for e in adjust.assess(wrong).systematic)


def test_a_refused_job_is_told_its_unit(tmp_path: Path) -> None:
    """Without a solution to go by: the lengths of the table come out 0.3048 times as long."""
    job, (_, table) = SORTS["feet"](np.random.default_rng([20261208, 3, len("feet")]), 3, tmp_path)
    read = adjust.read(job)
    found = mix_up_of_refused(read)
    assert found is not None
    assert (found.shared.of, found.slip) == (table, "feet-for-metres")
    b = next(b for b, one in enumerate(read.network.blocks) if one.file == table)
    scaled, booked = (of.network.blocks[b].values for of in (found.solution.job, read))
    close(scaled / booked, np.full(booked.shape, 0.3048), atol=1e-12)


def test_a_refused_job_is_told_its_station(tmp_path: Path) -> None:
    job, (_, wrong) = SORTS["occupied"](np.random.default_rng([20261208, 0, len("occupied")]), 0, tmp_path)
    found = mix_up_of_refused(adjust.read(job))
    assert found is not None
    assert found.shared.of == wrong
    assert f"booked at {wrong} were made at Ba" in found.sentence


def test_units_and_occupations_of_a_job(tmp_path: Path) -> None:
    """Rows that could share a slip: never all distances of a job, and every row of an occupation is read there."""
    read = adjust.read(_job(tmp_path, 3))
    common = RowsInCommon(read, frozenset())
    assert common.units() == []  # one table, one instrument
    names = read.network.stations.names
    for one in common.occupations():
        for row in one.rows:
            b, i, _ = common.at(row)
            assert names[read.network.blocks[b].stations[i, 0]] == one.of


@pytest.mark.study
def test_the_refusal_of_a_job_names_the_wrong_station(tmp_path: Path) -> None:
    rng = np.random.default_rng([20261208, 21, len("occupied")])
    job, (_, wrong) = SORTS["occupied"](rng, 21, tmp_path)
    with pytest.raises(BrasscapError) as refused:
        adjust.solve(adjust.read(job))
    assert refused.value.sentences[0].startswith("As booked this cannot be adjusted. Likeliest slip: the 13 readings")
    assert f"booked at {wrong} were made at Ja" in refused.value.sentences[0]
