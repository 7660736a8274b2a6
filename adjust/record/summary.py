"""One screen in plain words: what was adjusted, whether to believe it, what to look at, and the stations.

At most about forty lines of at most a hundred columns. Lists show their worst few and say where the rest stands; the
table of stations gives way first.
"""

from __future__ import annotations

import math
import textwrap
from collections.abc import Iterable, Sequence

from adjust.caution import CAUTION
from adjust.record.findings import likeliest
from adjust.record.shown import Entry, Shown, count, plain, reading_in_words

WIDTH = 100
MOST_LINES = 40
WORST = 3
LONG_WAY = 8
TABLE_ALL, TABLE_WORST, TABLE_LEAST = 12, 8, 4


def summary_lines(record: Entry) -> list[str]:
    """The summary of a record as lines without colour, the caution last."""
    shown = Shown.of(record)
    above = [
        *_head(record),
        *_findings(record),
        *_overall(record, shown),
        *_closures(record),
        *_suspects(record, shown),
        *_unchecked(record),
    ]
    above += [*_control(record), *_precision(record, shown), *_left_out(record), *_warnings(record)]
    caution = textwrap.wrap(CAUTION, WIDTH)
    room = MOST_LINES - len(above) - len(caution) - 4  # the table's header and pointer, and two blank lines
    table = _table(record, shown, max(room, TABLE_LEAST))
    lines = [*above, *(["", *table] if table else []), "", *caution]
    return lines if len(lines) <= MOST_LINES else [line for line in lines if line]


def _wrapped(text: str, most: int = 2, indent: str = "  ") -> list[str]:
    return textwrap.wrap(text, WIDTH, subsequent_indent=indent, max_lines=most, placeholder=" ...")


def _some(items: Sequence[str], most: int = WORST) -> str:
    rest = len(items) - most
    return ", ".join(items[:most]) + (f" and {rest} more" if rest > 0 else "")


def _findings(record: Entry) -> list[str]:
    """The most important sentences."""
    told = record["findings"][:WORST]
    return ["", *(line for one in told for line in _wrapped(f"* {plain(one['sentence'], 290)}", 3))]


def _degrees(n: int) -> str:
    return count(n, "degree of freedom", "degrees of freedom")


def _head(record: Entry) -> list[str]:
    job, solution = record["job"], record["solution"]
    who = [
        text for text in (plain(job["client"], 60), f"surveyed {job['surveyed']}" if job["surveyed"] else "") if text
    ]
    lines = _wrapped(plain(job["title"] or "Untitled job", 190))
    lines += [", ".join(who)] if who else []
    lines += _wrapped(
        f"Adjusted {count(len(record['stations']), 'station')} from {count(solution['observations'], 'reading')}: "
        f"{count(solution['unknowns'], 'unknown')}, {_degrees(solution['degrees_of_freedom'])}. "
        f"Datum: {plain(solution['datum'], 80)}."
    )
    if not solution["converged"]:
        lines.append(f"NOT SETTLED after {count(solution['iterations'], 'iteration')}: do not use these figures.")
    if record["settings"]["variance_factor"] == "from-residuals":
        lines.append("Standard deviations are scaled by what the residuals show (variance factor from residuals).")
    return lines


_VERDICTS = {
    "met": "met, readings scatter as stated",
    "not met": "NOT MET, readings scatter more than stated",
    "better than stated": "better than stated, readings scatter less than expected",
    "cannot be tested": "cannot be tested, no reading is to spare",
}


def _overall(record: Entry, shown: Shown) -> list[str]:
    parts = record["solution"]["parts"] or [record["solution"]]
    lines = ["", *_readings_alone(record, shown)]
    lines += [line for part in parts[:WORST] for line in _overall_part(part, record["settings"], shown)]
    return [*lines, f"  and {count(len(parts) - WORST, 'more part')}: see the record"] if len(parts) > WORST else lines


