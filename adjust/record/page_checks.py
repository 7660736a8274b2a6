"""Parts 8 and 9 of the page: closures; the readings alone, their weights, what does not fit and what nothing checks."""

from __future__ import annotations

from collections.abc import Iterator

from adjust.record.findings import likeliest
from adjust.record.page_blocks import (
    Block,
    Cell,
    Column,
    Facts,
    Grid,
    Heading,
    Items,
    Row,
    Words,
    columns,
    number_cell,
    text_cell,
)
from adjust.record.page_view import ROWS_MOST, View
from adjust.record.page_words import closure_sizes, place_of, pure, some, verdict_cell, way
from adjust.record.shown import Entry, plain, reading_in_words

ORDER = ("not met", "cannot be tested", "met")


def closures(view: View) -> Iterator[Block]:
    """Every closure with its verdict and where to look; simple balances for comparison."""
    t, entries = view.texts, view.record["closures"]
    if not entries:
        yield Words((t("none.closures"),))
        return
    yield Words((closing_words(view),))
    worst = sorted(range(len(entries)), key=lambda i: (ORDER.index(entries[i]["verdict"]), i))
    rows = tuple(_closure(view, i) for i in worst)
    heads = [("closure", "", False), ("stations", "", False), ("length", view.shown.length, True),
             ("misclosure", "", False), ("allowable", "", False), ("ratio", "1 : x", True), ("verdict", "", False),
             ("look", "", False), ("rule", "", False)]  # fmt: skip
    yield Grid("closures", t("caption.closures"), columns(t, "head", heads), rows, sortable=True,
               filter_label=t("filter.closures"))  # fmt: skip
    yield from _balances(view)


def closing_words(view: View) -> str:
    """'11 of 13 closures met, 1 not met, 1 cannot be tested.'"""
    verdicts = [one["verdict"] for one in view.record["closures"]]
    t = view.texts
    said = [t("closures.met", n=verdicts.count("met"), all=len(verdicts))]
    said += [t(f"closures.{key}", n=verdicts.count(word)) for key, word in
             (("not_met", "not met"), ("open", "cannot be tested")) if word in verdicts]  # fmt: skip
    return ", ".join(said) + "."


def _closure(view: View, i: int) -> Row:
    t, s = view.texts, view.shown
    one = view.record["closures"][i]
    look = " ".join(
        [plain(one["sentence"], 300)]
        + [
            t("closures.cause", cause=plain(c["sentence"], 160), place=plain(c["place"], 60))
            for c in one["likely_causes"]
        ]
    )
    length = one["length"]
    cells = (
        Cell(t.word("closing", one["kind"])), Cell(way(one["stations"]), kind="name"),
        number_cell("" if length is None else s.mark(f"{s.in_length(length):.1f}"), length),
        text_cell(closure_sizes(t, s, one["misclosure"], one["sd"])),
        text_cell(closure_sizes(t, s, one["allowable"], {}).replace("+", "± ")),
        number_cell("" if one["ratio"] is None else f"{one['ratio']:.0f}", one["ratio"]),
        verdict_cell(t, one["verdict"]), text_cell(look.strip()), text_cell(one["rule"]),
    )  # fmt: skip
    first = {"data-first": ""} if one["verdict"] == "not met" else {}
    return Row(cells, {"id": f"c{i}", "data-closure": str(i)} | first, "suspect" if first else "")


def _balances(view: View) -> Iterator[Block]:
    t, entries = view.texts, view.record["balances"]
    if not entries:
        return
    rows = tuple(
        Row((text_cell(one["method"]), Cell(way(one["stations"]), kind="name"),
             number_cell(view.shown.small_sd(one["largest_difference"]), one["largest_difference"]),
             view.station_cell(one["at"])))
        for one in entries
    )  # fmt: skip
    heads = [("method", "", False), ("stations", "", False), ("difference", view.shown.small, True), ("at", "", False)]
    yield Grid("balances", t("caption.balances"), columns(t, "head", heads), rows, folded=True)


