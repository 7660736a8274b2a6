"""How often the likely cause of a blunder is named, and how often one is offered where there is none.

    OPENBLAS_NUM_THREADS=1 python -m tests.judge.causes_study [COUNT] [workers=2] [seed=20261207] [SLIP ...]

COUNT networks a slip (200), divided evenly among the shapes of networks where it can happen
(tests/judge/slip_networks.py), the slip in the text of a random row, where it makes the reading wrong by twice its
smallest detectable size or more, as the clean network tells. ``some amount`` is an error uniform between 2 and 50
smallest detectable sizes: a cause offered there is an accident. ``clean`` asks clean networks for suspects, ``two``
makes two slips at once in different readings.
Every network has seeds of its own, so the result does not depend on the number of workers.

Of the first suspect: ``first`` it is a reading that is wrong, or ``group`` one named beside it is; then what its causes
say: ``right`` the first is the slip, ``listed`` another one is, ``silent`` there is none, ``wrong`` none is the slip.
"""

from __future__ import annotations

import json
import os
import shutil
import sys
import tempfile
from collections import Counter, defaultdict
from collections.abc import Iterable, Iterator
from dataclasses import asdict, dataclass, replace
from multiprocessing import Pool
from pathlib import Path

import numpy as np

import adjust
from adjust.book.job import Job
from adjust.errors import BrasscapError, InputError
from adjust.judge.assess import Judgement
from adjust.judge.causes import slips
from adjust.solver.design import State
from adjust.units import TURN
from tests.judge.slip_networks import SHAPES
from tests.judge.slipped import EVERYWHERE, SOME, SORTS, UNKNOWN, Planted, Sort, amount, moved, plant

SEED = 20261207
LEAST, MOST = 2.0, 50.0
TRIES = 12
"""Rows of a network tried for a slip."""
ALL = (*SORTS, SOME, UNKNOWN)
NAMES = (*(s.slip for s in ALL), "clean", "two")


@dataclass(frozen=True)
class Outcome:
    """What the program says of one network."""

    slip: str
    shape: str
    number: int
    reading: str
    """first, group, other (another reading), none (no suspect), refused, refused by name."""
    cause: str = ""
    """right, listed, silent, wrong; for some amount: offered, silent."""
    said: str = ""
    """The slip named first."""
    support: float = 0.0
    text_right: bool = False
    """Whether the first cause gives back the text that was there."""


@dataclass(frozen=True)
class Clean:
    """A clean network: its folder and its judgement."""

    folder: Path
    judgement: Judgement
    at: dict[str, int]


def clean(shape: str, number: int, place: Path, seed: int = SEED) -> Clean:
    """The network of a shape and number."""
    folder = place / f"{shape}-{number}"
    SHAPES[shape](np.random.default_rng([seed, number, len(shape), ord(shape[0])]), folder, number)
    judgement = adjust.assess(adjust.solve(adjust.read(folder)))
    return Clean(folder, judgement, {name: r for r, name in enumerate(judgement.ids)})


def wrong_by(before: Judgement, changed: Job) -> np.ndarray | None:
    """How wrong each reading (R,) is in the changed book, in smallest detectable sizes of the clean network; None where
    the books do not have the same readings."""
    design, network = before.solution.design, changed.network
    pairs = zip(before.solution.network.blocks, network.blocks, strict=False)
    same = [len(a) == len(b) and a.kind == b.kind for a, b in pairs]
    if len(network.blocks) != len(before.solution.network.blocks) or not all(same):
        return None
    if len(network.rows) != len(design.observed) or len(network.groups) != len(before.solution.groups):
        return None
    if network.stations.names != before.solution.network.stations.names:
        return None
    state = State(before.solution.positions, before.solution.groups)
    there = replace(design, network=network).linearise(state).misclosure
    size = there - design.linearise(state).misclosure
    size[design.wraps] -= TURN * np.round(size[design.wraps] / TURN)
    return np.where(np.abs(size) > 1e-8, size, 0.0) / before.smallest_detectable


