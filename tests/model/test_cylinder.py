"""A thick-walled cylinder under pressure in its bore, against its closed form; Newton's method on the way."""

import itertools
from dataclasses import replace

import numpy as np
import pytest

from matlib.recursion import RECURSIONS
from matlib.tensors import isotropic_stiffness
from tests.model.conftest import built_in
from tests.model.cylinder import BULK, MATERIAL, SHEAR, closed_form, ends, quarter_ring, radial_ring
from tests.model.model import OtherTangent

GLASSY, RELAXED = 1e9, 1e8  # Pa, what the shear terms add up to, and what is left of them
RAMP = 500.0  # s, half the shortest relaxation time at the cylinder's temperature
ENDLESS = 1e15  # s
ROUNDING = 1e-12
"""Largest residual of a nodal force after a linear solve: 1e-16 by the condition of the stiffness, about 1e3."""


def history(ring, count, ramp=0.0):
    """States after a jump or a ramp to the whole pressure, which is then held for `count` increments; the start left out."""
    state, now = ring.start(), 0.0
    rising = count // 4 if ramp else 1
    for k in range(rising):
        state = ring.take(state, ramp / rising, (k + 1) / rising)
        yield state
    for end in ends(count):
        state = ring.take(state, end - now)
        now = end
        yield state


def largest_errors(routine, outside, ramp, counts):
    """Of the bore and of the hoop stress at four times of the hold, for each number of increments."""
    cylinder, errors, exact = closed_form(outside), [], {}
    for count in counts:
        ring = radial_ring(routine, outside)
        states = list(history(ring, count, ramp))
        assert all(state.corrections == 1 for state in states)
        found = []
        for k, end in enumerate(ends(4), 1):
            if k not in exact:
                exact[k] = cylinder.in_ramp(ramp + end, ramp) if ramp else cylinder.after_step(end)
            found.append(ring.errors(states[k * count // 4 - 1 - count], exact[k]))
        errors.append((max(e.bore for e in found), max(e.hoop for e in found)))
    return np.array(errors).T


@pytest.mark.parametrize("outside", ["free", "held"])
@pytest.mark.parametrize("time", [1e-3, 700.0, 1e5])
def test_two_ways_back_from_laplace_space_agree(outside, time):
    cylinder = closed_form(outside)
    # Talbot's contour and de Hoog's continued fraction have nothing in common; both are asked for 20 digits.
    np.testing.assert_allclose(cylinder.after_step(time), cylinder.after_step(time, "dehoog"), rtol=1e-12)


@pytest.mark.parametrize("outside", ["free", "held"])
def test_the_closed_form_lies_between_its_two_elastic_limits(outside):
    cylinder = closed_form(outside)
    # Shifted by 1e-6 s and by 1e9 s of relaxation times of 600 s to 18000 s (retardation: ten times that).
    np.testing.assert_allclose(cylinder.after_step(1e-6), cylinder.elastic(GLASSY), rtol=1e-7)
    np.testing.assert_allclose(cylinder.after_step(1e9), cylinder.elastic(RELAXED), rtol=1e-12)


@pytest.mark.parametrize("outside", ["free", "held"])
def test_a_jump_and_an_endless_increment_give_the_elastic_limits_as_the_mesh_is_refined(outside):
    errors = []
    for elements in (2, 4):
        ring = quarter_ring(built_in(MATERIAL), outside, elements, elements)
        jumped = ring.take(ring.start(), 0.0)
        relaxed = ring.take(jumped, ENDLESS)
        limits = ((jumped, GLASSY), (relaxed, RELAXED))
        errors.append([ring.errors(state, closed_form(outside).elastic(G)).bore for state, G in limits])
    coarse, fine = np.array(errors)
    # The bore is where the load works, and the energy of quadratic elements is of fourth order; coarse meshes come near it.
    assert (np.log2(coarse / fine) > 3.0).all()
    assert (fine < 2e-4).all()


@pytest.mark.parametrize("outside", ["free", "held"])
def test_stress_at_gauss_points_of_the_radius_gains_two_orders_and_more_with_the_mesh(outside):
    errors = []
    for elements in (4, 8, 16):
        ring = radial_ring(built_in(MATERIAL), outside, elements)
        errors.append(ring.errors(ring.take(ring.start(), 0.0), closed_form(outside).elastic(GLASSY)).stress)
    assert all(coarse / fine > 2.0**2.5 for coarse, fine in itertools.pairwise(errors)), errors
    assert errors[-1] < 1e-5


@pytest.mark.parametrize("ramp", [0.0, RAMP])
@pytest.mark.parametrize("outside", ["free", "held"])
def test_bore_and_hoop_stress_follow_the_closed_form_in_second_order(outside, ramp):
    bore, hoop = largest_errors(built_in(MATERIAL), outside, ramp, (32, 64, 128))
    assert np.log2(bore[1] / bore[2]) == pytest.approx(2.0, abs=0.1)
    assert bore[2] < 5e-5
    # Hoop stress: that of the mesh is left, 5e-5 at the most; with a free outside it is Lame's at all times.
    assert hoop[2] < 6e-5


def test_a_routine_of_first_order_is_seen_as_one():
    routine = replace(built_in(MATERIAL), recursion=RECURSIONS["backward-euler"])
    bore, _ = largest_errors(routine, "held", 0.0, (32, 64))
    assert np.log2(bore[0] / bore[1]) == pytest.approx(1.0, abs=0.1)


@pytest.mark.parametrize("outside", ["free", "held"])
def test_one_correction_leaves_rounding_in_every_increment(routine_for, outside):
    ring = quarter_ring(routine_for(MATERIAL), outside)
    for state in history(ring, 6, RAMP):
        before, after = state.residuals
        assert before > 1e3 * ROUNDING
        assert after <= ROUNDING


def _scaled(tangent):
    return 1.2 * tangent


def _instantaneous(tangent):
    return isotropic_stiffness(GLASSY, BULK.equilibrium)


@pytest.mark.parametrize("wrong", [_scaled, _instantaneous])
def test_a_wrong_tangent_takes_more_corrections_to_the_same_answer(wrong):
    right = built_in(MATERIAL)
    rings = [radial_ring(routine, "free") for routine in (right, OtherTangent(routine=right, change=wrong))]
    one, more = (ring.take(ring.take(ring.start(), 0.0), 50.0) for ring in rings)
    assert one.corrections == 1
    assert more.corrections >= 4
    np.testing.assert_allclose(more.displacement, one.displacement, rtol=1e-7)  # what residuals of 1e-9 leave
    if wrong is _scaled:  # each correction goes 1/1.2 of the way
        ratios = [after / before for before, after in itertools.pairwise(more.residuals)]
        np.testing.assert_allclose(ratios[1:5], 1.0 - 1.0 / 1.2, rtol=1e-3)


@pytest.mark.parametrize("outside", ["free", "held"])
def test_the_example_in_c_gives_the_same_model(in_c, outside):
    rings = [quarter_ring(routine, outside) for routine in (built_in(MATERIAL), in_c(MATERIAL))]
    for ours, theirs in zip(*(history(ring, 6, RAMP) for ring in rings), strict=True):
        for name in ("displacement", "strain", "stress"):
            mine = getattr(ours, name)
            np.testing.assert_allclose(getattr(theirs, name), mine, rtol=0.0, atol=1e-10 * np.abs(mine).max())


def test_the_limits_are_those_of_the_material():
    assert SHEAR.equilibrium == RELAXED
    assert SHEAR.equilibrium + SHEAR.moduli.sum() == pytest.approx(GLASSY, rel=1e-15)
