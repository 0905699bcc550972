"""Compiled array kernels, private to `viscoelastic`: float64 arrays in, preallocated arrays out, no checks inside.

Notation as in `recursion`: `h` are the relaxing deviatoric stresses, `p` the relaxing mean stresses, `theta` the
mechanical volume strain. Shapes are the caller's duty.
"""

from __future__ import annotations

import numba
import numpy as np

from matlib.arrays import BoolArray, FloatArray

__all__ = ["run_block"]


@numba.njit(cache=True, error_model="numpy")
def run_block(
    targets: FloatArray,
    stress_controlled: BoolArray,
    thermal: FloatArray,
    shear_decay: FloatArray,
    shear_gain: FloatArray,
    bulk_decay: FloatArray,
    bulk_gain: FloatArray,
    shear_moduli: FloatArray,
    bulk_moduli: FloatArray,
    G_inf: float,
    K_inf: float,
    strain: FloatArray,
    theta: FloatArray,
    h: FloatArray,
    p: FloatArray,
    strain_out: FloatArray,
    stress_out: FloatArray,
) -> None:
    r"""Carry strain, `theta`, `h` and `p` over the increments of a block, in place, and write both histories.

    Parameters
    ----------
    targets : (n, 6)
        End values of each component: stress where `stress_controlled`, strain elsewhere (Mandel).
    stress_controlled : (6,) bool
    thermal : (n,)
        Increments of the thermal volume strain, :math:`3 \alpha \Delta T`.
    shear_decay, shear_gain : (n, ms)
    bulk_decay, bulk_gain : (n, mb)
    shear_moduli : (ms,)
        The moduli :math:`G_i`.
    bulk_moduli : (mb,)
    G_inf, K_inf : float
    strain : (6,), theta : (1,), h : (6, ms), p : (mb,)
        State, changed in place.
    strain_out, stress_out : (n, 6)

    Notes
    -----
    The stress is affine in the strain increment with the isotropic tangent :math:`2 \mu P_{dev} + 3 k P_{vol}`, so the
    free components follow from a closed form: with `m` free normal components and right-hand sides :math:`b`,
    :math:`S = \sum b / (2\mu + m\lambda)`, :math:`x = (b - \lambda S) / 2\mu`, :math:`\lambda = k - 2\mu/3`.
    """
    n = targets.shape[0]
    ms = shear_moduli.shape[0]
    mb = bulk_moduli.shape[0]
    step = np.zeros(6)
    kept = np.zeros(6)
    free_normals = 0
    for c in range(3):
        if stress_controlled[c]:
            free_normals += 1
    for k in range(n):
        mu2 = G_inf
        for i in range(ms):
            mu2 += shear_gain[k, i] * shear_moduli[i]
        mu2 *= 2.0
        bulk = K_inf
        for j in range(mb):
            bulk += bulk_gain[k, j] * bulk_moduli[j]
        lam = bulk - mu2 / 3.0

        mean = (strain[0] + strain[1] + strain[2]) / 3.0
        pressure = K_inf * theta[0] - bulk * thermal[k]
        for j in range(mb):
            p[j] *= bulk_decay[k, j]
            pressure += p[j]
        for c in range(6):
            deviator = strain[c] - mean if c < 3 else strain[c]
            total = 0.0
            for i in range(ms):
                h[c, i] *= shear_decay[k, i]
                total += h[c, i]
            kept[c] = 2.0 * G_inf * deviator + total + (pressure if c < 3 else 0.0)
            step[c] = 0.0 if stress_controlled[c] else targets[k, c] - strain[c]

        given = lam * (step[0] + step[1] + step[2])
        b_sum = 0.0
        for c in range(3):
            if stress_controlled[c]:
                b_sum += targets[k, c] - kept[c] - given
        S = b_sum / (mu2 + free_normals * lam)
        for c in range(6):
            if stress_controlled[c]:
                if c < 3:
                    step[c] = (targets[k, c] - kept[c] - given - lam * S) / mu2
                else:
                    step[c] = (targets[k, c] - kept[c]) / mu2

        volume = step[0] + step[1] + step[2]
        mechanical = volume - thermal[k]
        theta[0] += mechanical
        pressure = K_inf * theta[0]
        for j in range(mb):
            p[j] += bulk_gain[k, j] * bulk_moduli[j] * mechanical
            pressure += p[j]
        for c in range(6):
            if stress_controlled[c]:
                strain[c] += step[c]
            else:
                strain[c] = targets[k, c]
        mean = (strain[0] + strain[1] + strain[2]) / 3.0
        for c in range(6):
            deviator_step = step[c] - volume / 3.0 if c < 3 else step[c]
            deviator = strain[c] - mean if c < 3 else strain[c]
            total = 2.0 * G_inf * deviator
            for i in range(ms):
                h[c, i] += shear_gain[k, i] * 2.0 * shear_moduli[i] * deviator_step
                total += h[c, i]
            strain_out[k, c] = strain[c]
            stress_out[k, c] = total + (pressure if c < 3 else 0.0)