def free(view: View) -> Iterator[Block]:
    """The free stage, the scale of the stated deviations, suspects, and what the readings can check."""
    t, record = view.texts, view.record
    if record["free"]:
        yield Words((t("free.lead"),))
        yield figures(view, record["free"])
        yield from part_table(view, record["free"], "free-parts")
        yield from _similarity(view, record["free"]["similarity"])
    else:
        yield Words((t("free.none"),))
    yield Heading(t("free.weights"))
    yield from _components(view)
    yield from _common(view)
    yield Heading(t("free.suspects"))
    yield from _suspects(view)
    yield Heading(t("free.reliability"))
    yield from _unchecked(view)


def figures(view: View, block: Entry) -> Facts:
    """Counts, variance factor and overall test of a stage."""
    t, s, test = view.texts, view.shown, block["overall_test"]
    factor = block["variance_factor"]
    between = ""
    if test["interval"]:
        low, high = (s.mark(f"{x:.2f}") for x in test["interval"])
        between = t("figures.between", low=low, high=high)
    return Facts((
        (t("figures.datum"), (plain(block["datum"], 300),)),
        (t("figures.counts"), (t("figures.numbers", observations=block["observations"], unknowns=block["unknowns"],
                                 missing=block["datum_missing"], conditions=block["conditions"],
                                 degrees=block["degrees_of_freedom"]),)),
        (t("figures.factor"), (s.mark(f"{factor:.2f}") + between if factor is not None else t("figures.no_factor"),)),
        (t("figures.test"), (t.word("overall", test["verdict"]),)),
    ))  # fmt: skip


def part_table(view: View, block: Entry, key: str) -> Iterator[Block]:
    """The figures of each uncoupled part where there are several."""
    t, s, parts = view.texts, view.shown, block["parts"]
    if len(parts) < 2:
        return
    rows = tuple(
        Row((text_cell(one["what"]), number_cell(str(one["observations"]), one["observations"]),
             number_cell(str(one["unknowns"]), one["unknowns"]),
             number_cell(str(one["degrees_of_freedom"]), one["degrees_of_freedom"]), pure(s, one["variance_factor"]),
             verdict_cell(t, one["overall_test"]["verdict"]), text_cell(one["datum"])))
        for one in parts[:ROWS_MOST]
    )  # fmt: skip
    heads = [("part", "", False), ("readings", "", True), ("unknowns", "", True), ("degrees", "", True),
             ("factor", "", True), ("verdict", "", False), ("datum", "", False)]  # fmt: skip
    yield Grid(key, t("caption.parts"), columns(t, "head", heads), rows)


def _similarity(view: View, fit: Entry | None) -> Iterator[Block]:
    t, s = view.texts, view.shown
    if not fit or fit["sd_scale_ppm"] is None:
        return
    yield Words((t("free.fit", marks=fit["marks"], scale=s.mark(f"{fit['scale_ppm']:+.1f}"),
                   sd=s.mark(f"{fit['sd_scale_ppm']:.1f}")),))  # fmt: skip


def _components(view: View) -> Iterator[Block]:
    """Sigma by group."""
    t, s, entries = view.texts, view.shown, view.record["variance_components"]
    if not entries:
        yield Words((t("none.components"),))
        return
    rows = []
    for one in entries:
        interval = " – ".join(s.mark(f"{x:.2f}") for x in one["interval"]) if one["interval"] else ""
        estimated = one["sd"] is not None
        cells = (Cell(t.word("grouped", one["by"])), text_cell(one["group"]),
                 number_cell(str(one["readings"]), one["readings"]), pure(s, one["redundancy"], 1),
                 pure(s, one["sd_factor"] if estimated else None), number_cell(interval),
                 verdict_cell(t, one["verdict"]), text_cell("; ".join(one["paste"])))  # fmt: skip
        rows.append(Row(cells))
    heads = [("by_group", "", False), ("group", "", False), ("readings", "", True), ("redundancy", "", True),
             ("sd_factor", "", True), ("interval", view.confidence, True), ("verdict", "", False),
             ("paste", "", False)]  # fmt: skip
    yield Grid("components", t("caption.components"), columns(t, "head", heads), tuple(rows), note=t("free.paste"))


