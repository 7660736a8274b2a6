"""Thirty planted slips and what is said of them, for reading aloud: the list of docs/likely-causes.md.

    python -m tests.judge.cause_sentences

writes docs/likely-causes.md anew. Of every slip the networks of the study are taken in order; of closures and of slips
in many readings those of their own studies. Cases where nothing is said stay in the list.
"""

from __future__ import annotations

import tempfile
from collections.abc import Iterator
from pathlib import Path

import numpy as np

import adjust
from adjust.caution import CAUTION
from adjust.errors import BrasscapError
from adjust.judge.closures import closures
from adjust.record.build import build
from tests.judge import closing_causes_study, group_causes_study, slipped
from tests.judge.causes_study import clean, planted

SEED = 20261230
PAGE = Path(__file__).parents[2] / "docs" / "likely-causes.md"
HEAD = """# What likely causes sound like

Slips planted in the books of seeded networks, and the first sentence that the record has for each (`findings`; of
closures theirs). Made by `python -m tests.judge.cause_sentences`, not chosen: where nothing is said of a cause, none
fitted well enough. How they are found: [the likely cause](mathematics/judge-causes.md), [of what does not
close](mathematics/judge-causes-of-closures.md), [one slip in many readings](mathematics/judge-mix-ups.md). How
often they are right: [measured](measured.md#likely-causes).

A cause is a hint to look in the book, never a correction. ‹caution›

| slip planted | network | what is said |
|---|---|---|
"""
SINGLE = (
    ("digits-swapped", "braced"), ("digits-swapped", "rounds"), ("degree-slip", "traverse"), ("degree-slip", "rounds"),
    ("minute-slip", "braced"), ("minute-slip", "space"), ("round-step", "level"), ("round-step", "staff"),
    ("round-step", "traverse"), ("sign", "level"), ("other-way", "traverse"), ("half-circle", "braced"),
    ("wrong-station", "braced"), ("wrong-station", "level"), ("reflector-constant", "braced"),
    ("reflector-constant", "rounds"), ("feet-for-metres", "traverse"), ("pointings-swapped", "braced"),
    ("pointings-swapped", "rounds"), ("height-forgotten", "space"), ("slope-for-horizontal", "space"),
    ("some amount", "braced"),
)  # fmt: skip
GROUPS = ("constant", "feet", "height", "target", "occupied", "sighted")
CLOSING = (("traverse", "other-way"), ("levels", "round-step"), ("triangles", "degree-slip"))


def single(slip: str, shape: str, place: Path) -> tuple[str, str, str]:
    """The first network of a shape that the slip can be planted in."""
    sort = next(s for s in (*slipped.SORTS, slipped.SOME) if s.slip == slip)
    for number in range(20):
        one = clean(shape, number, place, SEED)
        found = planted(sort, one, place / "wrong", np.random.default_rng([SEED, number]))
        if found:
            return slip, shape, first_sentence(found[0])
    raise LookupError(f"{slip} cannot be planted in {shape}")


def first_sentence(job: adjust.Job) -> str:
    """What the record of a job begins its findings with, or the refusal."""
    try:
        return str(build(adjust.assess(adjust.solve(job)))["findings"][0]["sentence"])
    except BrasscapError as refusal:
        return " ".join(refusal.sentences)


def of_group(what: str, place: Path) -> tuple[str, str, str]:
    """One of the slips in many readings."""
    folder = place / what
    job, _ = group_causes_study.SORTS[what](np.random.default_rng([SEED, 0, len(what)]), 0, folder)
    return (
        f"many readings: {what}",
        "space" if what in ("height", "target") else "braced",
        first_sentence(adjust.read(job)),
    )


def of_closure(what: str, slip: str, place: Path) -> tuple[str, str, str]:
    """One of the closures that a slip leaves open."""
    sort = next(s for s in slipped.SORTS if s.slip == slip)
    for number in range(50):
        rng, folder = np.random.default_rng([SEED, number]), place / f"{what}-{number}"
        job = closing_causes_study.MAKERS[what](rng, folder)
        if slipped.plant(rng, job, sort) is None:
            continue
        open_ones = [one for one in closures(adjust.read(job)) if closing_causes_study.fails(one)]
        if open_ones:
            return f"closure: {slip}", what, open_ones[0].sentence
    raise LookupError(f"{slip} leaves no {what} open")


def cases(place: Path) -> Iterator[tuple[str, str, str]]:
    """All of them: slip, network, sentence."""
    yield from (single(slip, shape, place) for slip, shape in SINGLE)
    yield from (of_group(what, place) for what in GROUPS)
    yield from (of_closure(what, slip, place) for what, slip in CLOSING)


def main() -> None:
    """Write the page."""
    with tempfile.TemporaryDirectory() as folder:
        rows = list(cases(Path(folder)))
    head = HEAD.replace("‹caution›", CAUTION)
    PAGE.write_text(head + "".join(f"| {a} | {b} | {c} |\n" for a, b, c in rows), encoding="utf-8")


if __name__ == "__main__":
    main()
