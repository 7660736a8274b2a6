"""The summary of the page: half a page of plain words for a client."""

from __future__ import annotations

import statistics
from collections.abc import Iterator
from dataclasses import dataclass

from adjust.record.page_checks import closing_words
from adjust.record.page_view import View
from adjust.record.page_words import VERDICT_MARKS, place_of
from adjust.record.shown import Entry, plain, reading_in_words

TOLD = 4
"""Findings and warnings told here; the parts below have all."""


@dataclass(frozen=True)
class Tile:
    """One verdict: what was looked at, the word, and its class."""

    label: str
    word: str
    mark: str
    link: str


@dataclass(frozen=True)
class Summary:
    """What was surveyed, how sure it is, what stands out, and what to do, in sentences."""

    surveyed: tuple[str, ...]
    sure: tuple[str, ...]
    findings: tuple[str, ...]
    warnings: tuple[str, ...]
    todo: tuple[str, ...]
    tiles: tuple[Tile, ...]


def summary(view: View) -> Summary:
    """The summary of a record."""
    record, t = view.record, view.texts
    told = [plain(one["sentence"], 500) for one in record["findings"]]
    findings = told[:TOLD] + ([t("summary.more", n=len(told) - TOLD)] if len(told) > TOLD else [])
    warned = [plain(one, 300) for one in record["warnings"]]
    warnings = warned[:TOLD] + ([t("summary.more_warnings", n=len(warned) - TOLD)] if len(warned) > TOLD else [])
    return Summary(tuple(_surveyed(view)), tuple(_sure(view)), tuple(findings), tuple(warnings), tuple(_todo(view)),
                   tuple(_tiles(view)))  # fmt: skip


def _surveyed(view: View) -> Iterator[str]:
    t, record, job = view.texts, view.record, view.record["job"]
    new = [one for one in record["stations"] if "new" in (one["role"], one["role_height"]) and not one["change_point"]]
    known = [one for one in record["stations"] if {one["role"], one["role_height"]} & {"held", "weighted"}]
    yield t("summary.counts", new=t.counted("summary.new", len(new)), known=t.counted("summary.known", len(known)),
            readings=t.counted("summary.readings", record["solution"]["observations"]))  # fmt: skip
    if view.said("purpose"):
        yield t("summary.purpose", purpose=plain(view.said("purpose"), 300))
    said = (("place", view.said("place")), ("surveyed", job["surveyed"]), ("client", job["client"]))
    who = ", ".join(t(f"summary.{key}", text=plain(text, 120)) for key, text in said if text)
    if who:
        yield f"{who[:1].upper()}{who[1:]}."


def _sure(view: View) -> Iterator[str]:
    t, record, s = view.texts, view.record, view.shown
    verdicts = {part["overall_test"]["verdict"] for part in record["solution"]["parts"]}
    worst = next((word for word in ("not met", "cannot be tested") if word in verdicts), "met")
    degrees = record["solution"]["degrees_of_freedom"]
    yield t.word("summary_fit", worst).format(spare=t.counted("summary.spare", degrees))
    new = [one for one in record["stations"] if not one["change_point"]]
    plane = [one for one in new if one["ellipse_confidence"] and one["ellipse_confidence"]["semi_major"]]
    if plane:
        sizes = [one["ellipse_confidence"]["semi_major"] for one in plane]
        least = max(plane, key=lambda one: float(one["ellipse_confidence"]["semi_major"]))
        yield t("summary.position", confidence=view.confidence, half=s.small_sd(statistics.median_high(sizes)),
                most=s.small_sd(max(sizes)), unit=s.small, station=plain(least["station"], 40))  # fmt: skip
    heights = [(view.interval(one["sd_height"]), one) for one in new if one["sd_height"]]
    sized = [(size, one) for size, one in heights if size]
    if sized:
        size, least = max(sized, key=lambda pair: pair[0])
        half = statistics.median_high(size for size, _ in sized)
        yield t("summary.height", confidence=view.confidence, half=s.small_sd(half), most=s.small_sd(size),
                unit=s.small, station=plain(least["station"], 40))  # fmt: skip
    yield t("summary.relative_to")


def _todo(view: View) -> Iterator[str]:
    """What to do, the gravest first."""
    t, record = view.texts, view.record
    grave = [one for one in record["suspects"] if one["at_job_level"]]
    if grave:
        yield t.counted("todo.suspects", len(grave), place=_place(view, grave[0]))
    elif record["suspects"]:
        yield t("todo.milder", place=_place(view, record["suspects"][0]))
    if any(one["verdict"] == "not met" for one in record["closures"]):
        yield t("todo.closures")
    if any(one["verdict"] == "disagrees" for one in record["control"]):
        yield t("todo.control")
    if any(part["overall_test"]["verdict"] == "not met" for part in record["solution"]["parts"]) and not grave:
        yield t("todo.scatter")
    if record["unchecked"]:
        yield t("todo.unchecked")
    yield t("todo.sign")


def _place(view: View, suspect: Entry) -> str:
    i = view.readings.get(suspect["observation"])
    if i is None:
        return plain(suspect["observation"], 60)
    one = view.record["observations"][i]
    return f"{place_of(one)} ({reading_in_words(one)})"


def _tiles(view: View) -> Iterator[Tile]:
    t, record = view.texts, view.record
    verdicts = [part["overall_test"]["verdict"] for part in record["solution"]["parts"]]
    worst = next((word for word in ("not met", "cannot be tested") if word in verdicts), "met")
    yield Tile(t("tiles.overall"), t.word("verdict", worst), VERDICT_MARKS.get(worst, "open"), "held")
    bad = any(one["verdict"] == "not met" for one in record["closures"])
    tested = any(one["verdict"] == "met" for one in record["closures"])
    word = closing_words(view).rstrip(".") if record["closures"] else t("tiles.none")
    yield Tile(t("tiles.closures"), word, "bad" if bad else "good" if tested else "open", "closures")
    grave = any(one["at_job_level"] for one in record["suspects"])
    n = len(record["suspects"])
    yield Tile(t("tiles.suspects"), str(n) if n else t("tiles.no"), "bad" if grave else "open" if n else "good", "free")
    n = len(record["unchecked"])
    yield Tile(t("tiles.unchecked"), str(n) if n else t("tiles.no"), "open" if n else "good", "free")
    yield Tile(t("tiles.control"), *_control(view), "control")


def _control(view: View) -> tuple[str, str]:
    t, verdicts = view.texts, [one["verdict"] for one in view.record["control"]]
    for word, mark in (("disagrees", "bad"), ("agrees", "good")):
        if word in verdicts:
            return t.word("verdict", word), mark
    return (t.word("verdict", "cannot be judged") if verdicts else t("tiles.none")), "open"
