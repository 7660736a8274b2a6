"""The record as one dictionary, every key of it always present (see adjust.record.keys for the list)."""

from __future__ import annotations

import platform
from typing import Any

import numpy as np
import scipy

import adjust
from adjust.atmosphere import Air
from adjust.book.level_keys import LEVEL_KINDS
from adjust.book.schema import RECORD as PARTICULARS
from adjust.book.settings import Table
from adjust.caution import CAUTION
from adjust.graph.cycles import METHOD
from adjust.judge.assess import Judgement
from adjust.judge.overall import OverallTest
from adjust.network import ROLES
from adjust.record.closing import (
    balance_entries,
    closure_entries,
    ledger_entries,
    reduction_entries,
    tolerance_settings,
)
from adjust.record.findings import findings
from adjust.record.numbers import angle, coordinate, number
from adjust.record.observations import left_out, observation_entries, suspect_entries, unchecked_entries
from adjust.record.paper import drawing_warnings
from adjust.record.places import line_entries, mark_entries, parameter_entries, side_shot_entries, station_entries
from adjust.record.quality import add_words, chain_entries, report_entry, weight_entries
from adjust.record.search import effect_entries, overall_entry, search_entries
from adjust.solver.defects import thin_of
from adjust.solver.solution import PartResult, Solution
from adjust.solver.threads import one_thread

FORMAT = 1
ROWS_MOST = 20_000
"""Above this many scalar rows the JSON holds suspects, worst and unchecked readings only; the CSV files hold all."""
WORST = 200


def build(judgement: Judgement) -> dict[str, Any]:
    """The complete record of a judged solution."""
    with one_thread():
        return _record(judgement)


def _record(judgement: Judgement) -> dict[str, Any]:
    record = _sections(judgement)
    record["findings"] = findings(record)
    record["warnings"] += drawing_warnings(record)
    return record


def _sections(judgement: Judgement) -> dict[str, Any]:
    solution = judgement.solution
    return {
        "format": FORMAT,
        "brasscap": adjust.__version__,
        "versions": {"python": platform.python_version(), "numpy": np.__version__, "scipy": scipy.__version__},
        "caution": CAUTION,
        "complete": True,
        "job": _job(solution),
        "particulars": {f.name: solution.job.settings.particulars.get(f.name) for f in PARTICULARS},
        "settings": _settings(solution),
        "units": _units(solution),
        "frame": _frame(solution),
        "solution": _block(solution, judgement.overall),
        "free": _free(judgement),
        "stations": station_entries(judgement),
        "side_shots": side_shot_entries(judgement),
        "lines": line_entries(judgement),
        "observations": add_words(judgement, observation_entries(judgement)),
        "parameters": parameter_entries(judgement),
        "closures": closure_entries(judgement),
        "balances": balance_entries(judgement),
        "suspects": suspect_entries(judgement),
        **search_entries(judgement),
        "expected_by_chance": number(judgement.expected_by_chance),
        "unchecked": unchecked_entries(judgement),
        "chains": chain_entries(judgement),
        "control": mark_entries(judgement),
        "control_report": report_entry(judgement),
        **weight_entries(judgement),
        **effect_entries(judgement),
        "ledger": ledger_entries(judgement),
        "reductions": reduction_entries(solution.job),
        "left_out": [left_out(aside, with_reason=True) for aside in solution.job.left_out],
        "not_measured": [left_out(aside, with_reason=False) for aside in solution.job.planned],
        "warnings": _warnings(judgement),
    }


