"""Entries of the record about several blunders: the search, what it cleared, the result without them, and groups."""

from __future__ import annotations

from typing import Any

import numpy as np

from adjust.judge.assess import Judgement
from adjust.judge.overall import OverallTest
from adjust.judge.removals import Fit, Removal
from adjust.judge.suspects import cleared, log, mended
from adjust.judge.systematic import expected_by_chance
from adjust.network import PARTS
from adjust.record.numbers import coordinate, number

SHIFT_LEAST_M = 5e-9
"""Shifts that would be written as zero are left away."""


def search_entries(judgement: Judgement) -> dict[str, Any]:
    """The keys cleared, removals, without_suspects and inseparable."""
    ids = judgement.ids
    return {
        "cleared": [
            {"observation": ids[c.row], "statistic": number(c.statistic), "statistic_without": number(c.without)}
            for c in cleared(judgement)
        ],
        "removals": [_removal(judgement, ids, one) for one in log(judgement)],
        "without_suspects": _mended(judgement, ids),
        "inseparable": [
            {"observations": [ids[r] for r in g.rows], "correlation": number(g.correlation),
             "chance_of_wrong": number(g.wrong)}
            for g in judgement.separability
        ],
    }  # fmt: skip


def effect_entries(judgement: Judgement) -> dict[str, Any]:
    """The keys systematic and systematic_by_chance."""
    found = judgement.systematic
    return {
        "systematic": [
            {"what": e.what, "of": e.of, "readings": e.readings, "dimension": e.dimension, "value": number(e.value),
             "sd": number(e.sd), "statistic": number(e.statistic), "critical": number(e.critical),
             "verdict": e.verdict, "cause": e.cause, "rests_on": list(e.rests_on), "sentence": e.sentence}
            for e in found
        ],
        "systematic_by_chance": number(expected_by_chance(found, judgement.tests)),
    }  # fmt: skip


def _removal(judgement: Judgement, ids: list[str], one: Removal) -> dict[str, Any]:
    shift = one.shift
    return {
        "action": one.action,
        "observations": [ids[r] for r in one.rows],
        "instead_of": ids[one.instead] if one.instead >= 0 else None,
        "statistic": number(one.statistic),
        "critical": number(one.limit),
        "before": _fit(ids, one.before),
        "after": _fit(ids, one.after),
        "largest_shift": shift and {
            "station": judgement.solution.names[shift.station], "part": PARTS[shift.part], "value": number(shift.value)
        },
    }  # fmt: skip


def _fit(ids: list[str], fit: Fit) -> dict[str, Any]:
    return {"variance_factor": number(fit.variance_factor), "largest": ids[fit.largest] if fit.largest >= 0 else None,
            "statistic": number(fit.statistic)}  # fmt: skip


def _mended(judgement: Judgement, ids: list[str]) -> dict[str, Any] | None:
    one = mended(judgement)
    if one is None:
        return None
    moved = np.flatnonzero(np.abs(np.nan_to_num(one.shifts)).max(axis=1) > SHIFT_LEAST_M)
    return {
        "observations": [ids[r] for r in one.rows],
        "degrees_of_freedom": one.degrees,
        "weighted_square_sum": number(one.square_sum),
        **_fit(ids, one.fit),
        "overall_test": overall_entry(one.overall),
        "shifts": [
            {"station": judgement.solution.names[i], **dict(zip(PARTS, map(coordinate, one.shifts[i]), strict=True))}
            for i in moved
        ],
    }


def overall_entry(test: OverallTest) -> dict[str, Any]:
    """Limits and verdict of an overall test."""
    return {
        "interval": [number(x) for x in test.interval] if test.interval else None,
        "verdict": test.verdict,
        "better_than_stated": test.better_than_stated,
    }
