"""Parts 10 to 13 of the page: what was held, coordinates and relative ellipses, compliance, plan and pictures."""

from __future__ import annotations

from collections.abc import Iterator

from adjust.record.live_plan import plan_svg
from adjust.record.page_blocks import (
    Block,
    Cell,
    Figure,
    Grid,
    Heading,
    Items,
    Row,
    Words,
    columns,
    number_cell,
    text_cell,
)
from adjust.record.page_checks import figures, part_table
from adjust.record.page_cover import table
from adjust.record.page_view import ROWS_MOST, STATIONS_MOST, View
from adjust.record.page_words import coordinate, small, some
from adjust.record.pictures import pictures
from adjust.record.shown import Entry, plain, two_figures


def held(view: View) -> Iterator[Block]:
    """The final adjustment, what it holds, and what else it solved for."""
    t, record = view.texts, view.record
    yield figures(view, record["solution"])
    yield from part_table(view, record["solution"], "held-parts")
    for role in ("held", "weighted"):
        names = [one["station"] for one in record["stations"] if role in (one["role"], one["role_height"])]
        yield Words((t(f"held.{role}", names=some(names, 20)) if names else t(f"held.no_{role}"),))
    fixed = sum(one["conditions"] for one in record["solution"]["parts"])
    if fixed:
        yield Words((t.counted("held.conditions", fixed),))
    yield Words((t("held.differences"),))
    yield from _shifts(view)
    yield from _parameters(view)


def _shifts(view: View) -> Iterator[Block]:
    """By how much the stations would move without the suspects."""
    t, without = view.texts, view.record["without_suspects"]
    if not without or not without["shifts"]:
        return
    axes = (*view.shown.axes, "height")
    rows = tuple(
        Row((view.station_cell(one["station"]), *(_signed(view, one[axis]) for axis in axes)))
        for one in without["shifts"][:ROWS_MOST]
    )
    heads = [("station", "", False), *((axis, view.shown.small, True) for axis in axes)]
    yield Grid("shifts", t("caption.shifts"), columns(t, "head", heads), rows, folded=True)


def _signed(view: View, metres: float | None) -> Cell:
    if metres is None:
        return number_cell("")
    places = 1 if view.shown.small == "mm" else 4
    return number_cell(view.shown.mark(f"{view.shown.in_small(metres) + 0.0:+.{places}f}"), metres)


def _parameters(view: View) -> Iterator[Block]:
    t, s, entries = view.texts, view.shown, view.record["parameters"]
    if not entries:
        return
    rows = tuple(
        Row((Cell(t.word("parameters", one["what"])), text_cell(one["of"]), _parameter(view, one),
             number_cell("" if one["sd"] is None else _parameter_sd(view, one), one["sd"])))
        for one in entries[:ROWS_MOST]
    )  # fmt: skip
    note = t("ledger.more", n=ROWS_MOST, all=len(entries)) if len(entries) > ROWS_MOST else ""
    heads = [("unknown", "", False), ("of_what", "", False), ("value", "", True), ("sd", s.small_angle, True)]
    yield Grid("parameters", t("caption.parameters"), columns(t, "head", heads), rows, note=note, folded=True)


NUMBERS = ("refraction",)
"""Further unknowns that are pure numbers; all others are angles."""


def _parameter(view: View, one: Entry) -> Cell:
    s = view.shown
    if one["value"] is None:
        return number_cell("")
    text = s.mark(f"{one['value']:.4f}") if one["what"] in NUMBERS else s.circle(one["value"])
    return number_cell(text, one["value"])


def _parameter_sd(view: View, one: Entry) -> str:
    s = view.shown
    return s.mark(two_figures(one["sd"] if one["what"] in NUMBERS else s.in_small_angle(one["sd"])))