def trimmed(record: dict[str, Any]) -> dict[str, Any]:
    """The record for JSON: above ROWS_MOST rows only suspects, unchecked and the worst observations and lines."""
    if len(record["observations"]) <= ROWS_MOST:
        return record
    named = {s["observation"] for s in record["suspects"]} | {u["observation"] for u in record["unchecked"]}
    by_statistic = sorted(record["observations"], key=lambda o: -abs(o["statistic"] or 0.0))
    named |= {o["id"] for o in by_statistic[:WORST]}
    by_size = sorted(
        record["lines"], key=lambda ln: -(ln["ellipse"] or {}).get("semi_major", ln["sd_height_difference"] or 0.0)
    )
    worst = {(ln["from"], ln["to"]) for ln in by_size[:WORST]}
    return {
        **record,
        "complete": False,
        "observations": [o for o in record["observations"] if o["id"] in named],
        "lines": [ln for ln in record["lines"] if (ln["from"], ln["to"]) in worst],
    }


def _job(solution: Solution) -> dict[str, Any]:
    settings = solution.job.settings
    return {
        "title": settings.title,
        "client": settings.client,
        "surveyed": settings.surveyed,
        "inputs": [{"file": file, "sha256": digest} for file, digest in solution.job.inputs],
    }


def _settings(solution: Solution) -> dict[str, Any]:
    settings = solution.job.settings
    return {
        **settings.tests.__dict__,
        "frame": {"plane_height": number(settings.frame.plane_height), "refraction": settings.frame.refraction.text},
        "datum": {"kind": settings.datum_kind or None, "stations": list(settings.datum_stations)},
        "instruments": {
            name: {key: model.text for key, model in keys.items()} for name, keys in settings.instruments.items()
        },
        "without_suspects": solution.job.without_suspects,
        "loops": METHOD,
        "tolerance": tolerance_settings(solution.job),
        "rejection": {key: limit.text for key, limit in settings.rejection.items()},
        "weather": _weather(settings.weather),
        "reflectors": {name: coordinate(constant) for name, constant in settings.reflectors.items()},
        "distance_meters": {
            name: {"constant": coordinate(m.constant), "scale_ppm": number(m.scale_ppm),
                   "wavelength_um": number(m.wavelength_um),
                   "zero_weather": _weather(m.zero_weather) if m.zero_weather else None}
            for name, m in settings.meters.items()
        },
        "books": [
            {"file": t.file, "kind": t.kind, "instrument": t.instrument or None, "sd_factor": number(t.sd_factor),
             "surface": t.surface or None, "reflector": t.reflector or None,
             "applied": None if t.applied is None else list(t.applied), "weather": _weather(t.weather),
             "collimation": t.level.collimation or None, "curvature": _curvature(t),
             "units": {"length": t.units.length, "angle": t.units.angle, "decimal": t.units.decimal}}
            for t in solution.job.tables
        ],
        "drawing": _drawing(solution),
    }  # fmt: skip


def _curvature(table: Table) -> str | None:
    """Whether the sights of a level book are corrected for curvature; None of other tables."""
    if table.kind not in LEVEL_KINDS:
        return None
    return "with-refraction" if table.level.curvature else "none"


def _weather(air: Air) -> dict[str, float | None]:
    """Weather in degrees C, hPa, per cent, or the ppm that stands for it."""
    return {key: number(value) for key, value in air.__dict__.items()}


def _drawing(solution: Solution) -> dict[str, Any]:
    one = solution.job.settings.drawing
    return {"paper": one.paper or None, "orientation": one.orientation, "scale": number(one.scale),
            "ellipses": number(one.ellipses), "relative_ellipses": number(one.relative_ellipses),
            "layers": list(one.layers)}  # fmt: skip


def _units(solution: Solution) -> dict[str, Any]:
    return dict(solution.job.settings.units.__dict__)


def _frame(solution: Solution) -> dict[str, Any]:
    origin = "; ".join(solution.assumed) or None
    frame = solution.design.frame
    return {"kind": frame.name, "origin": origin, "plane_height": coordinate(frame.plane_height),
            "radius": coordinate(frame.radius)}  # fmt: skip


