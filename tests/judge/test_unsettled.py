"""Several gross errors at once: found by the redescending estimate and named together. The whole study is
tests/judge/unsettled_study.py."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from adjust.judge import unsettled
from adjust.judge.outvoted import GROSS, outvoted
from adjust.solver.gauss import NotSettled
from adjust.solver.solve import prepare
from tests.judge.refusing_study import refused_by
from tests.judge.unsettled_study import Wrong, case, grade, outcome


def stopped_at_once(wrong: Wrong) -> NotSettled:
    """The iteration stopped where it began, which saves the time of 260 iterations; left to itself it does not settle
    either, as the study shows."""
    ready = prepare(wrong.job)
    return NotSettled(ready.iteration, ready.begin, ready.iteration.at(ready.begin), [])


@pytest.fixture(scope="module")
def two(tmp_path_factory: pytest.TempPathFactory) -> tuple[Wrong, NotSettled]:
    """Number 14 of the study, with two errors."""
    wrong = case(14, 2, tmp_path_factory.mktemp("two"))
    return wrong, stopped_at_once(wrong)


def test_two_gross_errors_are_named_together(two: tuple[Wrong, NotSettled]) -> None:
    wrong, stopped = two
    (only,) = told = unsettled.words(wrong.job, stopped)
    assert grade(wrong, told) == "all"
    assert only.startswith("without directions.csv:9 (pointing Aa to Fa, 212.6393054539654) and distances.csv:9 (")
    assert only.endswith(
        ") together the adjustment settles, with them it does not: they differ from the others by about 65 degrees "
        "and 100 m; check them in the book. Likeliest slip: a misreading by 100 m, 126.91746011732688 for "
        "26.91746011732688. Look at distances.csv:9."
    )


@pytest.mark.parametrize(("number", "slip"), [(8, "half-circle"), (192, "other-way")], ids=["half-circle", "other-way"])
def test_a_reading_that_keeps_it_from_settling_gets_its_slip(number: int, slip: str, tmp_path: Path) -> None:
    """Weak networks with a slip in the text of the book."""
    wrong = refused_by(number, tmp_path)
    assert wrong is not None
    (only,) = unsettled.words(wrong.job, stopped_at_once(wrong))
    file, line = wrong.names[0].split(":")
    assert only.startswith(f"{file}:{line} (")
    words = {"half-circle": "the reading is of the other face, half a circle off, ",
             "other-way": "the angle was turned the other way round, "}[slip]  # fmt: skip
    assert f"; check it in the book. Likeliest slip: {words}" in only
    assert only.endswith(f". Look at {file}:{line}.")


def test_three_gross_errors_are_named_where_the_iteration_does_not_settle(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("adjust.solver.gauss.MOST_ITERATIONS", 6)
    monkeypatch.setattr("adjust.solver.gauss.MOST_NEWTON", 6)
    what, told = outcome(51, 3, tmp_path)
    assert what == "not settled: all", told
    assert told.count(" (azimuth ") + told.count(" (distance ") == 3


def test_without_the_estimate_they_are_not_all_named(
    two: tuple[Wrong, NotSettled], monkeypatch: pytest.MonkeyPatch
) -> None:
    """A negative control: one reading at a time, as it was, blames wrongly or not all."""
    wrong, stopped = two
    monkeypatch.setattr(unsettled, "_several", lambda stopped: None)
    told = unsettled.words(wrong.job, stopped)
    assert grade(wrong, told) != "all", told


@pytest.mark.parametrize("number", [14, 15])
def test_the_estimate_finds_nothing_in_clean_readings_and_all_errors_in_spoilt_ones(
    number: int, tmp_path: Path
) -> None:
    clean = prepare(case(number, 0, tmp_path / "clean").job)
    assert outvoted(clean.iteration, clean.begin) is None
    wrong = case(number, 2, tmp_path / "wrong")
    ready = prepare(wrong.job)
    found = outvoted(ready.iteration, ready.begin)
    assert found is not None
    network = ready.network
    names = {network.blocks[network.rows.block[r]].name(int(network.rows.row[r])) for r in found.rows.tolist()}
    assert names == set(wrong.names)
    u = np.abs(ready.iteration.at(found.state).numbers.misclosure) / ready.design.sd
    assert (u[found.rows] > GROSS).all()


def test_sound_readings_put_back_are_not_named(two: tuple[Wrong, NotSettled], monkeypatch: pytest.MonkeyPatch) -> None:
    """Two sound readings beside the wrong ones among those left out together."""
    find = unsettled.outvoted

    def with_sound(iteration, first):  # type: ignore[no-untyped-def]  # the signature is that of the original
        found = find(iteration, first)
        sound = np.setdiff1d(np.flatnonzero(~iteration.design.held), found.rows)[[3, -4]]
        return type(found)(np.append(found.rows, sound), found.state)

    monkeypatch.setattr(unsettled, "outvoted", with_sound)
    wrong, stopped = two
    found = unsettled._several(stopped)
    assert found is not None
    rows = wrong.job.network.rows
    names = {wrong.job.network.blocks[rows.block[r]].name(int(rows.row[r])) for r in found.rows}
    assert names == set(wrong.names)


def test_grades_tell_right_names_from_wrong_ones(tmp_path: Path) -> None:
    wrong = case(14, 2, tmp_path)
    a, b = (f"{name} (" for name in wrong.names)
    blocks = wrong.job.network.blocks
    sound = next(f"{b.name(i)} (" for b in blocks for i in range(len(b)) if b.name(i) not in wrong.names)
    assert [grade(wrong, [text]) for text in (a + b, a, sound, a + sound, a + b + sound, "")] == [
        "all", "some", "none", "mixed", "others too", "none"]  # fmt: skip
