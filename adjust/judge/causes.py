"""The likely cause of a blunder: everyday slips weighed against "some other amount".

The reading as booked exceeds its estimate from all others by b, with the standard deviation s of that difference
(adjust.judge.leaving_out). A form h of a slip says that the reading is larger by c_h as booked than as it was read;
then b - c_h is an ordinary error. With prior weights p_h (adjust/judge/slips.toml, those of a slip divided among the
forms it can take in this reading) and L_h the density of b,

    L_h = phi((b - c_h)/s) / s      L_0 = 1 / (2 |b| ln(b_max / s))      support_h = p_h L_h / (p_0 L_0 + sum p L)

where L_0 spreads some other amount evenly over its orders of magnitude, from one s to b_max. A form that misses b by
more than FARTHEST standard deviations is none. Where the suspect cannot be told from other readings, the texts of all
of them are tried, each weighed with exp((w'^2 - w^2)/2) s'/s against it. This is Bayes' rule for a closed list of
explanations (Jeffreys 1961, chapter 5); whether the support deserves its name is measured (docs/measured.md): of the
causes given with 0.9 about nine in ten are right.
"""

from __future__ import annotations

import math
import tomllib
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any

import numpy as np

from adjust.book.raw_texts import RawText, raw_texts
from adjust.judge import slips_of_place, slips_of_text
from adjust.judge.slip_forms import FARTHEST, Form, Slipped, Written
from adjust.kinds import KINDS
from adjust.units import TURN, BadValue, wrap

if TYPE_CHECKING:
    from adjust.judge.assess import Judgement
    from adjust.judge.suspects import Suspect

APART = 0.01
"""Weight of a slip in one face that would leave the faces further apart than half of what they are."""
LARGEST_M = 1e5
ALIKE_MOST = 12
"""Readings that a suspect cannot be told from whose texts are looked at as well."""
SILENT_BELOW = 0.5
AS_GOOD = 0.5
"""Other forms with at least this share of the best one's support are listed beside it."""
LISTED = 3
SIGHTS = {"distance": 1, "direction": 1, "zenith_angle": 1, "angle": 2}
"""Station column of the target of the readings that a sight can have; the instrument stands at the first."""
NOUNS = {"levelled": "rise", "direction": "pointing", "zenith_angle": "zenith angle", "control": "coordinate"}


@dataclass(frozen=True)
class Cause:
    """One explanation of a blunder."""

    slip: str
    sentence: str
    would_read: str
    support: float
    place: str
    """FILE:LINE where to look."""


@cache
def slips() -> tuple[float, tuple[dict[str, Any], ...]]:
    """The weight of some other amount, and the rows of the data file."""
    data = tomllib.loads(files("adjust.judge").joinpath("slips.toml").read_text("utf-8"))
    return float(data["other"]), tuple(data["slip"])


def _function(key: str) -> Callable[[Slipped], Iterator[Form]]:
    name = key.replace("-", "_")
    return getattr(slips_of_text, name, None) or getattr(slips_of_place, name)  # type: ignore[no-any-return] # one small function a row


def slipped(judgement: Judgement, suspect: Suspect) -> Slipped:
    """The suspect with what is known of it."""
    solution, found = judgement.solution, judgement.blunders
    rows = solution.network.rows
    b, i = int(rows.block[suspect.row]), int(rows.row[suspect.row])
    block = solution.network.blocks[b]
    kind = KINDS[block.kind]
    raws = raw_texts(solution.job, block, i)
    if len(kind.parts) > 1:
        raws = tuple(r for r in raws if r.column == kind.parts[int(rows.part[suspect.row])])
    others = tuple(r for r in found.rows if r != suspect.row) if suspect.row in found.rows else ()
    ids = judgement.ids
    named = frozenset(ids[s.row] for s in judgement.suspects)
    return Slipped(solution, found.model.state, block, i, raws, block.kind, NOUNS.get(block.kind, block.kind),
                   kind.wraps, suspect.blunder, suspect.sd, named, found.model, (suspect.row, *others),
                   sight=_sight(judgement, suspect.row, ids))  # fmt: skip


def _sight(judgement: Judgement, row: int, ids: list[str]) -> tuple[str, ...]:
    """The other readings of a sight, if there are some and all that are checked fail.

    They stand in one line of the book, or in other tables with the same set-up and target.
    """
    network = judgement.solution.network
    rows = network.rows
    block, i = network.blocks[rows.block[row]], int(rows.row[row])
    if block.kind not in SIGHTS or not len(block.setup):
        return ()
    wanted = (block.stations[i, 0], block.stations[i, SIGHTS[block.kind]], block.setup[i])
    beside: list[int] = []
    for b, other in enumerate(network.blocks):
        if other is block or other.kind not in SIGHTS or other.kind == block.kind or not len(other.setup):
            continue
        own = np.stack([other.stations[:, 0], other.stations[:, SIGHTS[other.kind]], other.setup], axis=1)
        same = (own == wanted).all(axis=1) & ((other.line == block.line[i]) | (other.file != block.file))
        beside += np.flatnonzero((rows.block == b) & same[np.where(rows.block == b, rows.row, 0)]).tolist()
    beside = [r for r in beside if judgement.reliability.tested[r]]
    blamed = {s.row for s in judgement.suspects if s.at_job_level}
    return tuple(ids[r] for r in beside) if blamed >= set(beside) else ()


