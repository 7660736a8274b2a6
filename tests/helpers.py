"""What several tests need."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike


def close(got: ArrayLike, wanted: ArrayLike, *, atol: float) -> None:
    """Assert |got - wanted| <= atol everywhere; refuse a tolerance that would also accept zero for a wanted value.

    A wanted zero is exempt (use an atol of the size that matters there).
    """
    got, wanted = np.asarray(got, float), np.asarray(wanted, float)
    assert got.shape == wanted.shape, f"shape {got.shape}, wanted {wanted.shape}"
    sizes = np.abs(wanted[wanted != 0])
    assert not sizes.size or atol < sizes.max(), f"the tolerance {atol:g} would accept zero for {sizes.max():g}"
    np.testing.assert_allclose(got, wanted, rtol=0, atol=atol)