def _closures(record: Entry) -> list[str]:
    """Whether things close, and the worst of those that do not; `check` tells every one."""
    closures = record["closures"]
    if not closures:
        return []
    bad = [one for one in closures if one["verdict"] == "not met"]
    untested = sum(one["verdict"] == "cannot be tested" for one in closures)
    text = f"Closures: {len(closures) - len(bad) - untested} met"
    text += f", {untested} cannot be tested" if untested else ""
    lines = [f"{text}." if not bad else f"{text}, {len(bad)} NOT MET:"]
    for one in bad[:WORST]:
        way = one["stations"]
        shown = "-".join(way) if len(way) <= LONG_WAY else f"{way[0]}-({len(way) - 2} more)-{way[-1]}"
        lines += _wrapped(plain(f"  {one['kind']} {shown}. {one['sentence']}", 190), indent="    ")
    return [*lines, f"  and {len(bad) - WORST} more: see brasscap check"] if len(bad) > WORST else lines


def _readings_alone(record: Entry, shown: Shown) -> list[str]:
    """The free stage: does the work hold together before any control is held, and how does control fit it."""
    free = record["free"]
    if not free:
        return []
    test, factor = free["overall_test"], free["variance_factor"]
    text = f"Readings alone, before control is held: {_VERDICTS.get(test['verdict'], test['verdict'])}"
    if factor is not None:
        text += f" (variance factor {shown.mark(f'{factor:.2f}')})"
    fit = free["similarity"]
    if fit and fit["sd_scale_ppm"] is not None:
        ppm, sd = shown.mark(f"{fit['scale_ppm']:+.1f}"), shown.mark(f"{fit['sd_scale_ppm']:.1f}")
        text += f"; scale of the control against them {ppm} ppm, standard deviation {sd}"
    return _wrapped(text + ".")


def _overall_part(part: Entry, settings: Entry, shown: Shown) -> list[str]:
    test, factor = part["overall_test"], part["variance_factor"]
    what = plain(part.get("what") or "the whole", 50)
    words = _VERDICTS.get(test["verdict"], str(test["verdict"]))
    if settings["variance_factor"] == "from-residuals" and test["verdict"] == "cannot be tested":
        words = "cannot be tested"
    text = f"Overall test, {what}: {words}"
    if factor is not None:
        text += f" (variance factor {shown.mark(f'{factor:.2f}')}"
        if test["interval"]:
            least, most = (
                shown.mark(f"{bound:.2f}" if bound >= 0.095 else f"{bound:.1g}") for bound in test["interval"]
            )
            text += f", limits {least} to {most}"
        text += ")"
    return _wrapped(text + ".")


def _suspects(record: Entry, shown: Shown) -> list[str]:
    expected = record["expected_by_chance"]
    chance = "" if expected is None else f"expected by chance: {shown.mark(f'{expected:.2g}')}"
    suspects = record["suspects"]
    if not suspects:
        return ["", "No suspect readings" + (f" ({chance})." if chance else ".")]
    at_level = sum(bool(one["at_job_level"]) for one in suspects)
    grave = f", {at_level} beyond what chance explains in the whole job" if at_level else ""
    by_id = {one["id"]: one for one in record["observations"]}
    lines = ["", f"SUSPECT: {count(len(suspects), 'reading')}{grave}" + (f" ({chance})." if chance else ".")]
    for one in suspects[:WORST]:
        lines += _suspect(one, by_id.get(one["observation"]), shown)
    return [*lines, *_more(len(suspects) - WORST, "suspect"), *_without(record, shown)]


def _without(record: Entry, shown: Shown) -> list[str]:
    """What the adjustment would be without the blunders."""
    one = record["without_suspects"]
    if not one:
        return []
    n, every = len(one["observations"]), len(record["suspects"])
    which = "it" if n == every == 1 else "them" if n == every else f"the {count(n, 'worst', 'worst')}"
    factor, moved = one["variance_factor"], _most_moved(one["shifts"], shown)
    text = f"  Without {which} (--without-suspects)"
    text += f" the variance factor would be {shown.mark(f'{factor:.2f}')}" if factor is not None else ""
    text += {"met": ": met", "not met": ": NOT MET"}.get(one["overall_test"]["verdict"], "")
    return _wrapped(f"{text}; {moved}." if moved else f"{text}.")