def _free(judgement: Judgement) -> dict[str, Any] | None:
    """The block of the free stage with its fit on the control, or None."""
    free, fit = judgement.solution.free, judgement.similarity
    if free is None:
        return None
    similarity = None
    if fit:
        similarity = {
            "marks": fit.marks,
            "shift_east": coordinate(fit.shift_east),
            "shift_north": coordinate(fit.shift_north),
            "turn": angle(fit.turn),
            "scale_ppm": number(fit.scale_ppm),
            "sd_scale_ppm": number(fit.sd_scale_ppm),
        }
    return _block(free, judgement.overall_free) | {"similarity": similarity}


def _block(solution: Solution, tests: tuple[OverallTest, ...]) -> dict[str, Any]:
    """Figures of all together and of each part; ``tests`` are theirs in the order parts, total."""
    block = _figures(solution, solution.total, solution.parts, tests[-1])
    block["parts"] = [
        {"what": p.what, **_figures(solution, p, (p,), t)} for p, t in zip(solution.parts, tests, strict=False)
    ]
    return block


def _figures(solution: Solution, one: PartResult, parts: tuple[PartResult, ...], test: OverallTest) -> dict[str, Any]:
    return {
        "stage": "free" if all(p.datum and p.datum.free for p in parts) else "held",
        "converged": True,
        "iterations": solution.iterations,
        "observations": one.observations,
        "unknowns": one.unknowns,
        "conditions": one.conditions,
        "datum_missing": one.datum_missing,
        "degrees_of_freedom": one.degrees_of_freedom,
        "weighted_square_sum": number(one.square_sum),
        "variance_factor": number(one.variance_factor),
        "overall_test": overall_entry(test),
        "datum": "; ".join(dict.fromkeys(_datum_words(solution, p) for p in parts)),
    }


def _datum_words(solution: Solution, part: PartResult) -> str:
    """'held control', 'weighted control', 'held and weighted control' or 'free over ...'."""
    assert part.datum is not None
    one = part.datum
    if one.free:
        names = [solution.names[i] for i in one.stations]
        shown = ", ".join(names[:6]) + (f" and {len(names) - 6} more" if len(names) > 6 else "")
        return f"free over {shown}" if one.null.shape[1] else "free, with nothing missing"
    nodes = one.part.nodes[:, [0, 0, 1]]
    roles = {ROLES[code] for code in np.unique(solution.network.stations.role[nodes])} & {"held", "weighted"}
    return " and ".join(sorted(roles)) + " control"


def _warnings(judgement: Judgement) -> list[str]:
    solution = judgement.solution
    out = [*solution.job.warnings, *judgement.constants]
    idle = [name for name, xyz in zip(solution.names, solution.positions, strict=True) if np.isnan(xyz).all()]
    if idle:
        shown = ", ".join(idle[:8]) + (f" and {len(idle) - 8} more" if len(idle) > 8 else "")
        out.append(f"no reading touches {shown}: not in this record.")
    for part, test in zip(solution.parts, judgement.overall, strict=False):
        if test.better_than_stated:
            out.append(f"{part.what}: the readings agree better than their stated standard deviations; are these too "
                       "large, or the readings not independent?")  # fmt: skip
        if part.degrees_of_freedom == 0:
            out.append(f"{part.what}: no reading to spare: nothing is checked and no test can be made.")
        if part.datum and part.datum.free:
            out.append(f"{part.what}: free network ({_datum_words(solution, part)}): relative to its own datum.")
    thin = thin_of(solution)
    if thin:
        from adjust.judge import unfixed  # its words are seldom needed, and take their time to load

        out += unfixed.nearly(solution, thin)
    gap = float(np.nansum(judgement.reliability.redundancy)) - solution.total.degrees_of_freedom
    if abs(gap) > 1e-6 * max(1, solution.total.degrees_of_freedom):
        loosest = solution.names[int(np.nanargmax(np.nan_to_num(solution.sd).max(axis=1)))]
        out.append(f"the redundancy numbers miss their sum by {gap:.2g}: some station may be barely fixed; "
                   f"{loosest} is the least certain.")  # fmt: skip
    return out