def causes(judgement: Judgement, suspect: Suspect) -> tuple[Cause, ...]:
    """The likely causes of a suspect, the best first; none where none fits well enough."""
    return of_cases(*_possible(judgement, suspect))


def of_cases(*cases: Slipped) -> tuple[Cause, ...]:
    """The likely causes of one error that may be in any of some readings; none where none fits well enough."""
    weighed = _weighed(*cases)
    if not weighed or sum(one.support for one in weighed) < SILENT_BELOW:
        return ()
    best = weighed[0].support
    good = [one for one in weighed if one.support >= AS_GOOD * best][:LISTED]
    if best < SILENT_BELOW and sum(one.support for one in good) < SILENT_BELOW:
        return ()
    return tuple(_cause(one) for one in good)


@dataclass(frozen=True)
class Weighed:
    """A form of a slip in one reading with its support."""

    case: Slipped
    row: dict[str, Any]
    form: Form
    support: float


def _possible(judgement: Judgement, suspect: Suspect) -> list[Slipped]:
    """The suspect, and the readings it cannot be told from, each as if it were the one in error."""
    own = slipped(judgement, suspect)
    cases, found = [own], judgement.blunders
    if suspect.row not in found.rows:
        return cases
    size = suspect.statistic**2
    scale = suspect.sd / math.sqrt(float(found.model.without(own.left_out).covariance[0, 0]))
    for row, _, _ in judgement.confusable(suspect)[:ALIKE_MOST]:
        rows = [row, *own.left_out[1:]]
        without = found.model.without(rows)
        sd = math.sqrt(float(without.covariance[0, 0])) * scale
        b = float(without.blunder[0])
        weight = math.exp(min((b / sd) ** 2 - size, 0.0) / 2) * sd / own.sd
        one = slipped(judgement, replace(suspect, row=row, blunder=b, sd=sd, statistic=-b / sd))
        cases.append(replace(one, weight=weight, instead=True, left_out=tuple(rows)))
    return cases


def _weighed(*cases: Slipped) -> list[Weighed]:
    """Forms of all slips in the readings that may be in error, with their support, the best first."""
    other, rows = slips()
    found, total = [], sum(case.weight * other * _other(case) for case in cases)
    for case in cases:
        for row in rows:
            forms = list(different(_function(row["key"])(case)))
            found += [Weighed(case, row, form, _weight(case, row, form, len(forms))) for form in forms]
    total += sum(one.support for one in found)
    near = [replace(one, support=one.support / total) for one in found if one.support > 0]
    return sorted(near, key=lambda one: -one.support)


def _weight(case: Slipped, row: dict[str, Any], form: Form, forms: int) -> float:
    """p L of a form, one of so many."""
    prior: float = case.weight * row["prior"] / forms * form.weight
    return prior * faces_agree(case, form) * _likelihood(case, form)


def different(forms: Iterator[Form]) -> Iterator[Form]:
    """Forms of one slip that come to the same text count once."""
    seen = set()
    for form in forms:
        key = (form.would or f"{form.change:.9g}", form.line)
        if key not in seen:
            seen.add(key)
            yield form


def faces_agree(case: Written, form: Form) -> float:
    """Weight of a form that changes one of two faces: little unless it brings them together."""
    if len(case.raws) != 2 or not form.booked or any(abs(abs(r.factor) - 0.5) > 1e-9 for r in case.raws):
        return 1.0
    mine, other = sorted(case.raws, key=lambda r: r.line != form.line)
    try:
        was, now = _apart(case, mine, mine.text, other), _apart(case, mine, form.would, other)
    except BadValue:
        return 1.0
    return 1.0 if now < was / 2 else APART


def _apart(case: Written, mine: RawText, text: str, other: RawText) -> float:
    """How far two faces are apart: half a circle between pointings, a whole one of both zenith circles together."""
    one, two = mine.parse(text), other.parse(other.text)
    if not case.wraps:
        return abs(one - two)
    return abs(wrap(one + two if case.kind == "zenith_angle" else one - two - TURN / 2))


def _likelihood(case: Slipped, form: Form) -> float:
    if form.any_amount:
        return _other(case)
    miss = case.blunder - form.change
    sd = form.miss_sd or math.hypot(case.sd, form.sd)
    t = (wrap(miss) if case.wraps else miss) / sd
    return math.exp(-t * t / 2) / (math.sqrt(TURN) * sd) if abs(t) <= FARTHEST else 0.0


def _other(case: Slipped) -> float:
    """Density of some other amount."""
    largest = TURN / 2 if KINDS[case.kind].dimension == "angle" else LARGEST_M
    return 1 / (2 * abs(case.blunder) * math.log(max(largest / case.sd, 10.0)))


def _cause(one: Weighed) -> Cause:
    case, form = one.case, one.form
    notation = case.raws[0].units.angle if case.raws else ""
    pattern = one.row.get("gon", one.row["sentence"]) if notation in ("gon", "mil", "deg") else one.row["sentence"]
    text = pattern.format(would=form.would, booked=form.booked, told=form.told)
    if case.instead:
        text = f"in {case.block.name(case.i)} {text}"
    line = form.line or int(case.block.line[case.i])
    return Cause(one.row["key"], text, form.would, one.support, f"{case.block.file}:{line}")