def planted(sort: Sort, one: Clean, folder: Path, rng: np.random.Generator) -> tuple[Job, np.ndarray, Planted] | None:
    """The job with the slip in it, how wrong each reading is, and where; None where the network does not allow it."""
    for _ in range(TRIES):
        shutil.rmtree(folder, ignore_errors=True)
        shutil.copytree(one.folder, folder)
        at = _some_amount(rng, one, folder) if sort is SOME else plant(rng, folder, sort)
        if at is None:
            continue
        try:
            changed = adjust.read(folder)
        except InputError:  # the reader has caught it: 85 minutes, the same target twice, a face mixed up
            continue
        sizes = wrong_by(one.judgement, changed)
        if sizes is not None and _large_enough(sizes):
            return changed, sizes, at
    return None


def _large_enough(sizes: np.ndarray) -> bool:
    return bool(np.nanmax(np.abs(np.where(np.isfinite(sizes), sizes, np.nan)), initial=0.0) >= LEAST)


def _some_amount(rng: np.random.Generator, one: Clean, folder: Path) -> Planted | None:
    """A cell off by a size uniform in smallest detectable sizes of its reading, which a probe of the cell tells."""
    at = amount(rng, folder)
    if at is None:
        return None
    probe = 0.01 if "distance" in at.column or at.column in ("rise", "back", "fore") else 60 / 206264.8
    try:
        moved(folder, at, probe)
        sizes = wrong_by(one.judgement, adjust.read(folder))
    except InputError:
        return None
    if sizes is None or not np.isfinite(sizes[sizes != 0]).all() or not (sizes != 0).any():
        return None
    wanted = float(rng.uniform(LEAST, MOST) * rng.choice([-1, 1]))
    moved(folder, at, probe * wanted / float(np.abs(sizes).max()))
    return at


def judged(sort: Sort, one: Clean, folder: Path, rng: np.random.Generator) -> tuple[Outcome, Judgement | None] | None:
    """The verdict on a network with the slip planted; None where it cannot be."""
    found = planted(sort, one, folder, rng)
    if found is None:
        return None
    changed, sizes, at = found
    shape, number = one.folder.name.split("-")
    made = Outcome(sort.slip, shape, int(number), "")
    wrong = {name for name, r in one.at.items() if sizes[r] != 0}
    try:
        judgement = adjust.assess(adjust.solve(changed))
        suspects = judgement.suspects
    except BrasscapError as refusal:
        named = any(w in s for w in wrong for s in refusal.sentences)
        return replace(made, reading="refused by name" if named else "refused"), None
    if not suspects:
        if not _one_sight(judgement, wrong):
            return replace(made, reading="none"), judgement
        cause = "right" if sort.slip == "wrong-station" else "wrong"
        return replace(made, reading="first", cause=cause, said="wrong-station"), judgement
    first, ids = suspects[0], judgement.ids
    if ids[first.row] not in wrong:
        group = {ids[r] for r, _, _ in judgement.confusable(first)}
        made = replace(made, reading="group" if wrong & group else "other")
    else:
        made = replace(made, reading="first")
    return _told(made, judgement, sort, at), judgement


def _one_sight(judgement: Judgement, wrong: set[str]) -> bool:
    """Whether all wrong readings are named together, as of one sight that was booked to another station."""
    network, names = judgement.solution.network, judgement.solution.names
    rows = [r for r, name in enumerate(judgement.ids) if name in wrong]
    booked = [network.blocks[network.rows.block[r]].stations[network.rows.row[r]] for r in rows]
    sights = [set(e.of.split(" to ")) for e in judgement.systematic if e.what == "station sighted"]
    return any(all(sight <= {names[int(s)] for s in stations} for stations in booked) for sight in sights)


def _told(made: Outcome, judgement: Judgement, sort: Sort, at: Planted) -> Outcome:
    """The outcome with what the causes of the first suspect say."""
    found, slip = judgement.causes(judgement.suspects[0]), "wrong-station" if sort is UNKNOWN else sort.slip
    if not found:
        return replace(made, cause="silent")
    best = found[0]
    text = best.would_read == at.right and best.place == f"{at.file}:{at.row + 2}"
    what = "offered" if sort is SOME else "right" if best.slip == slip else (
        "listed" if any(c.slip == slip for c in found) else "wrong")  # fmt: skip
    return replace(made, cause=what, said=best.slip, support=best.support, text_right=text)


