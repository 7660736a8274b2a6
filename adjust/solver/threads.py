"""One thread in the linear algebra: results do not depend on the machine's thread count, and small fronts are faster.

A threaded product adds in another order, which moves last digits; see docs/decisions.
"""

from __future__ import annotations

from contextlib import AbstractContextManager
from functools import cache
from typing import Any

import scipy.linalg  # noqa: F401  (its BLAS must be loaded before the controller looks for the libraries)


@cache
def _controller() -> Any:
    """The loaded libraries; looking for them takes as long as adjusting a small network, so it is done once."""
    from threadpoolctl import ThreadpoolController

    return ThreadpoolController()


def one_thread() -> AbstractContextManager[object]:
    """A context in which BLAS and LAPACK run on one thread."""
    limits: AbstractContextManager[object] = _controller().limit(limits=1)
    return limits