def coordinates(view: View) -> Iterator[Block]:
    """All stations with their uncertainty, those that nothing checks, and the lines with their relative ellipses."""
    t, record = view.texts, view.record
    yield _stations(view)
    if record["side_shots"]:
        yield Words((t("coordinates.side_shots", names=some((one["station"] for one in record["side_shots"]), 20)),))
    yield Heading(t("coordinates.lines"))
    if record["lines"]:
        yield _lines(view)
    else:
        yield Words((t("none.lines"),))


def _stations(view: View) -> Grid:
    t, s, entries = view.texts, view.shown, view.record["stations"]
    plane = any(one["east"] is not None for one in entries)
    high = any(one["height"] is not None for one in entries)
    axes = [*(s.axes if plane else ()), *(("height",) if high else ())]
    many = len(entries) > STATIONS_MOST
    order = sorted(range(len(entries)), key=lambda i: (-_size(entries[i]), i))[:STATIONS_MOST] if many else range(
        len(entries))  # fmt: skip
    rows = tuple(_station(view, i, axes, plane) for i in order)
    heads = [("station", "", False), ("role", "", False), *((axis, s.length, True) for axis in axes),
             *((f"sd_{axis}", s.small, True) for axis in axes)]  # fmt: skip
    if plane:
        heads += [
            ("major", s.small, True),
            ("minor", s.small, True),
            ("long_axis", "", True),
            ("circle", s.small, True),
        ]
    if high:
        heads.append(("interval_height", s.small, True))
    note = t("coordinates.note", confidence=view.confidence)
    if many:
        note = t("coordinates.more", n=STATIONS_MOST, all=len(entries)) + " " + note
    caption = t("caption.stations", confidence=view.confidence)
    return Grid("stations", caption, columns(t, "head", heads), rows, sortable=True,
                filter_label=t("filter.stations"), note=note)  # fmt: skip


def _size(one: Entry) -> float:
    """The largest half axis or standard deviation of a station."""
    ellipse = one["ellipse_confidence"] or one["ellipse"]
    return max(float(ellipse["semi_major"] or 0) if ellipse else 0.0, float(one["sd_height"] or 0))


def _station(view: View, i: int, axes: list[str], plane: bool) -> Row:
    t, s = view.texts, view.shown
    one = view.record["stations"][i]
    cells = [view_name(view, one["station"]), role_cell(view, one)]
    cells += [coordinate(s, one[axis], one[f"sd_{axis}"]) for axis in axes]
    cells += [small(s, one[f"sd_{axis}"]) if one[f"sd_{axis}"] != 0 else number_cell(t("coordinates.zero"), 0.0)
              for axis in axes]  # fmt: skip
    if plane:
        cells += _ellipse(view, one["ellipse_confidence"])
        cells.append(small(s, one["circle_confidence"] or None))
    if "height" in axes:
        cells.append(small(s, view.interval(one["sd_height"])))
    hangs = one["station"] in view.hanging
    attributes = {"id": f"s{i}", "data-station": str(i)} | ({"data-first": ""} if hangs else {})
    return Row(tuple(cells), attributes, "unchecked" if hangs else "")


def view_name(view: View, name: str) -> Cell:
    """The name at the head of its own row."""
    return Cell(view.station_cell(name).text, kind="name")


def role_cell(view: View, one: Entry) -> Cell:
    """The role with its sign, both roles where the height's differs, and whether nothing checks the station."""
    t, plane, height = view.texts, one["role"], one["role_height"]
    words = t.word("roles", plane)
    if one["east"] is None:
        plane, words = height, t.word("roles", height)
    elif one["height"] is not None and height != plane:
        words = t("coordinates.two_roles", plane=words, height=t.word("roles", height))
    if one["change_point"]:
        words = t("coordinates.change_point")
    if one["station"] in view.hanging:
        return Cell(t("coordinates.unchecked", role=words), mark="unchecked")
    return Cell(words, mark="control" if plane in ("held", "weighted", "check") else "new")


