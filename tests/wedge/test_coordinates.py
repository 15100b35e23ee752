"""Points and vectors turned to Cartesian form and back; theta-hat points south."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from wedge_builders import PHI, THETA, R

from fieldviz.errors import FieldvizError
from fieldviz.wedge.coordinates import (
    cylindrical_components,
    points_to_cartesian,
    points_to_spherical,
    vectors_to_cartesian,
    vectors_to_spherical,
)

points = st.tuples(st.floats(1e-3, 1e3), st.floats(0.01, 3.13), st.floats(0, 6.28)).map(np.array)
vectors = st.tuples(*[st.floats(-1e3, 1e3)] * 3).map(np.array)


@given(points)
def test_points_come_back(point):
    back = points_to_spherical(points_to_cartesian(point))
    np.testing.assert_allclose(back, point, rtol=1e-12, atol=1e-12)


@given(vectors)
def test_cartesian_points_come_back(point):
    there = points_to_spherical(point)
    assert 0 <= there[1] <= np.pi
    assert 0 <= there[2] <= 2 * np.pi
    back = points_to_cartesian(there)
    np.testing.assert_allclose(back, point, atol=1e-12 * max(1.0, np.abs(point).max()))


@given(vectors, points)
def test_vectors_come_back_and_keep_their_length(vector, point):
    there = vectors_to_cartesian(vector, point)
    scale = max(1.0, np.abs(vector).max())
    np.testing.assert_allclose(vectors_to_spherical(there, point), vector, atol=1e-12 * scale)
    assert np.linalg.norm(there) == pytest.approx(np.linalg.norm(vector), rel=1e-12, abs=1e-300)


@given(points)
def test_unit_vectors_are_the_derivatives_of_position(point):
    # e_i = (dx/dq_i)/|dx/dq_i|, by central differences.
    for axis in range(3):
        step = np.zeros(3)
        step[axis] = 1e-6 * (point[0] if axis == 0 else 1)
        tangent = points_to_cartesian(point + step) - points_to_cartesian(point - step)
        expected = tangent / np.linalg.norm(tangent)
        unit = np.eye(3)[axis]
        np.testing.assert_allclose(vectors_to_cartesian(unit, point), expected, atol=1e-7)


def test_theta_hat_points_down_on_the_midplane():
    for phi in (0.0, 1.0, 4.0):
        point = np.array([2.0, np.pi / 2, phi])
        down = vectors_to_cartesian(np.array([0.0, 1.0, 0.0]), point)
        np.testing.assert_allclose(down, [0, 0, -1], atol=1e-15)


def test_a_uniform_vertical_field():
    # B_r = B0 cos(theta), B_theta = -B0 sin(theta).
    r, theta, phi = np.meshgrid(R, THETA, PHI, indexing="ij")
    place = np.stack([r, theta, phi], axis=-1)
    spherical = np.stack([0.7 * np.cos(theta), -0.7 * np.sin(theta), 0 * theta], axis=-1)
    expected = np.broadcast_to([0.0, 0.0, 0.7], place.shape)
    np.testing.assert_allclose(vectors_to_cartesian(spherical, place), expected, atol=1e-15)
    np.testing.assert_allclose(vectors_to_spherical(expected, place), spherical, atol=1e-15)
    B_R, B_z = cylindrical_components(spherical[..., 0], spherical[..., 1], theta)
    np.testing.assert_allclose(B_R, 0, atol=1e-15)
    np.testing.assert_allclose(B_z, 0.7, rtol=1e-15)


def test_points_on_the_axes():
    poles = points_to_spherical(
        np.array([[0.0, 0, 2], [0, 0, -2], [0, 0, 0], [1, 0, 0], [0, -1, 0]])
    )
    expected = [[2, 0, 0], [2, np.pi, 0], [0, 0, 0], [1, np.pi / 2, 0], [1, np.pi / 2, 1.5 * np.pi]]
    np.testing.assert_allclose(poles, expected, atol=1e-15)


def test_the_compiled_rotation_is_the_plain_one():
    from fieldviz.wedge._kernels import rotate_to_cartesian

    rng = np.random.default_rng(0)
    shape = (len(PHI), len(THETA), len(R))
    components = rng.normal(size=(3, *shape))
    found = np.empty((*shape, 3))
    rotate_to_cartesian(*components, np.sin(THETA), np.cos(THETA), np.sin(PHI), np.cos(PHI), found)
    phi, theta, _ = np.meshgrid(PHI, THETA, R, indexing="ij")
    # Unit vectors written out by hand.
    e_r = np.stack([np.sin(theta) * np.cos(phi), np.sin(theta) * np.sin(phi), np.cos(theta)], -1)
    e_t = np.stack([np.cos(theta) * np.cos(phi), np.cos(theta) * np.sin(phi), -np.sin(theta)], -1)
    e_p = np.stack([-np.sin(phi), np.cos(phi), 0 * phi], -1)
    expected = sum(c[..., None] * e for c, e in zip(components, (e_r, e_t, e_p), strict=True))
    np.testing.assert_allclose(found, expected, atol=1e-14)


@pytest.mark.parametrize("shape", [(3, 2), (2,), (4, 4), ()])
def test_arrays_without_three_components_are_refused(shape):
    for convert in (points_to_cartesian, points_to_spherical):
        with pytest.raises(FieldvizError, match="last axis has length 3"):
            convert(np.ones(shape))
    with pytest.raises(FieldvizError, match="vectors"):
        vectors_to_cartesian(np.ones(shape), np.ones(3))
