"""Sample records, built by hand to section 4 of the format: figures are invented, only their shape matters."""

from __future__ import annotations

import copy
import math
from typing import Any

from adjust.book.schema import LAYERS
from adjust.caution import CAUTION

Record = dict[str, Any]
SEC = math.pi / 648000
MULTIPLIER_95 = math.sqrt(-2 * math.log(0.05))
"""Half axes of the 95 % ellipse over the standard ones: sqrt of chi-square with two degrees of freedom."""


def ellipse_of(see: float, snn: float, sen: float) -> dict[str, float]:
    """Standard ellipse from variances and covariance (m²)."""
    mean, diff = (see + snn) / 2, math.hypot((see - snn) / 2, sen)
    azimuth = 0.5 * math.atan2(2 * sen, snn - see) % math.pi
    return {"semi_major": math.sqrt(mean + diff), "semi_minor": math.sqrt(max(mean - diff, 0)), "azimuth": azimuth}


def station(name: str, plane: tuple[float, float] | None, height: float | None = None, role: str = "new",
            role_height: str = "new", sds_mm: tuple[float, float, float] | None = None,
            sd_height_mm: float | None = None) -> Record:  # fmt: skip
    """One station; ``sds_mm`` are sd east, sd north and correlation."""
    se, sn, rho = (sds_mm[0] / 1000, sds_mm[1] / 1000, sds_mm[2]) if sds_mm else (0.0, 0.0, 0.0)
    sh = None if height is None else (sd_height_mm or 0.0) / 1000
    e = ellipse_of(se * se, sn * sn, rho * se * sn) if plane else None
    big = {**{k: v * (1 if k == "azimuth" else MULTIPLIER_95) for k, v in e.items()}, "confidence": 0.95} if e else None
    see, snn, sen = (se * se, sn * sn, rho * se * sn) if plane else (None, None, None)
    shh = None if sh is None else sh * sh
    return {
        "station": name, "role": role, "role_height": role_height, "change_point": False,
        "east": plane[0] if plane else None, "north": plane[1] if plane else None, "height": height,
        "sd_east": se if plane else None, "sd_north": sn if plane else None, "sd_height": sh,
        "covariance": [[see, sen, None], [sen, snn, None], [None, None, shh]],
        "ellipse": e, "ellipse_confidence": big, "circle_confidence": 2.2 * max(se, sn) if plane else None,
    }  # fmt: skip


def observation(file: str, line: int, kind: str, value: float, residual: float, sd: float, booked: str = "",
                **where: str) -> Record:  # fmt: skip
    """One reading; ``where`` names its stations and set."""
    redundancy, statistic = 0.55, residual / (sd * math.sqrt(0.55))
    return {
        "id": f"{file}:{line}", "file": file, "line": line, "kind": kind, "part": where.get("part"),
        "at": where.get("at"), "from": where.get("from_"), "to": where.get("to"), "first": where.get("first"),
        "second": where.get("second"), "set": where.get("set_"), "booked": booked or f"{value:.3f}", "corrections": [],
        "group": "station-3", "observed": value, "adjusted": value + residual, "residual": residual, "sd": sd,
        "sd_adjusted": sd * math.sqrt(1 - redundancy), "redundancy": redundancy, "checked_share": redundancy,
        "statistic": statistic, "critical": 3.29, "smallest_detectable": 4.13 * sd / math.sqrt(redundancy),
        "external_effect": {"station": "P7", "part": "east", "value": 0.0021}, "suspect": abs(statistic) > 3.29,
    }  # fmt: skip


def record(title: str, stations: list[Record], observations: list[Record], what: str, **more: Any) -> Record:
    """A whole record with every key of the format; ``more`` replaces top-level keys."""
    figures = {
        "stage": "held", "converged": True, "iterations": 3, "observations": len(observations), "unknowns": 12,
        "datum_missing": 0, "degrees_of_freedom": len(observations) - 12, "weighted_square_sum": 20.1,
        "variance_factor": 1.06, "overall_test": {"interval": [0.47, 1.73], "verdict": "met"}, "datum": "held control",
    }  # fmt: skip
    return {
        "format": 1, "brasscap": "0.1.0", "versions": {}, "caution": CAUTION,
        "settings": {"confidence": 0.95, "significance": 0.05, "outlier": 0.001, "power": 0.8,
                     "variance_factor": "given", "datum": {"kind": "control"},
                     "drawing": {"paper": None, "orientation": "auto", "scale": None, "ellipses": None,
                                 "relative_ellipses": None, "layers": list(LAYERS)}},
        "units": {"length": "m", "angle": "dms", "decimal": ".", "axis_order": "east, north", "bearings": "azimuth"},
        "frame": {"kind": "local plane", "origin": None},
        "job": {"title": title, "client": "Tarnel Weir trustees", "surveyed": "2026-05-14",
                "inputs": [{"file": "job.toml", "sha256": "0" * 64}]},
        "solution": {**figures, "parts": [{"what": what, **figures}]}, "free": None,
        "stations": stations, "side_shots": [], "lines": [], "observations": observations, "parameters": [],
        "closures": [], "suspects": [], "expected_by_chance": 0.001 * len(observations), "unchecked": [], "control": [],
        "control_report": {"consistent": [], "released": [], "cannot_tell": [], "scale": None, "sentences": []},
        "cleared": [], "removals": [], "without_suspects": None, "inseparable": [], "chains": [], "budgets": [],
        "systematic": [], "systematic_by_chance": 0.0, "variance_components": [],
        "findings": [{"about": "all", "sentence": "Nothing stands out: the readings fit as stated."}],
        "ledger": [], "reductions": [], "left_out": [], "not_measured": [], "warnings": [],
        **more,
    }  # fmt: skip


