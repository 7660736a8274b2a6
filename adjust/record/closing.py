"""Closures, balances, the ledger of distances and the reductions of raw books, entry by entry."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from adjust.book.job import Job
from adjust.book.reductions import LedgerLine
from adjust.judge.assess import CLOSURES_MOST, Judgement
from adjust.judge.balances import Balance
from adjust.judge.closures import Closure
from adjust.kinds import KINDS
from adjust.record.numbers import angle, coordinate, number
from adjust.record.observations import cause_entries

_ANGLES = ("angle", "direction")
"""What of a closure is an angle; the rest are lengths."""


def closure_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """One entry a closure, in the order in which they were found."""
    return [_closure(judgement, one) for one in judgement.closures]


def _closure(judgement: Judgement, one: Closure) -> dict[str, Any]:
    names, ids = judgement.solution.job.network.stations.names, judgement.booked_ids
    return {
        "kind": one.kind,
        "stations": [names[i] for i in one.stations],
        "observations": list(dict.fromkeys(ids[r] for r in one.rows)),
        "length": None if one.length is None else coordinate(one.length),
        "count": one.count,
        "counted": one.counted,
        "misclosure": _sizes(one.misclosure),
        "ratio": number(one.ratio),
        "sd": _sizes(one.sd),
        "allowable": _sizes(one.allowable),
        "declared": list(one.declared),
        "rule": one.rule,
        "verdict": one.verdict,
        "verdicts": one.verdicts,
        "sentence": one.sentence,
        "likely_causes": cause_entries(one.likely),
    }


def _sizes(values: Mapping[str, float]) -> dict[str, float | None]:
    """Angles and lengths by name; what is not known is null."""
    return {key: angle(x) if key in _ANGLES else number(x) for key, x in values.items()}


def balance_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """Simple balances beside least squares."""
    names = judgement.solution.job.network.stations.names
    return [_balance(names, one) for one in judgement.balances]


def _balance(names: tuple[str, ...], one: Balance) -> dict[str, Any]:
    return {
        "method": one.method,
        "kind": one.kind,
        "stations": [names[i] for i in one.stations],
        "coordinates": [[coordinate(x) for x in place] for place in one.places.tolist()],
        "largest_difference": number(one.largest),
        "at": names[one.at],
    }


def ledger_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """Corrections of distances, one line each, and at the end of each distance its way to the plane."""
    lines = [*judgement.solution.job.ledger, *_to_the_plane(judgement)]
    order = {name: k for k, name in enumerate(dict.fromkeys(line.observation for line in lines))}
    return [
        {"observation": x.observation, "name": x.name, "amount": coordinate(x.amount), "how": x.how, "source": x.source}
        for x in sorted(lines, key=lambda line: order[line.observation])
    ]


def _to_the_plane(judgement: Judgement) -> list[LedgerLine]:
    """What brings each adjusted length from its surface to the plane of the coordinates, from the adjusted places."""
    solution = judgement.solution
    network, lines = solution.network, []
    if len(network.rows) > CLOSURES_MOST:  # the record of such a job is cut, as its observations are
        return []
    height = f"plane at {solution.design.frame.plane_height:.3f} m, adjusted places and heights"
    for r, (b, i) in enumerate(zip(network.rows.block.tolist(), network.rows.row.tolist(), strict=True)):
        block = network.blocks[b]
        if KINDS[block.kind].says != "length" or not block.surface:
            continue
        start, end = solution.positions[block.stations[i]]
        plane = float(np.hypot(*(end - start)[:2]))
        amount = plane - float(solution.adjusted[r])
        lines.append(LedgerLine(block.name(i), f"{block.surface} to the plane", amount, "here", height))
    return lines


def reduction_entries(job: Job) -> list[dict[str, Any]]:
    """What the reduction of the raw books gave and looked at."""
    rounded = {"angle": angle, "length": coordinate, "number": number}
    return [
        {
            "what": x.what,
            "of": x.of,
            "file": x.file,
            "lines": list(x.lines),
            "values": {k: None if v is None else rounded[x.dimension](v) for k, v in x.values.items()},
            "dimension": x.dimension,
            "verdict": x.verdict or None,
            "sentence": x.sentence,
        }
        for x in job.reductions
    ]


def tolerance_settings(job: Job) -> dict[str, Any]:
    """The limits of closures by subject, with their source and how sure that is."""
    return {
        of: {"allowed": limit.allowance.text, "source": limit.source, "confidence": limit.confidence}
        for of, limit in job.tolerance.limits.items()
    }
