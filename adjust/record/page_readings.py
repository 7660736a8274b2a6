"""Part 7 of the page: every reading from the book to its adjusted value; what was left out; reductions of raw books."""

from __future__ import annotations

from collections.abc import Iterator

from adjust.record.page_blocks import (
    Block,
    Cell,
    Column,
    Grid,
    Heading,
    Row,
    Words,
    columns,
    name_cell,
    number_cell,
    text_cell,
)
from adjust.record.page_cover import LEDGER_MOST
from adjust.record.page_view import View
from adjust.record.page_words import amount_cell, place_of, pure, reading_cell, sd_cell, some, verdict_cell
from adjust.record.shown import Entry, plain, reading_in_words


def readings(view: View) -> Iterator[Block]:
    """Observations, what was left out or not measured, and what the reduction of raw books gave."""
    yield _observations(view)
    yield Heading(view.texts("readings.left_out"))
    yield from _asides(view, "left_out", ("reading", "kind", "stations", "reason"))
    if view.record["not_measured"]:
        yield from _asides(view, "not_measured", ("reading", "kind", "stations"))
    yield from _reductions(view)


_HEADS = (
    ("reading", False), ("line", False), ("what", False), ("booked", True), ("corrections", True), ("observed", True),
    ("residual", True), ("adjusted", True), ("sd", True), ("statistic", True), ("checked", True), ("remark", False),
)  # fmt: skip


def _observations(view: View) -> Grid:
    t, all_of = view.texts, view.record["observations"]
    rows = tuple(_observation(view, i) for i in view.order)
    units = {"line": t("readings.in_file"), "checked": "%"}
    heads = [(key, units.get(key, ""), number) for key, number in _HEADS]
    critical = next((one["critical"] for one in all_of if one["critical"]), None)
    note = t("readings.note")
    if critical is not None:
        note += " " + t("readings.limit", limit=view.shown.mark(f"{critical:.2f}"))
    if len(rows) < len(all_of):
        note = t("readings.more", n=len(rows), all=len(all_of)) + " " + note
    return Grid("observations", t("caption.observations"), columns(t, "head", heads), rows, sortable=True,
                filter_label=t("filter.observations"), note=note)  # fmt: skip


def _observation(view: View, i: int) -> Row:
    t, s = view.texts, view.shown
    one = view.record["observations"][i]
    kind, sd, place = one["kind"], one["sd"], place_of(one)
    first = one["suspect"] or one["id"] in view.suspects
    cells = (
        name_cell(one["id"]), Cell("" if place == one["id"] else place, kind="code"),
        Cell(reading_in_words(one), kind="name"),
        number_cell(plain(one["booked"], 60)), _corrections(view, one), reading_cell(s, kind, one["observed"], sd),
        amount_cell(s, kind, one["residual"], sd), reading_cell(s, kind, one["adjusted"], one["sd_adjusted"] or sd),
        sd_cell(s, kind, sd) if sd is not None else Cell(t("roles.held"), kind="number"),
        pure(s, one["statistic"]), _share(view, one["checked_share"]), _remark(view, one),
    )  # fmt: skip
    attributes = {"id": f"o{i}", "data-observation": str(i), "data-ends": view.sight(one)}
    return Row(cells, attributes | ({"data-first": ""} if first else {}), "suspect" if first else "")


def _corrections(view: View, one: Entry) -> Cell:
    """The sum of the corrections, each named."""
    amounts = one["corrections"]
    if not amounts:
        return number_cell("")
    total = sum(c["value"] for c in amounts)
    names = ", ".join(dict.fromkeys(plain(c["name"], 40) for c in amounts))
    return number_cell(f"{view.shown.amount(total, one['sd'], one['kind'])} ({names})", total)


def _share(view: View, share: float | None) -> Cell:
    return number_cell("" if share is None else f"{100 * share:.0f}", share)


def _remark(view: View, one: Entry) -> Cell:
    """Suspect, unchecked, or what an error could do unseen."""
    t = view.texts
    if one["suspect"] or one["id"] in view.suspects:
        return Cell(t("readings.suspect"), mark="bad")
    if one["id"] in view.unchecked:
        return Cell(t("readings.unchecked"), mark="open")
    return Cell("")


def _asides(view: View, key: str, heads: tuple[str, ...]) -> Iterator[Block]:
    t, entries = view.texts, view.record[key]
    if not entries:
        yield Words((t(f"none.{key}"),))
        return
    rows = tuple(
        Row((name_cell(one["observation"]), Cell(t.word("kinds", one["kind"])),
             Cell(some(one["stations"]), kind="name"), *((text_cell(one["reason"]),) if "reason" in one else ())))
        for one in entries[:LEDGER_MOST]
    )  # fmt: skip
    note = t("ledger.more", n=LEDGER_MOST, all=len(entries)) if len(entries) > LEDGER_MOST else ""
    yield Grid(
        key.replace("_", "-"), t(f"caption.{key}"), tuple(Column(t(f"head.{h}")) for h in heads), rows, note=note
    )


def _reductions(view: View) -> Iterator[Block]:
    t, entries = view.texts, view.record["reductions"]
    if not entries:
        return
    first = sorted(entries, key=lambda one: one["verdict"] != "not met")[:LEDGER_MOST]
    rows = tuple(
        Row((Cell(t.word("reduction", one["what"])), name_cell(one["of"]), Cell(_lines(one), kind="code"),
             text_cell(_values(view, one)), verdict_cell(t, one["verdict"]), text_cell(one["sentence"])))
        for one in first
    )  # fmt: skip
    note = t("ledger.more", n=LEDGER_MOST, all=len(entries)) if len(entries) > LEDGER_MOST else ""
    heads = tuple(Column(t(f"head.{h}")) for h in ("reduction", "of_what", "line", "figures", "verdict", "in_words"))
    yield Grid("reductions", t("caption.reductions"), heads, rows, note=note, folded=True)


def _lines(one: Entry) -> str:
    lines = [str(line) for line in one["lines"][:6]]
    more = ", …" if len(one["lines"]) > 6 else ""
    return f"{plain(one['file'], 60)}:{', '.join(lines)}{more}" if lines else plain(one["file"], 60)


def _values(view: View, one: Entry) -> str:
    out = []
    for name, value in one["values"].items():
        if value is not None:
            out.append(f"{view.texts.word('figures', name).replace('_', ' ')} {_value(view, name, value, one)}")
    return "; ".join(out)


def _value(view: View, name: str, value: float, one: Entry) -> str:
    """A figure of a reduction: booked heights and means in full, all else as an amount."""
    s = view.shown
    if one["dimension"] == "number" or name in ("count", "sets", "n"):
        return s.mark(f"{value:g}")
    if one["dimension"] == "angle":
        return s.circle(value) if name in ("mean", "face_1", "face_2") else s.amount(value, None, "angle")
    return s.coordinate(value, None) + f" {s.length}" if abs(value) >= 0.1 else s.amount(value, None, "distance")
