import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from matlib.tensors import (
    DEVIATORIC,
    IDENTITY,
    STRAIN_COMPONENTS,
    STRESS_COMPONENTS,
    VOLUMETRIC,
    isotropic_stiffness,
    mandel_from_strain,
    mandel_from_stress,
    rotation,
    strain_from_mandel,
    stress_from_mandel,
)

PLACES = ((0, 0), (1, 1), (2, 2), (1, 2), (0, 2), (0, 1))
ROUNDING = 1e-14  # a few dozen operations on numbers of order one

components = arrays(np.float64, 6, elements=st.floats(-1.0, 1.0))
angles = st.tuples(*[st.floats(-math.pi, math.pi)] * 3)


def tensor_of_strain(values):
    """3x3 tensor of e11 e22 e33 g23 g13 g12, from the definition of engineering shear."""
    tensor = np.zeros((3, 3))
    for value, (i, j) in zip(values, PLACES, strict=True):
        tensor[i, j] = tensor[j, i] = value if i == j else 0.5 * value
    return tensor


def tensor_of_stress(values):
    tensor = np.zeros((3, 3))
    for value, (i, j) in zip(values, PLACES, strict=True):
        tensor[i, j] = tensor[j, i] = value
    return tensor


def turned(a, b, c):
    """Rotation by angles about the axes 3, 1 and 3 again."""

    def about_3(x):
        return np.array([[math.cos(x), -math.sin(x), 0.0], [math.sin(x), math.cos(x), 0.0], [0.0, 0.0, 1.0]])

    about_1 = np.array([[1.0, 0.0, 0.0], [0.0, math.cos(b), -math.sin(b)], [0.0, math.sin(b), math.cos(b)]])
    return about_3(a) @ about_1 @ about_3(c)


def test_components_are_named_in_the_order_of_the_six_vectors():
    assert [name[1:] for name in STRAIN_COMPONENTS] == [f"{i + 1}{j + 1}" for i, j in PLACES]
    assert [name[1:] for name in STRESS_COMPONENTS] == [f"{i + 1}{j + 1}" for i, j in PLACES]
    assert [name[0] for name in STRAIN_COMPONENTS] == ["e"] * 3 + ["g"] * 3


@given(components, components)
def test_the_dot_product_is_the_inner_product_of_the_tensors(strain, stress):
    work = np.tensordot(tensor_of_stress(stress), tensor_of_strain(strain))
    assert float(mandel_from_stress(stress) @ mandel_from_strain(strain)) == pytest.approx(work, abs=ROUNDING)
    norm = np.tensordot(tensor_of_strain(strain), tensor_of_strain(strain))
    assert float(mandel_from_strain(strain) @ mandel_from_strain(strain)) == pytest.approx(norm, abs=ROUNDING)


@given(components)
def test_there_and_back_is_the_same(values):
    np.testing.assert_allclose(strain_from_mandel(mandel_from_strain(values)), values, rtol=1e-15)
    np.testing.assert_allclose(stress_from_mandel(mandel_from_stress(values)), values, rtol=1e-15)


def test_histories_convert_row_by_row():
    rows = np.arange(12.0).reshape(2, 6)
    assert mandel_from_strain(rows).tolist() == [mandel_from_strain(row).tolist() for row in rows]
    assert stress_from_mandel(rows).tolist() == [stress_from_mandel(row).tolist() for row in rows]


@given(components)
def test_the_projectors_split_a_tensor_into_mean_and_deviator(values):
    tensor, vector = tensor_of_strain(values), mandel_from_strain(values)
    mean = np.trace(tensor) / 3.0
    np.testing.assert_allclose(VOLUMETRIC @ vector, mean * IDENTITY, atol=ROUNDING)
    deviator = strain_from_mandel(DEVIATORIC @ vector)
    np.testing.assert_allclose(tensor_of_strain(deviator), tensor - mean * np.eye(3), atol=ROUNDING)


def test_the_projectors_are_projectors():
    np.testing.assert_allclose(VOLUMETRIC @ VOLUMETRIC, VOLUMETRIC, atol=ROUNDING)
    np.testing.assert_allclose(DEVIATORIC @ DEVIATORIC, DEVIATORIC, atol=ROUNDING)
    np.testing.assert_allclose(DEVIATORIC @ VOLUMETRIC, np.zeros((6, 6)), atol=ROUNDING)
    np.testing.assert_allclose(DEVIATORIC + VOLUMETRIC, np.eye(6), atol=ROUNDING)


@pytest.mark.parametrize("constant", [IDENTITY, VOLUMETRIC, DEVIATORIC])
def test_the_shared_constants_cannot_be_written_to(constant):
    with pytest.raises(ValueError, match="read-only"):
        constant[0] = 2.0


@given(components, st.floats(1.0, 10.0), st.floats(1.0, 100.0))
def test_isotropic_stiffness_is_hookes_law(values, G, K):
    tensor = tensor_of_strain(values)
    stress = 2.0 * G * tensor + (K - 2.0 * G / 3.0) * np.trace(tensor) * np.eye(3)
    by_vector = stress_from_mandel(isotropic_stiffness(G, K) @ mandel_from_strain(values))
    np.testing.assert_allclose(tensor_of_stress(by_vector), stress, atol=100.0 * ROUNDING)


@given(components, angles)
def test_rotation_of_the_vector_is_rotation_of_the_tensor(values, by):
    R = turned(*by)
    rotated = strain_from_mandel(rotation(R) @ mandel_from_strain(values))
    np.testing.assert_allclose(tensor_of_strain(rotated), R @ tensor_of_strain(values) @ R.T, atol=ROUNDING)


@given(angles, angles)
def test_rotations_are_orthogonal_and_compose(first, second):
    Q, P = rotation(turned(*first)), rotation(turned(*second))
    np.testing.assert_allclose(Q @ Q.T, np.eye(6), atol=ROUNDING)
    np.testing.assert_allclose(Q @ P, rotation(turned(*first) @ turned(*second)), atol=ROUNDING)
    np.testing.assert_allclose(Q @ isotropic_stiffness(1.0, 3.0) @ Q.T, isotropic_stiffness(1.0, 3.0), atol=ROUNDING)
