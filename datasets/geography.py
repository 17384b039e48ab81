"""Distances on the globe."""

from __future__ import annotations

import numpy as np

from steelyard.datasets.arrays import Floats

__all__ = ["EARTH_RADIUS_KM", "great_circle_km"]

EARTH_RADIUS_KM = 6371.0088
"""Mean radius (2a + b) / 3 of the GRS80 ellipsoid (Moritz 2000)."""


def great_circle_km(
    latitude_1: Floats, longitude_1: Floats, latitude_2: Floats, longitude_2: Floats, /
) -> Floats:
    """Great-circle distance by the haversine formula on a sphere of radius `EARTH_RADIUS_KM` [1]_, [2]_.

    With h = sin^2(dlat / 2) + cos(lat_1) cos(lat_2) sin^2(dlon / 2) the angle is
    2 atan2(sqrt(h), sqrt(1 - h)). The arcsine of sqrt(h) would be enough for near points, but the textbook
    1 - h loses all digits at antipodes; here it is built from the antipode of the second point instead, so
    both square roots keep full relative precision everywhere.

    Parameters
    ----------
    latitude_1, longitude_1, latitude_2, longitude_2 : arrays of degrees that broadcast together

    Returns
    -------
    array of kilometres in the broadcast shape, missing where a coordinate is; ranges are not checked here

    References
    ----------
    .. [1] Moritz (2000), Geodetic Reference System 1980, Journal of Geodesy 74.
    .. [2] Sinnott (1984), Virtues of the haversine, Sky and Telescope 68.

    Examples
    --------
    >>> import numpy as np
    >>> float(great_circle_km(np.array(0.0), np.array(0.0), np.array(0.0), np.array(180.0)).round(3))
    20015.114
    """
    phi_1, lambda_1, phi_2, lambda_2 = (
        np.radians(np.asarray(degrees, dtype=np.float64))
        for degrees in (latitude_1, longitude_1, latitude_2, longitude_2)
    )
    parallels = np.cos(phi_1) * np.cos(phi_2)
    half_turn = (lambda_2 - lambda_1) / 2
    near = np.sin((phi_2 - phi_1) / 2) ** 2 + parallels * np.sin(half_turn) ** 2
    # The antipode of (phi_2, lambda_2) is (-phi_2, lambda_2 + 180 degrees): its haversine is 1 - near.
    far = np.sin((phi_2 + phi_1) / 2) ** 2 + parallels * np.cos(half_turn) ** 2
    angle: Floats = 2 * np.arctan2(np.sqrt(near), np.sqrt(far))
    return EARTH_RADIUS_KM * angle
