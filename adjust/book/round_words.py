"""What the reduction of a station's rounds gave, entry by entry, for the record."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import TYPE_CHECKING

from adjust.allowances import Allowance
from adjust.book import faces
from adjust.book.reductions import Reduction

if TYPE_CHECKING:
    from adjust.book.rounds import Pointing, Station

DIMENSION = {"direction": "angle", "zenith": "angle", "distance": "length"}
WHAT = {"direction": "set mean of directions", "zenith": "set mean of zenith angles", "distance": "mean of distances"}


def reductions_of(station: Station, instrument: dict[str, float], limits: Mapping[str, Allowance]) -> list[Reduction]:
    """Face means pointing by pointing, means of the sets by target, collimation, index, horizon closures.

    ``instrument`` holds its figures for one direction, zenith angle and distance, ``limits`` those of [rejection].
    """
    c = [p.two_c for p in station.pointings if p.two_c is not None]
    mean_c = math.fsum(c) / len(c) if c else 0.0
    return [
        *(_face_mean(station, p, mean_c, limits.get("collimation")) for p in station.pointings),
        *_means(station, instrument),
        *_instrument_errors(station),
        *_closures(station, limits.get("horizon")),
    ]


def _of(p: Pointing) -> str:
    return f"{p.at}{f' set {p.set}' if p.set else ''} to {p.to}"


def _face_mean(station: Station, p: Pointing, mean_c: float, limit: Allowance | None) -> Reduction:
    sentence = ""
    if p.one_face:
        corrected = any(x.two_c is not None or x.index is not None for x in station.pointings)
        how = "corrected with the mean of the other pointings" if corrected else "with collimation and index in it"
        sentence = f"{_of(p)}: read in one face only, {how}; it counts half."
    values = {"direction": p.direction, "two_c": p.two_c, "zenith_angle": p.zenith, "index": p.index}
    verdict = "" if p.two_c is None else _verdict(p.two_c - mean_c, limit)
    return Reduction("face mean", _of(p), station.file, p.lines, values, "angle", verdict, sentence)


def _means(station: Station, instrument: dict[str, float]) -> list[Reduction]:
    """One entry a target and kind: mean, spread of the sets and both standard deviations of the mean."""
    out = []
    for key, found in station.means.items():
        first = next(iter(found.means.values()))
        for target, mean in found.means.items():
            mine = [p for p in station.pointings if p.to == target and (p.set, target) in found.residuals]
            residuals = [found.residuals[p.set, target] for p in mine]
            pairs = math.fsum(p.behind(key) for p in mine)
            sd = instrument.get(key)
            values = {
                "mean": (mean - first) % (2 * math.pi) if key == "direction" else mean,
                "sets": float(len(mine)),
                "spread": max(residuals) - min(residuals) if len(residuals) > 1 else None,
                "sd_instrument": None if sd is None else sd / math.sqrt(pairs),
                "sd_spread": None if found.sd is None else found.sd / math.sqrt(len(mine)),
            }
            of = f"{station.at} to {target}"
            out.append(Reduction(WHAT[key], of, station.file, tuple(x for p in mine for x in p.lines), values,
                                 DIMENSION[key]))  # fmt: skip
    return out


def _instrument_errors(station: Station) -> list[Reduction]:
    """Collimation and index of the station: mean, spread, and their trend through the book."""
    out = []
    for what, key in (("collimation (2C)", "two_c"), ("index", "index")):
        found = [(p, x) for p in station.pointings if (x := getattr(p, key)) is not None]
        if not found:
            continue
        values = [x for _, x in found]
        slope, sd = faces.trend(values)
        sentence = ""
        if math.isfinite(sd) and sd > 0 and abs(slope) > CLEAR * sd:
            sentence = (
                f"{station.at}: the {what} drifts through the book: let the instrument take the air's temperature."
            )
        entries = {"mean": math.fsum(values) / len(values), "spread": faces.spread(values), "trend": slope,
                   "sd_trend": sd if math.isfinite(sd) else None}  # fmt: skip
        lines = tuple(x for p, _ in found for x in p.lines)
        out.append(Reduction(what, station.at, station.file, lines, entries, "angle", sentence=sentence))
    return out


CLEAR = 5.0
"""Standard deviations beyond which a trend or a difference is worth a sentence: with some tens of pointings Student's
factor of one in a thousand is below it."""


def _verdict(size: float, limit: Allowance | None) -> str:
    """Met or not met by a declared limit, '' where none was declared."""
    if limit is None:
        return ""
    return "met" if abs(size) <= (limit.allowable() or 0.0) else "not met"


def _closures(station: Station, limit: Allowance | None) -> list[Reduction]:
    return [
        Reduction(
            "horizon closure",
            _of(p),
            station.file,
            p.lines,
            {"closure": p.closure},
            "angle",
            _verdict(p.closure, limit),
        )
        for p in station.pointings
        if p.closure is not None
    ]
