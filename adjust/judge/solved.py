"""adjust.solve: the solver, with what it refuses told in trade words."""

from __future__ import annotations

from adjust.book.job import Job
from adjust.errors import NotConverged, Unsolvable
from adjust.solver.defects import Loose
from adjust.solver.gauss import NotSettled
from adjust.solver.solution import Solution
from adjust.solver.solve import solve as adjusted
from adjust.solver.threads import one_thread


def solve(job: Job) -> Solution:
    """Adjust a job by least squares.

    Raises Unsolvable where the readings leave something free, by station and movement; NotConverged where it does not
    settle, with the readings that fight; either where the control has another scale than the readings, with that scale.
    """
    try:
        return adjusted(job)
    except Loose as loose:
        from adjust.judge import unfixed

        with one_thread():
            raise Unsolvable(_by_one_cause(job) or unfixed.words(loose)) from None
    except Unsolvable as refused:
        from adjust.judge.started import start_words

        with one_thread():
            raise Unsolvable(_by_mix_up(job) or start_words(job, refused)) from None
    except NotSettled as stopped:
        from adjust.judge import unsettled

        with one_thread():
            raise NotConverged(_by_one_cause(job) or unsettled.words(job, stopped)) from None


def _by_one_cause(job: Job) -> list[str]:
    """What a gross scale of the control against the readings has bent, or one wrong unit or name, needs no other
    reason; a scale that is none of the trade may come of such a name."""
    from adjust.judge.scale_words import scale_of

    scale = scale_of(job)
    if scale and scale.cause:
        return [scale.sentence]
    return _by_mix_up(job) or ([scale.sentence] if scale else [])


def _by_mix_up(job: Job) -> list[str]:
    """One wrong unit or name with which the job can be adjusted."""
    from adjust.judge.mix_ups import mix_up_of_refused

    found = mix_up_of_refused(job)
    return [f"As booked this cannot be adjusted. {found.sentence}"] if found else []
