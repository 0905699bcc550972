"""Published constants found again from published tables, within the rounding of what was printed."""

import math

import numpy as np
import pytest

from matlib.shift.fit import fit_table

CELSIUS = 273.15
LN10 = math.log(10.0)

# 1. NBS Standard Sample 710, soda-lime-silica glass, certificate of 29 June 1962 (read):
#    log10(eta/poise) = -1.626 + 4236.118/(T_C - 266), and its table of temperatures, printed to 0.1 degC
LEVEL, B10, T0 = -1.626, 4236.118, 266.0
POISE = np.array([2.0, 3.0, 4.0, 5.0, 6.0])
DEGC = np.array([1434.3, 1181.7, 1019.0, 905.3, 821.5])
PRINTED = 0.05  # degC: half of the last digit of the certificate
REFERENCE = 1019.0

# 2. Fixpoints of the same glass (read): A. Fluegel, Glass Technol.: Eur. J. Glass Sci. Technol. A 48(1) 13-30 (2007),
#    Table 12: log10(eta/Pa s) = 1.5, 6.6, 12.0 at 1293, 725, 556 degC; the certificate's constants round to exactly these
PASCAL_SECONDS = np.array([1.5, 6.6, 12.0])
FIXPOINTS = np.array([1293.0, 725.0, 556.0])
WHOLE_DEGREE = 0.5


def propagated(T, jacobian, rounding):
    """Largest change of least-squares constants while each temperature moves within its rounding, to first order.

    A temperature that is off by dT is a value that is off by ``-slope dT`` at the stated temperature; the constants answer
    with the pseudo-inverse of the certificate's own derivatives, and at worst all of it adds up.
    """
    slope = -B10 / (T - T0) ** 2
    return np.abs(np.linalg.pinv(jacobian) * slope).sum(axis=1) * rounding


def free_jacobian(T):
    """Derivatives of ``L + b/(T - T0) - b/(T_ref - T0)`` by b, T0 and L at the certificate's constants."""
    u, v = T - T0, REFERENCE - T0
    return np.column_stack([1.0 / u - 1.0 / v, B10 / u**2 - B10 / v**2, np.ones_like(T)])


def test_the_five_temperatures_of_nbs_710_give_the_constants_of_its_certificate_within_their_rounding():
    """Anchored at 1019.0 degC: viscosity over that there, so that its rounding moves all of the other four."""
    fit = fit_table(DEGC + CELSIUS, POISE - 4.0, REFERENCE + CELSIUS, "vft")
    assert (fit.anchored, fit.points, fit.degrees_of_freedom) == (True, 4, 2)
    used = DEGC != REFERENCE
    J = free_jacobian(DEGC[used])[:, :2]
    own = propagated(DEGC[used], J, PRINTED)
    at_reference = np.abs(np.linalg.pinv(J).sum(axis=1)) * B10 / (REFERENCE - T0) ** 2 * PRINTED
    bound = own + at_reference
    found = np.array([fit.values[0] / LN10, fit.values[1] - CELSIUS])
    assert np.all(np.abs(found - [B10, T0]) <= bound), (found, bound)
    assert bound[0] < 0.003 * B10  # a bound that says something: 0.3 % of B, a degree of T0
    assert bound[1] < 1.0


def test_nbs_710_as_wlf_at_1019_degc_gives_its_constants_within_the_same_rounding():
    """C1 = B/C2, C2 = 1019 - T0 (computed: 5.625654714 and 753)."""
    fit = fit_table(DEGC + CELSIUS, POISE - 4.0, REFERENCE + CELSIUS, "wlf")
    used = DEGC != REFERENCE
    G = np.linalg.pinv(free_jacobian(DEGC[used])[:, :2])
    C2 = REFERENCE - T0
    G = np.array([[1.0 / C2, B10 / C2**2], [0.0, -1.0]]) @ G
    slope = B10 / (DEGC[used] - T0) ** 2
    bound = (np.abs(G * slope).sum(axis=1) + np.abs(G.sum(axis=1)) * B10 / C2**2) * PRINTED
    assert np.all(np.abs(fit.values - [5.625654714, 753.0]) <= bound), (fit.values, bound)
    assert np.all(bound < [0.01, 1.0])


def test_with_the_level_free_the_third_constant_of_nbs_710_is_found_too():
    """About 1000 degC, which the table does not hold, the level is log10(eta/poise) there."""
    fit = fit_table(DEGC + CELSIUS, POISE, 1000.0 + CELSIUS, "vft")
    assert (fit.anchored, fit.points) == (False, 5)
    u, v = DEGC - T0, 1000.0 - T0
    J = np.column_stack([1.0 / u - 1.0 / v, B10 / u**2 - B10 / v**2, np.ones_like(u)])
    bound = propagated(DEGC, J, PRINTED)
    found = np.array([fit.values[0] / LN10, fit.values[1] - CELSIUS, fit.values[2]])
    assert np.all(np.abs(found - [B10, T0, LEVEL + B10 / v]) <= bound), (found, bound)
    assert np.all(bound < [0.005 * B10, 2.0, 0.001])


@pytest.mark.parametrize("seed", range(3))
def test_temperatures_rounded_otherwise_move_the_constants_as_far_as_the_bound_allows_and_no_further(seed):
    """Exact temperatures of the certificate's equation, each moved by up to 0.05 degC: the bound is kept, and used by half."""
    exact = T0 + B10 / (POISE - LEVEL)
    rng = np.random.default_rng(seed)
    J = free_jacobian(exact)
    bound = propagated(exact, J, PRINTED)
    worst = np.zeros(3)
    for _ in range(200):
        moved = exact + PRINTED * rng.choice([-1.0, 1.0], exact.size)
        fit = fit_table(moved + CELSIUS, POISE - 4.0, REFERENCE + CELSIUS, "vft")
        found = np.array([fit.values[0] / LN10, fit.values[1] - CELSIUS, fit.values[2]])
        truth = np.array([B10, T0, LEVEL - 4.0 + B10 / (REFERENCE - T0)])
        worst = np.maximum(worst, np.abs(found - truth))
    assert np.all(worst <= 1.01 * bound)  # to first order; 0.05 degC of 500 leave 1e-4 for the second
    assert np.all(worst >= 0.5 * bound)


def test_three_fixpoints_of_the_same_glass_give_its_constants_within_a_degree_of_each():
    """Three points for three constants: no scatter, no standard error, and the rounding of whole degrees."""
    fit = fit_table(FIXPOINTS + CELSIUS, PASCAL_SECONDS, REFERENCE + CELSIUS, "vft")
    assert fit.degrees_of_freedom == 0
    assert fit.residual_decades is None
    bound = propagated(FIXPOINTS, free_jacobian(FIXPOINTS), WHOLE_DEGREE)
    truth = np.array([B10, T0, LEVEL - 1.0 + B10 / (REFERENCE - T0)])  # 1 poise is 0.1 Pa s
    found = np.array([fit.values[0] / LN10, fit.values[1] - CELSIUS, fit.values[2]])
    assert np.all(np.abs(found - truth) <= bound), (found, bound)
    assert np.all(bound < [0.02 * B10, 5.0, 0.02])