PLANE = {
    "M1": (1000.0, 2000.0), "M2": (1412.37, 2031.85), "P1": (1102.418, 2151.267), "P2": (1241.905, 2202.334),
    "P3": (1385.122, 2168.71), "P4": (1175.55, 1931.204), "P7": (1318.9, 1902.66), "C9": (1246.11, 2064.5),
}  # fmt: skip


def bearing_of(one: str, other: str, places: dict[str, tuple[float, float]]) -> float:
    (e1, n1), (e2, n2) = places[one], places[other]
    return math.atan2(e2 - e1, n2 - n1) % (2 * math.pi)


def _plane_readings() -> list[Record]:
    sides = [("M1", "P1"), ("P1", "P2"), ("P2", "P3"), ("P3", "M2"), ("M1", "P4"), ("P4", "P7"), ("P7", "M2"),
             ("P1", "C9"), ("C9", "P4"), ("C9", "P3")]  # fmt: skip
    rows = []
    for i, (a, b) in enumerate(sides):
        d = math.dist(PLANE[a], PLANE[b])
        residual = -0.021 if (a, b) == ("P2", "P3") else 0.001 * math.sin(3 * i + 1)
        rows.append(observation("distances.csv", i + 2, "distance", d, residual, 0.002, from_=a, to=b))
    turns = [*sides, ("P2", "C9"), ("P7", "C9"), ("P2", "P4"), ("M2", "C9"), ("M1", "C9")]
    for i, (a, b) in enumerate(turns):
        bearing, residual = bearing_of(a, b, PLANE), 2 * SEC * math.sin(i + 1)
        rows.append(observation("directions.csv", i + 2, "direction", bearing, residual, 3 * SEC, "45 10 12.3",
                                at=a, to=b, set_="1"))  # fmt: skip
    angle = (bearing_of("P7", "M2", PLANE) - bearing_of("P7", "P4", PLANE)) % (2 * math.pi)
    rows.append(observation("angles.csv", 2, "angle", angle, 18 * SEC, 4 * SEC, booked="201 14 05", at="P7",
                            first="P4", second="M2"))  # fmt: skip
    return rows


def plane_record() -> Record:
    """Eight stations with suspects, an unchecked reading, check control and a reading left out."""
    stations = [
        station("M1", PLANE["M1"], role="held"), station("M2", PLANE["M2"], role="weighted", sds_mm=(1.2, 1.1, 0.1)),
        station("P1", PLANE["P1"], sds_mm=(2.1, 1.4, 0.3)), station("P2", PLANE["P2"], sds_mm=(3.3, 2.0, -0.5)),
        station("P3", PLANE["P3"], sds_mm=(1.8, 2.9, 0.2)), station("P4", PLANE["P4"], sds_mm=(1.5, 1.9, -0.4)),
        station("P7", PLANE["P7"], sds_mm=(2.4, 4.6, 0.6)),
        station("C9", PLANE["C9"], role="check", sds_mm=(1.1, 1.2, 0.0)),
    ]  # fmt: skip
    made = record("Tarnel Weir: access road control", stations, _plane_readings(), "plane")
    made["suspects"] = [
        {"observation": "distances.csv:4", "estimated_blunder": 0.0382, "sd": 0.0027, "statistic": 14.2,
         "likely_causes": [{"slip": "digits-swapped", "sentence": "147.111 would fit: two digits changed places.",
                            "would_read": "147.111", "support": 0.97, "place": "distances.csv:4"}],
         "cannot_be_told_from": [], "at_job_level": True},
        {"observation": "angles.csv:2", "estimated_blunder": -33 * SEC, "sd": 5.4 * SEC, "statistic": -6.1,
         "likely_causes": [], "cannot_be_told_from": [
             {"observation": "directions.csv:8", "correlation": 0.95, "chance_of_wrong": 0.1}],
         "at_job_level": True},
    ]  # fmt: skip
    made["unchecked"] = [{"observation": "distances.csv:7", "why": "P7 is held by one distance only"}]
    made["control"] = [
        {"station": "C9", "part": "east", "misfit": 0.0012, "sd": 0.0016, "verdict": "agrees",
         "sentence": "C9 agrees with the readings in east (1.2 mm)."},
        {"station": "C9", "part": "north", "misfit": 0.0131, "sd": 0.0017, "verdict": "disagrees",
         "sentence": "C9 stands 13.1 mm north of its known place."},
    ]  # fmt: skip
    made["left_out"] = [{"observation": "distances.csv:12", "file": "distances.csv", "line": 12, "kind": "distance",
                         "reason": "tripod was knocked", "stations": ["P2", "C9"]}]  # fmt: skip
    made["warnings"] = ["TP1 and TP01 are different stations; booked_names can join them."]
    return made


