"""One thread in the linear algebra: results do not depend on the machine's thread count, and small fronts are faster.

A threaded product adds in another order, which moves last digits; see docs/decisions.
"""

from __future__ import annotations

from contextlib import AbstractContextManager


def one_thread() -> AbstractContextManager[object]:
    """A context in which BLAS and LAPACK run on one thread."""
    from threadpoolctl import threadpool_limits

    limits: AbstractContextManager[object] = threadpool_limits(limits=1)
    return limits
