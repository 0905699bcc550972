"""Statistics of a least-squares fit: the corrected Akaike criterion and Student's t."""

from __future__ import annotations

import math

__all__ = ["corrected_criterion", "student_quantile"]

_ROUNDING = 4.0 * 2.2e-16  # of the largest value: residuals below it are the rounding of the table


def corrected_criterion(squares: float, points: int, constants: int, largest: float) -> float | None:
    r"""Corrected Akaike criterion of a least-squares fit, ``n ln(S/n) + 2 k n/(n - k - 1)``.

    Parameters
    ----------
    squares : float
        Sum of squared residuals S.
    points, constants : int
        Points n and fitted constants; the variance is one more, so that ``k = constants + 1``.
    largest : float
        Largest of the values that were fitted; residuals below its rounding count as that rounding.

    Returns
    -------
    aicc : float or None
        None with ``n <= k + 1``, where it has no value.

    References
    ----------
    C. M. Hurvich, C.-L. Tsai, Biometrika 76 (1989) 297-307; K. P. Burnham, D. R. Anderson, Model Selection and
    Multimodel Inference, 2nd ed. (2002).  (from memory)

    Examples
    --------
    >>> corrected_criterion(10.0, 10, 1, 1.0)
    5.714285714285714
    """
    k = constants + 1
    if points <= k + 1:
        return None
    floor = max(_ROUNDING * largest, 1e-150)
    variance = max(squares / points, floor * floor)
    return points * math.log(variance) + 2.0 * k * points / (points - k - 1)


def student_quantile(confidence: float, degrees_of_freedom: int) -> float:
    """How many standard errors make half of a two-sided confidence interval; infinite without a degree of freedom.

    Examples
    --------
    >>> round(student_quantile(0.95, 10), 3)
    2.228
    """
    if degrees_of_freedom < 1:
        return math.inf
    from scipy.special import stdtrit

    return float(stdtrit(degrees_of_freedom, 0.5 + 0.5 * confidence))
