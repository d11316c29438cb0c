"""Angles, singular exponents and numbers of layers."""

import numpy as np
import pytest
from meshing_shapes import L_SHAPE, domain, notched

from service.meshing.corners import LAYER_RATIO, interior_angles, layer_counts, singular_exponents


def exponents(shape):
    angles = interior_angles(shape.points, shape.edges)
    return singular_exponents(angles, shape.edges, shape.part == 0)


def wedge(degrees: float, conditions: str):
    """A ring whose vertex 0 has the interior angle, between edge 0 and the last edge."""
    angle = np.radians(np.linspace(0, degrees, 9))
    ring = np.vstack([[(0, 0)], np.column_stack([np.cos(angle), np.sin(angle)])])
    first, last = conditions
    return domain(ring, conditions=first * 5 + last * 5)


@pytest.mark.parametrize(
    ("degrees", "conditions", "exponent"),
    [
        (270, "dd", 2 / 3),
        (270, "nn", 2 / 3),
        (359, "dd", 180 / 359),
        (90, "dd", 2),
        (60, "nn", 3),
        (120, "dd", 1.5),
        (180, "dd", 1),
        (180, "dn", 0.5),
        (180, "nd", 0.5),
        (90, "dn", 1),
        (45, "nd", 2),
        (60, "dn", 1.5),
        (359, "dn", 90 / 359),
        (1, "dd", 180),
    ],
)
def test_exponent(degrees, conditions, exponent):
    assert exponents(wedge(degrees, conditions))[0] == pytest.approx(exponent, rel=1e-12)


def test_angles_of_a_simple_polygon_sum_up():
    for ring in (L_SHAPE, notched(359), notched(300)):
        shape = domain(ring)
        angles = interior_angles(shape.points, shape.edges)
        assert angles.sum() == pytest.approx((len(ring) - 2) * np.pi, rel=1e-14)


def test_angle_of_a_narrow_notch():
    for degrees in (359, 359.99, 359.9999):
        shape = domain(notched(degrees))
        angles = interior_angles(shape.points, shape.edges)
        assert np.degrees(angles[3]) == pytest.approx(degrees, abs=1e-10)


def test_angles_in_a_hole_are_measured_inside_the_domain():
    shape = domain([(0, 0), (9, 0), (9, 9), (0, 9)], [(3, 3), (3, 4), (4, 3)])
    angles = interior_angles(shape.points, shape.edges)
    assert np.degrees(angles) == pytest.approx([90] * 4 + [270, 315, 315])


def test_integer_exponents_need_no_layers():
    counts = layer_counts(np.array([1.0, 2.0, 3.0, 1 + 1e-13, 2 - 1e-12]), np.full(5, 0.5), 1e-12)
    assert counts.tolist() == [0] * 5


def test_layers_are_the_fewest_that_meet_the_criterion():
    target, order = 1e-6, 5
    for exponent, weight in [(0.25, 1), (0.5, 1), (2 / 3, 2 / 3), (0.95, 0.1), (1.5, 1), (2.2, 0.4)]:
        for size in (0.5, 0.01):
            (count,) = layer_counts(np.array([exponent]), np.array([size]), target)

            def error(n, exponent=exponent, weight=weight, size=size):
                return weight**2 * (size * LAYER_RATIO**n) ** (2 * exponent) * order ** (-4 * exponent)

            assert error(count) <= 0.1 * target * (1 + 1e-9)
            assert count == 0 or error(count - 1) > 0.1 * target


def test_layers_for_the_usual_corners():
    counts = layer_counts(np.array([2 / 3, 0.5, 0.25, 1.5]), np.full(4, 0.25), 1e-6)
    assert counts.tolist() == [5, 9, 20, 1]
    assert (layer_counts(np.array([2 / 3, 0.5, 1.5]), np.full(3, 0.25), 1e-2) <= 2).all()