def _most_moved(shifts: Sequence[Entry], shown: Shown) -> str:
    """'P12 would move by 4.2 mm', of the station that would move most."""
    sizes = [(math.hypot(*(one[part] or 0.0 for part in ("east", "north", "height"))), one) for one in shifts]
    if not sizes:
        return ""
    size, one = max(sizes, key=lambda pair: pair[0])
    return f"{plain(one['station'])} would move by {shown.amount(size, None, 'distance').removeprefix('+')}, the most"


def _more(rest: int, what: str) -> list[str]:
    return [f"  and {count(rest, 'more ' + what)}: see the record"] if rest > 0 else []


def _suspect(suspect: Entry, observation: Entry | None, shown: Shown) -> list[str]:
    kind = observation["kind"] if observation else "distance"
    what = f" {reading_in_words(observation)}," if observation else ""
    text = f"  {plain(suspect['observation'], 40)}:{what} " + shown.too_much(
        suspect["estimated_blunder"], suspect["sd"], kind
    )
    if suspect["statistic"] is not None:
        critical = observation["critical"] if observation else None
        text += f"; statistic {shown.mark(format(abs(suspect['statistic']), '.1f'))}"
        text += f" (limit {shown.mark(f'{critical:.2f}')})" if critical else ""
    if suspect["cannot_be_told_from"]:
        text += f"; cannot be told from {_some([plain(o['observation']) for o in suspect['cannot_be_told_from']])}"
    lines = _wrapped(text, 2, "      ")
    cause = likeliest(suspect)
    return lines + (_wrapped(f"    {cause}", 2, "      ") if cause else [])


def _unchecked(record: Entry) -> list[str]:
    unchecked = record["unchecked"]
    if not unchecked:
        return []
    few = _some([plain(one["observation"], 40) for one in unchecked])
    return _wrapped(f"Unchecked: {count(len(unchecked), 'reading')} nothing else would contradict: {few}.")


_CONTROL = {"disagrees": "disagree", "agrees": "agree", "cannot be judged": "cannot be judged"}


def _control(record: Entry) -> list[str]:
    entries = record["control"]
    if not entries:
        return []
    verdicts = [one["verdict"] for one in entries]
    said = [count(verdicts.count(word), word, many) for word, many in _CONTROL.items() if word in verdicts]
    bad = [one for one in entries if one["verdict"] == "disagrees"]
    lines = [f"Control compared ({count(len(entries), 'coordinate')}): {', '.join(said)}."]
    for one in bad[:2]:
        lines += _wrapped(f"  {plain(one['sentence'], 180)}", 2, "    ")
    return lines + _more(len(bad) - 2, "disagreement")


def _confidence(record: Entry) -> str:
    return f"{100 * record['settings']['confidence']:g} %"


def _precision(record: Entry, shown: Shown) -> list[str]:
    lines = []
    aside = {one["station"] for one in record["side_shots"]}
    judged = [one for one in record["stations"] if one["station"] not in aside]
    judged = judged if any("new" in (one["role"], one["role_height"]) for one in judged) else record["stations"]
    plane = [one for one in judged if one["ellipse_confidence"] and one["ellipse_confidence"]["semi_major"]]
    if plane:
        worst = max(plane, key=lambda one: float(one["ellipse_confidence"]["semi_major"]))
        e = worst["ellipse_confidence"]
        lines.append(
            f"Least certain position: {plain(worst['station'])}, {_confidence(record)} ellipse "
            f"{shown.small_sd(e['semi_major'])} by {shown.small_sd(e['semi_minor'])} {shown.small} (half axes), "
            f"long axis {shown.rough_bearing(e['azimuth'])}."
        )
    high = [one for one in judged if one["sd_height"]]
    if high:
        worst = max(high, key=lambda one: float(one["sd_height"]))
        sd = shown.small_sd(worst["sd_height"])
        lines.append(f"Least certain height: {plain(worst['station'])}, standard deviation {sd} {shown.small}.")
    shots = [plain(one["station"]) for one in record["side_shots"]]
    if shots:
        lines += _wrapped(f"Side shots, fixed by unchecked readings only and counted in no verdict: {_some(shots)}.")
    return ["", *lines] if lines else []


