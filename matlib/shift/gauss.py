"""Nodes and weights of Gauss quadrature."""

from __future__ import annotations

from functools import cache

import numpy as np

from matlib.arrays import FloatArray, frozen

__all__ = ["unit_gauss"]


@cache
def unit_gauss(count: int) -> tuple[FloatArray, FloatArray]:
    """Gauss-Legendre nodes and weights on [0, 1]; made when first asked for, since numpy loads a package for it.

    Examples
    --------
    >>> nodes, weights = unit_gauss(2)
    >>> nodes.round(4).tolist(), weights.round(4).tolist()
    ([0.2113, 0.7887], [0.5, 0.5])
    """
    nodes, weights = np.polynomial.legendre.leggauss(count)
    return frozen(0.5 * (1.0 + nodes)), frozen(0.5 * weights)
