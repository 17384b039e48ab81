"""Great circles against closed forms on the sphere, whose radius is 6371.0088 km."""

from __future__ import annotations

import math

import numpy as np
import pytest

from steelyard.datasets.geography import great_circle_km

RADIUS = 6371.0088


def distance(a: tuple[float, float], b: tuple[float, float]) -> float:
    return float(great_circle_km(np.array(a[0]), np.array(a[1]), np.array(b[0]), np.array(b[1])))


@pytest.mark.parametrize(
    ("a", "b", "angle"),
    [
        ((0, 0), (90, 0), math.pi / 2),  # a quarter of a meridian
        ((0, 17), (0, 107), math.pi / 2),  # a quarter of the equator
        ((90, 0), (-90, 0), math.pi),  # pole to pole
        ((90, 12), (90, 170), 0.0),  # the pole has any longitude
        ((90, -75), (30, 40), math.pi / 3),  # from the pole: the colatitude
        ((0, 179), (0, -179), math.radians(2)),  # over the date line
        ((60, 0), (60, 180), math.pi / 3),  # over the pole, not along the parallel
        ((0, 0), (45, 90), math.pi / 2),  # from a point on the equator to its polar great circle
        ((45, 0), (0, 45), math.acos(0.5)),  # cos(angle) = cos(45) cos(45)
        ((23.5, -40), (-23.5, 140), math.pi),  # antipodes
    ],
)
def test_closed_forms(a: tuple[float, float], b: tuple[float, float], angle: float) -> None:
    assert distance(a, b) == pytest.approx(RADIUS * angle, rel=1e-14, abs=1e-10)


@pytest.mark.parametrize("degrees", [1e-9, 1e-6, 1e-3])
def test_precision_at_tiny_distances_and_near_antipodes(degrees: float) -> None:
    """Along a meridian the angle is the difference of latitudes, to the last digits of the coordinates."""
    assert distance((0, 30), (degrees, 30)) == pytest.approx(RADIUS * math.radians(degrees), rel=1e-12)
    short_of_half_turn = RADIUS * (math.pi - math.radians(degrees))
    # An arcsine of sqrt(h) is off by 1e-8 * RADIUS = 60 m here; coordinates alone allow 1e-11 km.
    assert distance((0, 30), (degrees, -150)) == pytest.approx(short_of_half_turn, rel=0, abs=2e-11)


def test_agrees_with_the_angle_between_unit_vectors() -> None:
    rng = np.random.default_rng(5)
    latitude, longitude = np.degrees(np.arcsin(rng.uniform(-1, 1, 40))), rng.uniform(-180, 180, 40)
    phi, lam = np.radians(latitude), np.radians(longitude)
    vectors = np.stack([np.cos(phi) * np.cos(lam), np.cos(phi) * np.sin(lam), np.sin(phi)], axis=1)
    cross = np.linalg.norm(np.cross(vectors[:, None, :], vectors[None, :, :]), axis=2)
    expected = RADIUS * np.arctan2(cross, vectors @ vectors.T)
    found = great_circle_km(latitude[:, None], longitude[:, None], latitude[None, :], longitude[None, :])
    assert found.shape == (40, 40)
    # The reference loses about 1e-16 RADIUS sqrt(n) in its products.
    np.testing.assert_allclose(found, expected, rtol=0, atol=1e-9)
    np.testing.assert_array_equal(np.diag(found), 0)
    np.testing.assert_array_equal(found, found.T)
    assert np.all(found[:, :, None] <= found[:, None, :] + found.T[None, :, :] + 1e-9)


def test_a_missing_coordinate_gives_a_missing_distance() -> None:
    assert math.isnan(distance((math.nan, 0), (0, 0)))
