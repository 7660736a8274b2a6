"""The limits that a job declares (adjust.book.rules), applied to closures."""

from __future__ import annotations

import math

from adjust.book.job import Job
from adjust.graph.runs import HEIGHT_LOOP, HEIGHT_RUN, LOOP, RUN
from adjust.graph.traverses import TRIANGLE
from adjust.judge.closures import Closure, Rule

SUBJECT = {
    (LOOP, "height"): "level loops", (RUN, "height"): "level runs", (TRIANGLE, "angle"): "triangles",
    (HEIGHT_LOOP, "height"): "height loops", (HEIGHT_RUN, "height"): "height runs",
}  # fmt: skip
"""What a limit is of, by the kind of closure and what misses; traverses are the rest."""
TRAVERSE = {"angle": "traverse angles", "linear": "traverse position"}


def declared_rule(job: Job) -> Rule | None:
    """What the job's [tolerance] allows; None where it declares none."""
    limits = job.tolerance.limits
    if not limits:
        return None

    def allowed(one: Closure) -> tuple[dict[str, float], str]:
        allowable, texts = {}, []
        for key in one.misclosure:
            limit = limits.get(SUBJECT.get((one.kind, key), TRAVERSE.get(key, "")))
            if limit is None:
                continue
            n = one.count if one.counted == "angles" else None
            setups = one.count if one.counted == "set-ups" else None
            size = limit.allowance.allowable(one.length, n, setups)
            # a length or number of set-ups that was not booked: the rule stands, and cannot be tested
            allowable[key] = math.inf if size is None else size
            texts.append(limit.words)
        return allowable, "; ".join(dict.fromkeys(texts))

    return allowed
