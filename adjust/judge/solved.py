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
    settle, with the readings that fight.
    """
    try:
        return adjusted(job)
    except Loose as loose:
        from adjust.judge import unfixed

        with one_thread():
            raise Unsolvable(unfixed.words(loose)) from None
    except NotSettled as stopped:
        from adjust.judge import unsettled

        with one_thread():
            raise NotConverged(unsettled.words(job, stopped)) from None
