"""Parts 1 to 6 of the page: cover, purpose, frame, instruments, methods, control."""

from __future__ import annotations

from collections.abc import Iterator

from adjust.record.page_blocks import (
    Block,
    Cell,
    Column,
    Facts,
    Grid,
    Items,
    Row,
    Seal,
    Words,
    columns,
    facts,
    number_cell,
    text_cell,
)
from adjust.record.page_view import View
from adjust.record.page_words import small, verdict_cell
from adjust.record.shown import Entry, plain


def supplied(view: View, keys: tuple[str, ...]) -> Facts:
    """What [record] says under keys, each with its label."""
    return facts((view.texts(f"said.{key}"), view.said(key)) for key in keys)


def cover(view: View) -> Iterator[Block]:
    """Who, what, where, when, and the space for the seal."""
    job, t = view.record["job"], view.texts
    yield facts([
        (t("said.title"), job["title"]), (t("said.client"), job["client"]), (t("said.place"), view.said("place")),
        (t("said.surveyed"), job["surveyed"]), (t("said.crew"), view.said("crew")),
        (t("said.surveyor"), view.said("surveyor")), (t("said.licence"), view.said("licence")),
        (t("said.edition"), view.said("edition")), (t("said.issued"), view.said("issued")),
    ])  # fmt: skip
    yield Seal(t("cover.seal"))


def purpose(view: View) -> Iterator[Block]:
    """What for, how accurate, and who asks for that."""
    yield supplied(view, ("purpose", "accuracy", "rule"))


def frame(view: View) -> Iterator[Block]:
    """Datum as the surveyor says it, and the frame and units that were computed in."""
    t, record = view.texts, view.record
    units, one = record["units"], record["frame"]
    yield supplied(view, ("datum", "epoch", "projection", "geoid", "bearing_basis", "surface"))
    height = view.shown.mark(f"{view.shown.in_length(one['plane_height']):.3f}")
    yield Facts((
        (t("frame.computed_in"), (t.word("frames", one["kind"]),)),
        (t("frame.plane_height"), (t("frame.at", height=height, unit=t.word("lengths", units["length"])),)),
        *(((t("frame.origin"), (one["origin"],)),) if one["origin"] else ()),
        (t("frame.carried_by"), (plain(record["solution"]["datum"], 200),)),
        (t("frame.lengths"), (t.word("lengths_full", units["length"]),)),
        (t("frame.angles"), (t.word("angles_full", units["angle"]),)),
        (t("frame.order"), (plain(units["axis_order"]),)),
        (t("frame.bearings"), (t.word("bearings", units["bearings"]),)),
        (t("frame.refraction"), (plain(record["settings"]["frame"]["refraction"]),)),
    ))  # fmt: skip


def instruments(view: View) -> Iterator[Block]:
    """Instruments, their error models, constants and weather; peg tests; corrections of distances."""
    t, settings = view.texts, view.record["settings"]
    yield supplied(view, ("instruments", "calibration"))
    models: list[tuple[object, ...]] = [
        (name, t.word("model", key), text)
        for name, keys in settings["instruments"].items()
        for key, text in keys.items()
    ]
    yield from table(view, "error-models", ("instrument", "reading", "error_model"), models)
    yield from _constants(view)
    yield from table(view, "tables-read", ("file", "table", "instrument", "sd_factor", "surface", "reflector", "made"),
                     [_book(view, one) for one in settings["books"]])  # fmt: skip
    tests = [one["sentence"] for one in view.record["reductions"] if one["what"] == "two-peg test" and one["sentence"]]
    yield Facts(((t("instruments.peg_tests"), tuple(plain(one, 300) for one in tests) or None),))
    yield from _ledger(view)


def _constants(view: View) -> Iterator[Block]:
    t, s, settings = view.texts, view.shown, view.record["settings"]
    rows: list[tuple[object, ...]] = []
    for name, constant in settings["reflectors"].items():
        rows.append((name, t("instruments.reflector"), s.amount(constant, None, "distance")))
    for name, one in settings["distance_meters"].items():
        if one["constant"]:
            rows.append((name, t("instruments.constant"), s.amount(one["constant"], None, "distance")))
        if one["scale_ppm"]:
            rows.append((name, t("instruments.scale"), s.mark(f"{one['scale_ppm']:+.2f} ppm")))
        zero = _weather(view, one["zero_weather"])
        rows += [(name, t("instruments.zero_weather"), zero)] if zero else []
    air = _weather(view, settings["weather"])
    rows += [(t("instruments.job"), t("instruments.weather"), air)] if air else []
    yield from table(view, "constants", ("instrument", "what", "value"), rows)


def _weather(view: View, air: Entry | None) -> str:
    """'12 °C, 980 hPa, 60 %' or ''."""
    if not air:
        return ""
    said = [(air[key], view.texts(f"weather.{key}")) for key in ("temperature", "pressure", "humidity", "ppm")]
    return ", ".join(view.shown.mark(f"{value:g} {unit}") for value, unit in said if value is not None)


