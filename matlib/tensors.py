r"""Symmetric second-order tensors as six-vectors in Mandel form.

Order 11, 22, 33, 23, 13, 12; the shear entries carry a factor :math:`\sqrt 2`, so that the inner product of two tensors
is the dot product of their vectors, and one projector serves strain and stress alike.
"""

from __future__ import annotations

import math

import numpy as np

from matlib.arrays import FloatArray, frozen

__all__ = [
    "DEVIATORIC",
    "IDENTITY",
    "STRAIN_COMPONENTS",
    "STRESS_COMPONENTS",
    "VOLUMETRIC",
    "isotropic_stiffness",
    "mandel_from_strain",
    "mandel_from_stress",
    "rotation",
    "strain_from_mandel",
    "stress_from_mandel",
]

STRAIN_COMPONENTS = ("e11", "e22", "e33", "g23", "g13", "g12")
STRESS_COMPONENTS = ("s11", "s22", "s33", "s23", "s13", "s12")

IDENTITY = frozen([1.0, 1.0, 1.0, 0.0, 0.0, 0.0])
VOLUMETRIC = frozen(np.outer(IDENTITY, IDENTITY) / 3.0)
DEVIATORIC = frozen(np.eye(6) - VOLUMETRIC)

_ROOT2 = math.sqrt(2.0)
_STRAIN_SCALE = frozen([1.0, 1.0, 1.0, 1.0 / _ROOT2, 1.0 / _ROOT2, 1.0 / _ROOT2])
_STRESS_SCALE = frozen([1.0, 1.0, 1.0, _ROOT2, _ROOT2, _ROOT2])


def mandel_from_strain(components: FloatArray) -> FloatArray:
    """Mandel form of strains named `e11 e22 e33 g23 g13 g12` (engineering shear).

    Parameters
    ----------
    components : ndarray, shape (..., 6)
        Strain components [-].

    Returns
    -------
    strain : ndarray, shape (..., 6)

    Examples
    --------
    >>> import numpy as np
    >>> shear = mandel_from_strain(np.array([0.0, 0.0, 0.0, 0.0, 0.0, 2.0]))
    >>> round(float(shear @ shear), 12)  # 2 e12^2
    2.0
    """
    return components * _STRAIN_SCALE


def strain_from_mandel(strain: FloatArray) -> FloatArray:
    """Inverse of `mandel_from_strain`; shape (..., 6)."""
    return strain / _STRAIN_SCALE


def mandel_from_stress(components: FloatArray) -> FloatArray:
    """Mandel form of stresses named `s11 s22 s33 s23 s13 s12`; shape (..., 6) [Pa]."""
    return components * _STRESS_SCALE


def stress_from_mandel(stress: FloatArray) -> FloatArray:
    """Inverse of `mandel_from_stress`; shape (..., 6) [Pa]."""
    return stress / _STRESS_SCALE


def isotropic_stiffness(G: float, K: float) -> FloatArray:
    """Stiffness of an isotropic solid in Mandel form, ``2 G`` deviatoric plus ``3 K`` volumetric.

    Parameters
    ----------
    G, K : float
        Shear and bulk modulus [Pa].

    Returns
    -------
    C : ndarray, shape (6, 6)
        Stiffness [Pa].
    """
    return 2.0 * G * DEVIATORIC + 3.0 * K * VOLUMETRIC


def rotation(R: FloatArray) -> FloatArray:
    """Orthogonal 6x6 matrix that rotates a Mandel vector as ``R A R^T`` rotates its tensor.

    Parameters
    ----------
    R : ndarray, shape (3, 3)
        Rotation matrix.

    Returns
    -------
    Q : ndarray, shape (6, 6)
        With ``Q @ Q.T`` the identity.
    """
    pairs = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))
    Q = np.empty((6, 6))
    for column, (k, m) in enumerate(pairs):
        unit = np.zeros((3, 3))
        unit[k, m] = unit[m, k] = 1.0 if k == m else 1.0 / _ROOT2
        rotated = R @ unit @ R.T
        Q[:, column] = [rotated[i, j] * (1.0 if i == j else _ROOT2) for i, j in pairs]
    return Q