def outcomes(task: tuple[str, int, tuple[str, ...], int]) -> list[Outcome]:
    """Every slip asked for in one network."""
    shape, number, names, seed = task
    with tempfile.TemporaryDirectory() as place:
        one = clean(shape, number, Path(place), seed)
        folder = Path(place) / "job"
        out = []
        if "clean" in names:
            loud = [s for s in one.judgement.suspects if s.at_job_level]
            out.append(Outcome("clean", shape, number, "first" if loud else "none"))
        for k, sort in enumerate(ALL):
            if sort.slip in names:
                found = judged(sort, one, folder, np.random.default_rng([seed, number, k, len(shape)]))
                out += [found[0]] if found else []
        if "two" in names:
            out += _two(one, folder, np.random.default_rng([seed, number, 99, len(shape)]))
        return out


def _two(one: Clean, folder: Path, rng: np.random.Generator) -> Iterator[Outcome]:
    """Two slips in readings of their own; ``reading`` is first where both are among the suspects or their groups."""
    shape, number = one.folder.name.split("-")
    here = [s for s in SORTS if shape in s.shapes]
    for _ in range(TRIES):
        shutil.rmtree(folder, ignore_errors=True)
        shutil.copytree(one.folder, folder)
        made: list[tuple[Sort, Planted, set[str]]] = []
        try:
            for _ in range(2):
                sort = here[int(rng.integers(len(here)))]
                at = plant(rng, folder, sort)
                sizes = wrong_by(one.judgement, adjust.read(folder)) if at else None
                if at is None or sizes is None or not _large_enough(sizes):
                    break
                known = {w for _, _, wrong in made for w in wrong}
                wrong = {name for name, r in one.at.items() if sizes[r] != 0} - known
                largest = max((abs(float(sizes[one.at[w]])) for w in wrong), default=0.0)
                if not np.isfinite(largest) or largest < LEAST:
                    break
                made.append((sort, at, wrong))
            changed = adjust.read(folder)
        except InputError:
            continue
        if len(made) == 2:
            yield _verdict_of_two(Outcome("two", shape, int(number), ""), changed, made)
            return


def _verdict_of_two(empty: Outcome, changed: Job, made: list[tuple[Sort, Planted, set[str]]]) -> Outcome:
    try:
        judgement = adjust.assess(adjust.solve(changed))
        suspects = [s for s in judgement.suspects if s.at_job_level]
    except BrasscapError as refusal:
        named = any(w in s for *_, wrong in made for w in wrong for s in refusal.sentences)
        return replace(empty, reading="refused by name" if named else "refused")
    ids, causes_right, found = judgement.ids, 0, 0
    for sort, _, wrong in made:
        mine = [s for s in suspects if ids[s.row] in wrong]
        beside = [s for s in suspects if wrong & {ids[r] for r, _, _ in judgement.confusable(s)}]
        together = _one_sight(judgement, wrong)
        found += bool(mine or beside or together)
        causes_right += (together and sort.slip == "wrong-station") or any(
            c.slip == sort.slip for s in (mine or beside)[:1] for c in judgement.causes(s)[:1]
        )
    reading = ("none", "one of two", "first")[found]
    return replace(empty, reading=reading, cause=("neither", "one right", "both right")[causes_right])