def _ellipse(view: View, e: Entry | None) -> list[Cell]:
    if not e or not e["semi_major"]:
        return [number_cell("")] * 3
    s = view.shown
    return [
        small(s, e["semi_major"]),
        small(s, e["semi_minor"]),
        number_cell(s.rough_bearing(e["azimuth"]), e["azimuth"]),
    ]


def _lines(view: View) -> Grid:
    t, s, entries = view.texts, view.shown, view.record["lines"]
    plane = any(one["distance"] is not None for one in entries)
    high = any(one["sd_height_difference"] is not None for one in entries)
    order: list[int] = list(range(len(entries)))
    if len(entries) > ROWS_MOST:
        order = sorted(order, key=lambda i: (-_line_size(entries[i]), i))[:ROWS_MOST]
    heads = [("from", "", False), ("to", "", False)]
    if plane:
        heads += [("distance", s.length, True), ("sd_distance", s.small, True), ("azimuth", "", True),
                  ("sd_azimuth", s.small_angle, True), ("major", s.small, True), ("minor", s.small, True),
                  ("long_axis", "", True)]  # fmt: skip
    if high:
        heads.append(("sd_rise", s.small, True))
    rows = tuple(_line(view, i, plane, high) for i in order)
    note = t("coordinates.more_lines", n=ROWS_MOST, all=len(entries)) if len(rows) < len(entries) else ""
    return Grid("lines", t("caption.lines", confidence=view.confidence), columns(t, "head", heads), rows,
                sortable=True, filter_label=t("filter.lines"), note=note)  # fmt: skip


def _line_size(one: Entry) -> float:
    return float((one["ellipse_confidence"] or {}).get("semi_major") or one["sd_height_difference"] or 0.0)


def _line(view: View, i: int, plane: bool, high: bool) -> Row:
    s, one = view.shown, view.record["lines"][i]
    cells = [view.station_cell(one["from"]), view.station_cell(one["to"])]
    if plane:
        cells += [coordinate(s, one["distance"], one["sd_distance"] or None), small(s, one["sd_distance"] or None),
                  number_cell("" if one["azimuth"] is None else s.bearing(one["azimuth"]), one["azimuth"]),
                  _angle_sd(view, one["sd_azimuth"]), *_ellipse(view, one["ellipse_confidence"])]  # fmt: skip
    if high:
        cells.append(small(s, one["sd_height_difference"] or None))
    return Row(tuple(cells), {"id": f"l{i}", "data-line": str(i), "data-ends": view.ends(one["from"], one["to"])})


def _angle_sd(view: View, sd: float | None) -> Cell:
    if not sd:
        return number_cell("")
    return number_cell(view.shown.mark(two_figures(view.shown.in_small_angle(sd))), sd)


def compliance(view: View) -> Iterator[Block]:
    """What was held against which rule, and what is required of pairs."""
    t, record = view.texts, view.record
    asked = [text for text in (view.said("accuracy"), view.said("rule")) if text]
    if asked:
        yield Items(tuple(plain(text, 2000) for text in asked), t("compliance.required"))
    by_rule: dict[str, list[str]] = {}
    for one in record["closures"]:
        if one["declared"]:
            by_rule.setdefault(one["rule"], []).append(one["verdict"])
    yield from table(view, "by-rule", ("rule", "met", "not_met", "not_tested"), [
        (rule, *(str(verdicts.count(word)) for word in ("met", "not met", "cannot be tested")))
        for rule, verdicts in by_rule.items()
    ])  # fmt: skip
    yield Words((t("compliance.pairs"),))
    yield Words((t("compliance.arithmetic"),))


def plan(view: View) -> Iterator[Block]:
    """The plan, and pictures of where to look."""
    t = view.texts
    svg = plan_svg(view.record, t.tree)
    yield Figure(svg, t("plan.title"), t("plan.words"), "plan-figure") if svg else Words((t("none.plan"),))
    for one in pictures(view.record, t.tree):
        yield Figure(one.svg, one.title, one.words)
