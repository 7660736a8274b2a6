"""One raw book with one booking error of each sort, named where the study of 200 found it; sound books left alone."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import adjust
from adjust.judge.assess import Judgement
from adjust.judge.check import look
from adjust.judge.systematic import constants_twice
from tests.book.book_errors import SORTS, Book, levels, rounds, sound_book, wrong_book
from tests.book.book_errors_study import Said, listen, verdict
from tests.helpers import close

FOUND = {
    "face": (1, "on the line", "this face is mixed up"),
    "page sum": (0, "on the line", "was added twice"),
    "1 minute in a set": (0, "on the line", "which is 1 minute: misread?"),
    "wrong staff column": (0, "on the line", "what the sights of staff.csv:"),
    "unbalanced sights": (1, "on the line", "longer in all"),
    "constant applied twice": (0, "on the line", "was the constant applied twice?"),
    "metre misread": (1, "near", "the misclosure is a whole metre"),
}  # fmt: skip
"""Number of the book, verdict, and words of one sentence."""


@pytest.mark.parametrize("sort", SORTS)
def test_one_error_a_book(sort: str, tmp_path: Path) -> None:
    k, wanted, words = FOUND[sort]
    book = wrong_book(sort, k)
    said = listen(book.put(tmp_path / "job"))
    assert verdict(book, said) == wanted
    assert any(words in one.text for one in said), said


@pytest.mark.parametrize("k", [0, 1])
def test_a_sound_book_is_left_alone(k: int, tmp_path: Path) -> None:
    assert listen(sound_book(k).put(tmp_path / "job")) == []


def test_a_book_is_judged_by_what_is_said_of_its_line() -> None:
    """The yardstick itself: the line, the pointing, something else, nothing."""
    book = Book("rounds.csv", [{}] * 90, "", "", lines={7})
    for named, behind, wanted in (
        ({7}, (), "on the line"), ({5, 6, 7, 8}, (), "near"), ((), {6, 7}, "near"), ({8}, {8}, "elsewhere"),
        ((), set(range(60)), "elsewhere"),
    ):  # fmt: skip
        assert verdict(book, [Said("sentence", "x", frozenset(named), frozenset(behind))]) == wanted
    assert verdict(book, []) == "silent"


def test_sights_in_each_others_column_of_a_page(tmp_path: Path) -> None:
    """Exchanged in copying: the sums of the field book tell the row."""
    book = levels(np.random.default_rng(5))
    i = next(i for i, row in enumerate(book.rows) if row["back"] and row["fore"])
    row = book.rows[i]
    row["back"], row["fore"] = row["fore"], row["back"]
    told = adjust.read(book.put(tmp_path / "job")).warnings[0]
    assert f"{row['back']} and {row['fore']} in line {i + 2} stand in each other's column" in told


def test_the_common_error_is_that_of_an_adjustment_with_it(tmp_path: Path) -> None:
    """Taking it out of the distances makes v'Pv smaller by (b/sd)^2 and leaves none; a sound book is told nothing."""
    folder = rounds(np.random.default_rng(6), twice=True).put(tmp_path / "job")
    judged = adjust.assess(adjust.solve(adjust.read(folder)))
    solution = judged.solution
    assert len(constants_twice(judged.systematic)) == len(judged.constants) == 1
    b, sd = constant_of(judged)
    (amount,) = {line.amount for line in solution.job.ledger}
    assert abs(b - amount) < 3 * sd
    text = (tmp_path / "job" / "job.toml").read_text("utf-8")
    (tmp_path / "job" / "job.toml").write_text(
        text.replace(f'"{amount * 1000:.1f} mm"', f'"{(amount - b) * 1000:.9f} mm"')
    )
    job = adjust.read(tmp_path / "job")
    cured = adjust.solve(job)
    close(solution.total.square_sum - cured.total.square_sum, (b / sd) ** 2, atol=1e-3 * (b / sd) ** 2)
    left, same = constant_of(adjust.assess(cured))
    assert abs(left) < 1e-3 * sd
    close(same, sd, atol=1e-4 * sd)
    assert adjust.assess(cured).constants == []
    assert not any("applied twice" in line for line in look(job).lines)


def constant_of(judged: Judgement) -> tuple[float, float]:
    """Common error of all distances and its standard deviation, metres."""
    (one,) = (s for s in judged.systematic if s.what == "constant")
    assert one.value is not None
    assert one.sd is not None
    return one.value, one.sd
