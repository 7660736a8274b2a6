"""The surveyor's evening in words: what the raw book gave, what was corrected, and whether it closes."""

from __future__ import annotations

import math
from collections import Counter, defaultdict
from collections.abc import Iterable, Sequence

from adjust.book.job import Job
from adjust.book.reductions import Reduction
from adjust.judge.closures import Closure
from adjust.units import ANGLES, small_angle_unit, small_length

MOST_SHOWN = 40
"""Closures told one by one; of more, those that do not close and then the first ones."""
LONG_WAY = 6
"""Stations of a way that are named; the rest are counted."""
_KEY_FIGURES = {"collimation (2C)": "2C", "index": "index"}


def book_lines(job: Job) -> list[str]:
    """What was reduced from each raw table, the instrument's errors, and what there is to say of it."""
    lines = []
    by_file: dict[str, list[Reduction]] = defaultdict(list)
    for one in job.reductions:
        by_file[one.file].append(one)
    for file, found in by_file.items():
        kinds = Counter(one.what for one in found)
        lines.append(f"{file}: " + ", ".join(_judged(what, n, found) for what, n in kinds.items()) + ".")
        lines += [f"  {line}" for line in _instruments(job, found)]
    known = set(job.warnings)
    said = dict.fromkeys(one.sentence for one in job.reductions if one.sentence and one.sentence not in known)
    return [*lines, *(f"  {sentence}" for sentence in said), *_failed(job)]


def _judged(what: str, n: int, found: list[Reduction]) -> str:
    """How many of a sort, and how they were judged where they were."""
    verdicts = Counter(one.verdict for one in found if one.what == what and one.verdict)
    if not verdicts:
        return f"{what} {n}"
    if set(verdicts) == {"met"}:
        return f"{what} {n} (met)" if n == 1 else f"{what} {n} (all met)"
    return f"{what} {n} ({', '.join(f'{k} {verdict}' for verdict, k in verdicts.items())})"


def _instruments(job: Job, found: list[Reduction]) -> list[str]:
    """2C and index by station: mean and spread."""
    by_station: dict[str, list[str]] = defaultdict(list)
    for one in found:
        if one.what in _KEY_FIGURES:
            spread = one.values.get("spread")
            text = f"{_KEY_FIGURES[one.what]} {_angle(job, one.values['mean'] or 0.0)}"
            by_station[one.of].append(text + (f" (spread {_angle(job, spread).lstrip('+')})" if spread else ""))
        elif one.what == "set mean of directions" and one.of.partition(" to ")[0] not in _told(by_station):
            by_station[one.of.partition(" to ")[0]].append(_precision(job, one))
    return [f"{station}: {'; '.join(t for t in texts if t)}." for station, texts in by_station.items() if any(texts)]


def _told(by_station: dict[str, list[str]]) -> set[str]:
    return {station for station, texts in by_station.items() if texts}


def _precision(job: Job, one: Reduction) -> str:
    """A direction's mean: from the instrument's figure, and from the spread of the sets."""
    stated, shown = one.values.get("sd_instrument"), one.values.get("sd_spread")
    if not stated or not shown:
        return ""
    return f"mean direction {_size(job, stated)} as stated, {_size(job, shown)} from the spread of the sets"


def _failed(job: Job) -> list[str]:
    """What did not meet a declared limit and has no sentence of its own."""
    return [
        f"  {one.what} {one.of} ({one.file}, line {one.lines[0] if one.lines else '-'}): not met."
        for one in job.reductions
        if one.verdict == "not met" and not one.sentence
    ]


def ledger_lines(job: Job) -> list[str]:
    """Corrections of distances by sort: how many, how large, and by whom."""
    sorts: dict[tuple[str, str], list[float]] = defaultdict(list)
    for line in job.ledger:
        sorts[line.name, line.how].append(line.amount)
    if not sorts:
        return []
    texts = []
    for (name, how), amounts in sorts.items():
        unit = job.settings.units.length
        low, high = (small_length(x, unit) for x in (min(amounts), max(amounts)))
        size = "" if how != "here" else f" {low}" if low == high else f" {low} to {high}"
        texts.append(f"{name}{size} ({len(amounts)}, {how})")
    return ["Distances: " + "; ".join(texts) + "."]