def level_record() -> Record:
    """Two bench marks and five points in two loops; no plane coordinates."""
    heights = {"BM1": 212.4031, "TP1": 214.0172, "TP2": 216.9925, "TP3": 215.318, "TP4": 213.2207, "TP5": 218.4416,
               "BM2": 217.105}  # fmt: skip
    sds = {"TP1": 1.4, "TP2": 2.1, "TP3": 1.9, "TP4": 1.6, "TP5": 2.6}
    stations = [
        station(name, None, h, "held" if name in ("BM1", "BM2") else "new", "held" if name in ("BM1", "BM2") else "new",
                sd_height_mm=sds.get(name)) for name, h in heights.items()
    ]  # fmt: skip
    sides = [("BM1", "TP1"), ("TP1", "TP2"), ("TP2", "BM2"), ("TP2", "TP3"), ("TP3", "TP4"), ("TP4", "BM1"),
             ("TP3", "TP5"), ("TP5", "BM2")]  # fmt: skip
    rows = [
        observation("levelled.csv", i + 2, "levelled", heights[b] - heights[a], 0.0007 * math.sin(2 * i + 1), 0.0012,
                    from_=a, to=b) for i, (a, b) in enumerate(sides)
    ]  # fmt: skip
    made = record("Tarnel Weir: levels of the access road", stations, rows, "heights")
    for block in (made["solution"], *made["solution"]["parts"]):
        block.update(unknowns=5, degrees_of_freedom=3)
    return made


def bare_record() -> Record:
    """The least a record can hold: two stations, one distance, nothing tested, no client or date."""
    stations = [station("A", (0.0, 0.0), role="held"), station("B", (0.0, 50.0), role="held")]
    rows = [observation("distances.csv", 2, "distance", 50.0, 0.0, 0.002, from_="A", to="B")]
    rows[0].update(statistic=None, critical=None, smallest_detectable=None, external_effect=None, suspect=False)
    made = record("Two marks", stations, rows, "plane")
    made["job"].update(client="", surveyed="")
    made["expected_by_chance"] = None
    for block in (made["solution"], *made["solution"]["parts"]):
        block.update(unknowns=0, degrees_of_freedom=0, variance_factor=None,
                     overall_test={"interval": None, "verdict": "cannot be tested"})  # fmt: skip
    return made


HOSTILE = ("$x_1^2$", "_under_", "<script>alert(1)</script>", "A&B", "\"quoted\" 'name'", "=1+1", "עברית",
           "N" * 200, "a,b;c", "#7", "測点")  # fmt: skip


def hostile_record() -> Record:
    """The plane net with station names made to break whatever prints them."""
    made = copy.deepcopy(plane_record())
    new = dict(zip(PLANE, HOSTILE, strict=False))
    for one in made["stations"]:
        one["station"] = new[one["station"]]
    for one in made["observations"]:
        for key in ("at", "from", "to", "first", "second"):
            one[key] = new.get(one[key], one[key])
    made["job"]["title"] = "$\\frac{1}{$ <b>& " + "title " * 60
    made["job"]["client"] = "& sons <i>"
    return made


def grid_record(side: int) -> Record:
    """A braced grid of side² stations, for the layout of large networks."""
    places = {f"G{r}.{c}": (40.0 * c + 7 * math.sin(3 * r + c), 30.0 * r + 6 * math.cos(r + 2 * c))
              for r in range(side) for c in range(side)}  # fmt: skip
    stations = [station(name, place, role="held" if i == 0 else "new",
                        sds_mm=None if i == 0 else (1 + 0.03 * (i % 50), 1.5 + 0.02 * (i % 31), 0.3))
                for i, (name, place) in enumerate(places.items())]  # fmt: skip
    rows = []
    for r in range(side):
        for c in range(side):
            for dr, dc in ((0, 1), (1, 0), (1, 1)):
                a, b = f"G{r}.{c}", f"G{r + dr}.{c + dc}"
                if b in places:
                    rows.append(observation("distances.csv", len(rows) + 2, "distance", math.dist(places[a], places[b]),
                                            0.0005, 0.002, from_=a, to=b))  # fmt: skip
    return record("Grid", stations, rows, "plane")