def _left_out(record: Entry) -> list[str]:
    lines = []
    out, none = record["left_out"], record["not_measured"]
    if out:
        few = _some([f"{plain(one['observation'], 30)} ({plain(one['reason'], 40)})" for one in out])
        lines += _wrapped(f"Left out: {count(len(out), 'reading')}: {few}.")
    if none:
        lines.append(f"Planned and not measured: {count(len(none), 'reading')}.")
    return lines


def _warnings(record: Entry) -> list[str]:
    warnings = record["warnings"]
    lines = [
        line
        for one in warnings[:WORST]
        for line in _wrapped(f"Warning: {plain(one, 190)}", 2 if len(warnings) < WORST else 1)
    ]
    return lines + _more(len(warnings) - WORST, "warning")


def _uncertainty(station: Entry) -> float:
    ellipse = station["ellipse_confidence"]
    return max(float(ellipse["semi_major"] or 0) if ellipse else 0.0, float(station["sd_height"] or 0))


def _table(record: Entry, shown: Shown, room: int) -> list[str]:
    """The compact table of stations: all where they fit, else the least certain in the order of the record."""
    stations = record["stations"]
    most = TABLE_ALL if len(stations) <= TABLE_ALL else TABLE_WORST
    most = min(most, max(room, TABLE_LEAST))
    worst = sorted(range(len(stations)), key=lambda i: (-_uncertainty(stations[i]), i))[:most]
    rows = [stations[i] for i in sorted(worst)]
    if not rows:
        return []
    columns = [column for column in _columns(rows, record, shown) if any(column[1:])]
    while sum(max(map(len, column)) + 2 for column in columns) - 2 > WIDTH:
        columns.pop()  # the last columns say least: they all stand in stations.csv
    widths = [max(map(len, column)) for column in columns]
    lines = ["  ".join(_placed(c[i], w, n) for n, (c, w) in enumerate(zip(columns, widths, strict=True))).rstrip()
             for i in range(len(rows) + 1)]  # fmt: skip
    hidden = len(stations) - len(rows)
    which = f"The {len(rows)} least certain of {len(stations)} stations (all in stations.csv)" if hidden else "Stations"
    return [f"{which} in {shown.length}; sd, {_confidence(record)} half axis in {shown.small}:", *lines]


def _placed(cell: str, width: int, column: int) -> str:
    return cell.ljust(width) if column < 2 else cell.rjust(width)


def _columns(rows: Iterable[Entry], record: Entry, shown: Shown) -> list[list[str]]:
    """Columns with their header first; figures are padded so that decimal marks stand below each other."""
    rows = list(rows)
    axes = (*shown.axes, "height")
    columns = [["Station", *(plain(one["station"], 14) for one in rows)], ["Role", *(_role(one) for one in rows)]]
    for axis in axes:
        cells = ["" if r[axis] is None else shown.coordinate(r[axis], r[f"sd_{axis}"]) for r in rows]
        columns.append([axis.title(), *_aligned(cells, shown.decimal)])
    for axis in axes:
        cells = [shown.small_sd(one[f"sd_{axis}"] or None) for one in rows]
        columns.append([f"sd {axis[0].upper()}", *_aligned(cells, shown.decimal)])
    major = [shown.small_sd((one["ellipse_confidence"] or {}).get("semi_major") or None) for one in rows]
    return [*columns, [_confidence(record), *_aligned(major, shown.decimal)]]


def _role(station: Entry) -> str:
    """The role, or both where the height's differs: 'held, new'."""
    plane, height = station["role"], station["role_height"]
    if station["height"] is None or plane == height:
        return str(plane)
    return str(height) if station["east"] is None else f"{plane}, {height}"


def _aligned(cells: list[str], decimal: str) -> list[str]:
    tails = [len(cell) - cell.find(decimal) if decimal in cell else 0 for cell in cells]
    most = max(tails, default=0)
    return [cell + " " * (most - tail) if cell else "" for cell, tail in zip(cells, tails, strict=True)]