def closure_lines(job: Job, closures: Sequence[Closure]) -> list[str]:
    """Every closure in a line, those that do not close first where there are many."""
    if not closures:
        return ["Nothing closes: no loop, no run between known points, no triangle."]
    counts = Counter(one.verdict for one in closures)
    head = ", ".join(f"{n} {verdict}" for verdict, n in counts.items())
    lines = [f"Closures: {head}. Allowed: {'; '.join(dict.fromkeys(one.rule for one in closures if one.rule))}."]
    order = {"not met": 0, "cannot be tested": 1, "met": 2}
    shown = sorted(closures, key=lambda one: order[one.verdict]) if len(closures) > MOST_SHOWN else list(closures)
    for one in shown[:MOST_SHOWN]:
        lines.append(f"  {closure_words(job, one)}")
        if one.sentence:
            lines.append(f"    {one.sentence}")
    if len(shown) > MOST_SHOWN:
        lines.append(f"  and {len(shown) - MOST_SHOWN} more; the record has all.")
    return lines


def closure_words(job: Job, one: Closure) -> str:
    """One closure: way, misclosures with what is allowed, verdict."""
    names = [job.network.stations.names[i] for i in one.stations]
    unit = job.settings.units.length
    far = "" if one.length is None else f", {_length(one.length, unit)}"
    texts = []
    if "height" in one.misclosure:
        texts.append(f"height {small_length(one.misclosure['height'], unit)}" + _allowed(job, one, "height"))
    if "angle" in one.misclosure:
        texts.append(f"angle {_angle(job, one.misclosure['angle'])}" + _allowed(job, one, "angle"))
    if "linear" in one.misclosure:
        east, north = (small_length(one.misclosure[k], unit) for k in ("east", "north"))
        ratio = f" 1:{one.ratio:,.0f}" if one.ratio and math.isfinite(one.ratio) else ""
        texts.append(f"linear {small_length(one.misclosure['linear'], unit).lstrip('+')}{ratio} (east {east}, north "
                     f"{north})" + _allowed(job, one, "linear"))  # fmt: skip
    verdict = one.verdict.upper() if one.verdict == "not met" else one.verdict
    return f"{one.kind} {_way(names, job.private)}{far}: {'; '.join(texts)}: {verdict}."


def _way(names: list[str], private: frozenset[str]) -> str:
    """The stations walked; of long ways the change points are left out, and then the middle."""
    if len(names) > LONG_WAY + 2:
        names = [name for k, name in enumerate(names) if name not in private or k in (0, len(names) - 1)]
    if len(names) <= LONG_WAY + 2:
        return "-".join(names)
    half = LONG_WAY // 2
    return "-".join(names[:half]) + f"-({len(names) - 2 * half} more)-" + "-".join(names[-half:])


def _allowed(job: Job, one: Closure, key: str) -> str:
    most = one.allowable.get(key)
    if most is None or not math.isfinite(most):
        return ""
    size = _size(job, most) if key == "angle" else small_length(most, job.settings.units.length).lstrip("+")
    return f", allowed {size}"


def _length(metres: float, unit: str) -> str:
    return f"{metres:.0f} m" if unit == "m" else f"{metres / {'ft': 0.3048, 'us-ft': 1200 / 3937}[unit]:.0f} {unit}"


def _angle(job: Job, radians: float) -> str:
    """A small angle with its sign in the job's small unit: +2.1 sec, or milligon."""
    unit = small_angle_unit(job.settings.units.angle)
    return f"{radians / ANGLES[unit]:+.1f} {unit}"


def _size(job: Job, radians: float) -> str:
    return _angle(job, radians).lstrip("+")


def not_closed(closures: Iterable[Closure]) -> int:
    """How many do not close."""
    return sum(one.verdict == "not met" for one in closures)