def _book(view: View, one: Entry) -> tuple[object, ...]:
    t, applied = view.texts, one["applied"]
    made = [] if applied is None else [t.word("applied", x) for x in applied] or [t("instruments.none_made")]
    made += [t("instruments.collimation", how=plain(one["collimation"]))] if one["collimation"] else []
    made += [t("instruments.curvature", how=plain(one["curvature"]))] if one["curvature"] else []
    made += [_weather(view, one["weather"])] if _weather(view, one["weather"]) else []
    return (one["file"], t.word("table_kinds", one["kind"]), one["instrument"], f"{one['sd_factor']:g}",
            t.word("surfaces", one["surface"]), one["reflector"], "; ".join(made))  # fmt: skip


def _ledger(view: View) -> Iterator[Block]:
    t, ledger = view.texts, view.record["ledger"]
    if not ledger:
        return
    rows = tuple(
        Row((view.reading_cell(one["observation"]), text_cell(one["name"]),
             number_cell(view.shown.amount(one["amount"], None, "distance"), one["amount"]), text_cell(one["how"]),
             text_cell(one["source"])))
        for one in ledger[:LEDGER_MOST]
    )  # fmt: skip
    note = t("ledger.more", n=LEDGER_MOST, all=len(ledger)) if len(ledger) > LEDGER_MOST else ""
    heads = [
        ("reading", "", False),
        ("what", "", False),
        ("amount", "", True),
        ("how", "", False),
        ("source", "", False),
    ]
    yield Grid("ledger", t("ledger.caption"), columns(t, "head", heads), rows, note=note, folded=True)


LEDGER_MOST = 2_000
"""Lines of the ledger and of reductions on the page; record.json has all."""


def methods(view: View) -> Iterator[Block]:
    """How the work was done, and the levels and limits that were set before it."""
    t, settings = view.texts, view.record["settings"]
    yield supplied(view, ("methods", "criteria"))
    per_cent = [(t(f"methods.{key}"), f"{100 * settings[key]:g} %") for key in
                ("confidence", "significance", "outlier", "power")]  # fmt: skip
    yield facts([*per_cent, (t("methods.factor"), t.word("factor", settings["variance_factor"]))])
    yield from table(view, "tolerances", ("of", "allowed", "by", "sure"),
                     [(t.word("subjects", of), one["allowed"], one["source"], t.word("sure", one["confidence"]))
                      for of, one in settings["tolerance"].items()])  # fmt: skip
    yield from table(view, "rejection", ("of", "allowed"),
                     [(t.word("rejection", of), text) for of, text in settings["rejection"].items()])  # fmt: skip


def table(view: View, key: str, heads: tuple[str, ...], rows: list[tuple[object, ...]]) -> Iterator[Block]:
    """A small table of texts; one sentence where it would have no row."""
    t = view.texts
    if not rows:
        yield Words((t(f"none.{key}"),))
        return
    kept = tuple(Row(tuple(text_cell(value) for value in row)) for row in rows)
    yield Grid(key, t(f"caption.{key}"), tuple(Column(t(f"head.{head}")) for head in heads), kept)


def control(view: View) -> Iterator[Block]:
    """Where control comes from, each mark against all others, and control as a whole."""
    t, record = view.texts, view.record
    yield supplied(view, ("control",))
    marks = record["control"]
    if not marks:
        yield Words((t("none.control"),))
        return
    sentences = record["control_report"]["sentences"]
    if sentences:
        yield Items(tuple(plain(one, 400) for one in sentences), t("control.lead"))
    roles = {one["station"]: one for one in record["stations"]}
    rows = tuple(_mark(view, one, roles.get(one["station"])) for one in marks)
    unit = view.shown.small
    heads = [("mark", "", False), ("coordinate", "", False), ("role", "", False), ("misfit", unit, True),
             ("sd", unit, True), ("verdict", "", False), ("in_words", "", False)]  # fmt: skip
    yield Grid("control-marks", t("caption.control"), columns(t, "head", heads), rows, sortable=True,
               filter_label=t("filter.control"), note=t("control.note"))  # fmt: skip


def _mark(view: View, one: Entry, station: Entry | None) -> Row:
    t, s = view.texts, view.shown
    role = "" if station is None else station["role_height" if one["part"] == "height" else "role"]
    misfit = one["misfit"]
    shown = "" if misfit is None else s.amount(misfit, one["sd"], "distance").rpartition(" ")[0]
    if misfit is not None and s.small == "mm" and abs(misfit) >= 1:
        shown = s.mark(f"{s.in_small(misfit):+.0f}")
    cells = (view.station_cell(one["station"]), Cell(t.word("axes", one["part"])), Cell(t.word("roles", role)),
             number_cell(shown, misfit), small(s, one["sd"]), verdict_cell(t, one["verdict"]),
             text_cell(one["sentence"]))  # fmt: skip
    return Row(cells, {"data-first": ""} if one["verdict"] == "disagrees" else {})
