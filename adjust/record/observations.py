"""Entries of the record about readings: observations, suspects, unchecked, left out."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import numpy as np

from adjust.book.job import Aside
from adjust.judge.assess import Judgement
from adjust.judge.causes import Cause
from adjust.kinds import KINDS
from adjust.network import PARTS, Block
from adjust.record.numbers import angle, coordinate, number

STATION_KEYS = ("at", "from", "to", "first", "second")

_ROUNDED = {"angle": angle, "length": coordinate, "number": number}
"""How values of each dimension are rounded."""


def observation_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """One entry a scalar row, in the order of job.toml, then of rows."""
    solution, rel = judgement.solution, judgement.reliability
    network = solution.network
    booked = [solution.job.booked(block.file, block.booked) for block in network.blocks]
    statistic, smallest, suspect = judgement.statistic, judgement.smallest_detectable, judgement.suspect
    sd_adjusted = rel.sd_adjusted * np.sqrt(judgement.scale)
    entries = []
    for r in range(len(network.rows)):
        b, i, p = int(network.rows.block[r]), int(network.rows.row[r]), int(network.rows.part[r])
        block = network.blocks[b]
        kind = KINDS[block.kind]
        value = _ROUNDED[kind.dimension]
        adjusted = solution.adjusted[r] % (2 * np.pi) if kind.wraps else solution.adjusted[r]
        held = bool(solution.design.held[r])
        texts = _booked_texts(booked[b], block, i)
        named = dict(zip(kind.stations, block.stations[i].tolist(), strict=True))
        named.setdefault("at", named.pop("station", -1))
        entries.append(
            {
                "id": block.name(i),
                "file": block.file,
                "line": int(block.line[i]),
                "kind": block.kind,
                "part": kind.parts[p] or None,
            }
            | {key: _name(judgement, named.get(key, -1)) for key in STATION_KEYS}
            | {
                "set": (network.groups[block.group[i]].set if block.group[i] >= 0 else "") or None,
                "booked": texts[p] if len(kind.parts) > 1 else texts[0],
                "corrections": [
                    {"name": name, "value": value(amount[i])} for name, amount in block.corrections if amount[i]
                ],
                "group": "held" if held else block.precision[i],
                "observed": value(solution.design.observed[r]),
                "adjusted": value(adjusted),
                "residual": number(solution.residuals[r]),
                "sd": None if held else number(solution.sd_readings[r]),
                "sd_adjusted": number(sd_adjusted[r]),
                "redundancy": _share(rel.redundancy[r]),
                "checked_share": _share(rel.checked_share[r]),
                "statistic": number(statistic[r]),
                "critical": None if held else number(judgement.critical),
                "smallest_detectable": number(smallest[r]),
                "external_effect": _effect(judgement, r),
                "suspect": bool(suspect[r]),
            }
        )
    return entries


def _booked_texts(booked: dict[int, tuple[str, ...]], block: Block, i: int) -> tuple[str, ...]:
    """The texts of a value's parts; the one filled cell; or of a level's set-up "back - fore" from its two rows."""
    if block.booked_at is not None:
        return (block.booked_join.join(booked[int(line)][k] for k, line in enumerate(block.booked_at[i]) if line),)
    texts = booked[int(block.line[i])]
    return texts if len(KINDS[block.kind].parts) > 1 else (next(t for t in texts if t),)


def _share(x: float) -> float | None:
    """A redundancy number; what rounding leaves of zero is zero."""
    return number(0.0 if abs(x) < 1e-9 else x)


def _name(judgement: Judgement, station: int) -> str | None:
    return judgement.solution.names[station] if station >= 0 else None


def _effect(judgement: Judgement, r: int) -> dict[str, Any] | None:
    """Coordinate moved most by the smallest detectable blunder."""
    station = int(judgement.effect_station[r])
    if station < 0 or not np.isfinite(judgement.effect[r]):
        return None
    return {"station": judgement.solution.names[station], "part": PARTS[judgement.effect_part[r]],
            "value": number(judgement.effect[r])}  # fmt: skip


def cause_entries(causes: Iterable[Cause]) -> list[dict[str, Any]]:
    """Everyday slips, the likeliest first."""
    return [
        {"slip": c.slip, "sentence": c.sentence, "would_read": c.would_read or None, "support": round(c.support, 3),
         "place": c.place}
        for c in causes
    ]  # fmt: skip


def suspect_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """Suspects in order of blame."""
    ids = judgement.ids
    return [
        {
            "observation": ids[s.row],
            "estimated_blunder": number(s.blunder),
            "sd": number(s.sd),
            "statistic": number(s.statistic),
            "at_job_level": s.at_job_level,
            "likely_causes": cause_entries(judgement.causes(s)),
            "cannot_be_told_from": [
                {"observation": ids[r], "correlation": number(rho), "chance_of_wrong": number(wrong)}
                for r, rho, wrong in judgement.confusable(s)
            ],
        }
        for s in judgement.suspects
    ]


def unchecked_entries(judgement: Judgement) -> list[dict[str, Any]]:
    """Readings whose errors no test here can see, with the reason."""
    if judgement.all_checked:
        return []
    ids, unchecked = judgement.ids, judgement.unchecked
    return [{"observation": ids[r], "why": unchecked.why[r]} for r in unchecked.rows]


def left_out(aside: Aside, with_reason: bool) -> dict[str, Any]:
    """A row set aside."""
    entry = {"observation": aside.observation, "file": aside.file, "line": aside.line, "kind": aside.kind}
    return entry | ({"reason": aside.reason} if with_reason else {}) | {"stations": list(aside.stations)}
