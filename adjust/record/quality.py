"""Entries of the record about weights, control as a whole, chains, and what an error in each reading could do."""

from __future__ import annotations

from typing import Any

from adjust.judge.assess import Judgement
from adjust.judge.budget import budget, station_budget
from adjust.judge.chains import chains
from adjust.judge.limits import limits
from adjust.judge.started import doubtful_sentences
from adjust.record.numbers import number

Rows = list[dict[str, Any]]
SHARE_PLACES = 6
"""Decimals of shares of a coordinate's variance; what is below them is rounding as often as not."""


def weight_entries(judgement: Judgement) -> dict[str, Any]:
    """The keys variance_components and budgets."""
    return {
        "variance_components": [
            {"by": c.by, "group": c.group, "readings": c.readings, "redundancy": number(c.redundancy),
             "factor": number(c.factor), "sd_factor": number(c.sd_factor), "sd": number(c.sd),
             "interval": [number(x) for x in c.interval] if c.interval else None, "verdict": c.verdict,
             "sentence": c.sentence, "paste": list(c.paste)}
            for c in judgement.components
        ],
        "budgets": [
            {"station": b.station, "part": b.part, "sd": number(b.sd),
             "shares": [{"group": group, "share": round(share, SHARE_PLACES) + 0.0} for group, share in b.shares
                        if abs(share) >= 0.5 * 10.0**-SHARE_PLACES]}
            for b in station_budget(judgement.solution, judgement.scale)
        ],
    }  # fmt: skip


def report_entry(judgement: Judgement) -> dict[str, Any]:
    """The control as a whole."""
    report = judgement.control_report
    scale = report.scale and {
        "ppm": number(report.scale.ppm), "sd_ppm": number(report.scale.sd_ppm), "cause": report.scale.cause,
        "sentence": report.scale.sentence,
    }  # fmt: skip
    return {
        "consistent": list(report.consistent), "released": list(report.released),
        "cannot_tell": [{"marks": list(group)} for group in report.cannot_tell], "scale": scale,
        "sentences": list(report.sentences),
    }  # fmt: skip


def chain_entries(judgement: Judgement) -> Rows:
    """Levelled lines that only one closure checks together."""
    names, ids = judgement.solution.names, judgement.ids
    return [
        {"stations": [names[i] for i in c.stations], "observations": [ids[r] for r in c.rows],
         "tie": [names[i] for i in c.tie or ()], "split": list(c.split), "sentence": c.sentence}
        for c in chains(judgement.solution)
    ]  # fmt: skip


def add_words(judgement: Judgement, entries: Rows) -> Rows:
    """Observations with their budgets, and what is to be said of each."""
    solution = judgement.solution
    started = dict(doubtful_sentences(solution, solution.job))
    shares = budget(solution)
    for r, (entry, unseen) in enumerate(zip(entries, limits(judgement), strict=True)):
        entry["budget"] = [
            {"what": s.what, "sd": number(s.sd), "share": number(s.share), "linear": s.linear} for s in shares[r]
        ]
        entry["unseen"], entry["start"] = unseen, started.get(r, "")
    return entries