def _common(view: View) -> Iterator[Block]:
    """Effects common to many readings, tested one by one."""
    entries = view.record["systematic"]
    if entries:
        grave = sorted(entries, key=lambda one: one["verdict"] != "significant")
        yield Items(tuple(plain(one["sentence"], 300) for one in grave[:20]), view.texts("free.common"))


def _suspects(view: View) -> Iterator[Block]:
    t, record = view.texts, view.record
    chance = view.shown.mark(f"{record['expected_by_chance']:.2g}") if record["expected_by_chance"] is not None else "–"
    if record["suspects"]:
        rows = tuple(_suspect(view, one) for one in record["suspects"][:ROWS_MOST])
        keys = ("reading", "line", "what", "blunder", "statistic", "level", "cause", "confusable")
        heads = [(key, "", key == "statistic") for key in keys]
        yield Grid("suspects", t("caption.suspects"), columns(t, "head", heads), rows, note=t("free.hint"))
        yield Words((t("free.chance", n=chance),))
    else:
        yield Words((t("none.suspects", n=chance),))
    yield from _search(view)


def _suspect(view: View, one: Entry) -> Row:
    t, s = view.texts, view.shown
    i = view.readings.get(one["observation"])
    reading = None if i is None else view.record["observations"][i]
    size = "" if reading is None else s.too_much(one["estimated_blunder"], one["sd"], reading["kind"])
    if reading is not None and one["sd"]:
        size += f", {s.uncertainty(one['sd'], reading['kind'])}"
    alike = some(o["observation"] for o in one["cannot_be_told_from"])
    level = Cell(t("free.job_level"), mark="bad") if one["at_job_level"] else Cell(t("free.reading_level"), mark="open")
    cells = (view.reading_cell(one["observation"]), Cell("" if reading is None else place_of(reading), kind="code"),
             Cell("" if reading is None else reading_in_words(reading), kind="name"), text_cell(size),
             pure(s, one["statistic"], 1), level, text_cell(likeliest(one)), text_cell(alike))  # fmt: skip
    return Row(cells, classes="suspect" if one["at_job_level"] else "")


def _search(view: View) -> Iterator[Block]:
    """The steps of the search for several blunders, what they cleared, and the fit without them."""
    t, s, record = view.texts, view.shown, view.record
    without = record["without_suspects"]
    if without and without["variance_factor"] is not None:
        factor = s.mark(f"{without['variance_factor']:.2f}")
        yield Words((t("free.without", n=len(without["observations"]), factor=factor,
                       verdict=t.word("verdict", without["overall_test"]["verdict"])),))  # fmt: skip
    if record["cleared"]:
        yield Words((t("free.cleared", names=some(one["observation"] for one in record["cleared"])),))
    if record["removals"]:
        rows = tuple(
            Row((text_cell(one["action"]), Cell(some(one["observations"]), kind="name"), pure(s, one["statistic"], 1),
                 pure(s, one["critical"]), pure(s, one["before"]["variance_factor"]),
                 pure(s, one["after"]["variance_factor"])))
            for one in record["removals"]
        )  # fmt: skip
        heads = [("step", "", False), ("readings", "", False), ("statistic", "", True), ("limit", "", True),
                 ("factor_before", "", True), ("factor_after", "", True)]  # fmt: skip
        yield Grid("removals", t("caption.removals"), columns(t, "head", heads), rows, folded=True)


def _unchecked(view: View) -> Iterator[Block]:
    t, record = view.texts, view.record
    if record["unchecked"]:
        rows = tuple(
            Row((view.reading_cell(one["observation"]), text_cell(one["why"])))
            for one in record["unchecked"][:ROWS_MOST]
        )
        heads = tuple(Column(t(f"head.{h}")) for h in ("reading", "why"))
        yield Grid("unchecked", t("caption.unchecked"), heads, rows, note=t("free.unchecked_note"))
    else:
        yield Words((t("none.unchecked"),))
    chained = [plain(one["sentence"], 300) for one in record["chains"]]
    if chained:
        yield Items(tuple(chained[:20]), t("free.chains", n=len(chained)))
    if record["inseparable"]:
        yield Words((t.counted("free.inseparable", len(record["inseparable"])),))