def tasks(count: int, names: Iterable[str], seed: int = SEED) -> list[tuple[str, int, tuple[str, ...], int]]:
    """The networks, and what is asked of each."""
    shapes = {s.slip: s.shapes for s in ALL} | {"clean": EVERYWHERE, "two": EVERYWHERE}
    wanted: dict[tuple[str, int], list[str]] = defaultdict(list)
    for name in names:
        for k in range(count):
            mine = shapes[name]
            wanted[mine[k % len(mine)], k // len(mine)].append(name)
    order = sorted(wanted.items(), key=lambda one: (one[0][1], one[0][0]))  # so that a part of them is a fair one
    return [(shape, number, tuple(of), seed) for (shape, number), of in order]


def run(count: int, names: Iterable[str], workers: int, seed: int, save: Path | None = None) -> list[Outcome]:
    """All outcomes, in the order of the networks; one a line in the file ``save`` as they come."""
    todo, out = tasks(count, names, seed), []
    with Pool(workers) as pool, open(save or os.devnull, "w", encoding="utf-8") as lines:
        for k, found in enumerate(pool.imap(outcomes, todo)):
            out += found
            lines.writelines(json.dumps(asdict(o)) + "\n" for o in found)
            lines.flush()
            if k % 50 == 49:
                print(f"{k + 1} of {len(todo)} networks", file=sys.stderr, flush=True)
    return out


def report(found: list[Outcome]) -> None:
    """Print the tables."""
    _table("slip", found, lambda o: o.slip)
    print("all slips: " + ", ".join(f"{n} {w}" for w, n in _all(found).most_common()))
    _table("shape", [o for o in found if o.slip in {s.slip for s in SORTS}], lambda o: o.shape)
    for name in (SOME.slip, "clean", "two"):
        here = [o for o in found if o.slip == name]
        if here:
            _table(f"{name}, by shape", here, lambda o: o.shape)
    _reliability(found)


def _all(found: list[Outcome]) -> Counter[str]:
    here = [o for o in found if o.slip in {s.slip for s in SORTS}]
    return Counter([f"reading {o.reading}" for o in here] + [f"slip {o.cause}" for o in here if o.cause])


def _reliability(found: list[Outcome]) -> None:
    """Share of the causes of a support that are right: as planted, and with every slip and some amount as frequent as
    their prior weights say."""
    other, rows = slips()
    prior = {row["key"]: row["prior"] for row in rows} | {SOME.slip: other}
    count = Counter(o.slip for o in found)
    given = [o for o in found if o.support > 0 and o.slip in prior]
    print("\n| support | causes | right | the text too | accidents | right, by prior weights |\n|---|" + "---:|" * 5)
    for low, high in ((0.5, 0.6), (0.6, 0.7), (0.7, 0.8), (0.8, 0.9), (0.9, 0.95), (0.95, 0.99), (0.99, 1.01)):
        here = [o for o in given if low <= o.support < high]
        told = [o for o in here if o.slip != SOME.slip]
        if told:
            right, text = np.mean([o.cause == "right" for o in told]), np.mean([o.text_right for o in told])
            weights = [prior[o.slip] / count[o.slip] for o in here]
            by_weight = np.average([o.cause == "right" for o in here], weights=weights)
            print(f"| {low:.2f} to {min(high, 1):.2f} | {len(told)} | {right:.3f} | {text:.3f} | "
                  f"{len(here) - len(told)} | {by_weight:.3f} |")  # fmt: skip


def _table(what: str, found: list[Outcome], key: object) -> None:
    readings = ("first", "group", "refused by name", "other", "none", "refused", "one of two")
    causes = ("right", "listed", "silent", "wrong", "offered", "both right", "one right", "neither")
    rows: dict[str, list[Outcome]] = defaultdict(list)
    for o in found:
        rows[key(o)].append(o)  # type: ignore[operator] # a function of one outcome
    some_r = [r for r in readings if any(o.reading == r for o in found)]
    some_c = [c for c in causes if any(o.cause == c for o in found)]
    print(f"\n| {what} | networks | " + " | ".join([*some_r, *some_c]) + " |")
    print("|---|" + "---:|" * (1 + len(some_r) + len(some_c)))
    for name, here in rows.items():
        tally = [sum(o.reading == r for o in here) for r in some_r] + [sum(o.cause == c for o in here) for c in some_c]
        print(f"| {name} | {len(here)} | " + " | ".join(map(str, tally)) + " |")
    for name, here in rows.items():
        wrong = Counter(o.said for o in here if o.cause in ("wrong", "offered", "listed"))
        if wrong:
            print(f"  {name}, said first: " + ", ".join(f"{n} {w}" for w, n in wrong.most_common()))


def main() -> None:
    """Run the study and print its tables."""
    options = dict(a.split("=") for a in sys.argv[1:] if "=" in a)
    count = next((int(a) for a in sys.argv[1:] if a.isdigit()), 200)
    names = [n for n in NAMES if n in sys.argv] or NAMES
    seed = int(options.get("seed", SEED))
    if "load" in options:
        lines = Path(options["load"]).read_text("utf-8").splitlines()
        found = [Outcome(**json.loads(line)) for line in lines]
    else:
        save = Path(options["save"]) if "save" in options else None
        found = run(count, names, int(options.get("workers", 2)), seed, save)
    print(f"seed {seed}, {count} networks a slip: {', '.join(names)}")
    report(found)
    for o in found:
        odd = o.reading in ("other", "none", "refused") or o.cause in ("wrong", "silent")
        if "all" in sys.argv and odd and o.slip not in (SOME.slip, "clean"):
            print(o)


if __name__ == "__main__":
    main()
