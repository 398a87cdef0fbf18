"""Great-circle distance against the WGS 84 geodesic (geographiclib) and its own sphere.

A sphere of the mean radius differs from the ellipsoid by up to 0.56 % (the most, along a meridian near a
pole); the test states it. Sphere values: PROJ 9.5.1 on a sphere of R = 6,371,008.8 m.
"""

import numpy as np
import pytest
from geographiclib.geodesic import Geodesic

from service import places

PAIRS = [  # lat, lon, lat, lon, metres on WGS 84, metres on the sphere
    (-34.5, 140, -34.4, 140.1, 14404.939800, 14412.520770),
    (-34, 138, -35, 139, 144013.139269, 144088.263875),
    (-34, 179.9, -34, -179.9, 18476.954288, 18436.976952),
    (-33.95, 151.18, -31.95, 115.86, 3293849.143658, 3286981.485203),
    (0, 0, 0.5, 179.5, 19936288.578965, 19936488.145756),
    (-90, 0, 90, 0, 20003931.458625, 20015114.442036),
]


@pytest.mark.parametrize(("lat_a", "lon_a", "lat_b", "lon_b", "ellipsoid", "sphere"), PAIRS)
def test_published_pairs(
    lat_a: float, lon_a: float, lat_b: float, lon_b: float, ellipsoid: float, sphere: float
) -> None:
    ours = float(places.distance_km(lat_a, lon_a, lat_b, lon_b)) * 1000
    assert ours == pytest.approx(sphere, abs=1e-3)
    assert ours == pytest.approx(ellipsoid, rel=0.0057)


def test_a_thousand_random_pairs_within_the_spherical_error() -> None:
    random = np.random.default_rng(20)
    lat, lon = random.uniform(-89, 89, (2, 1000)), random.uniform(-180, 180, (2, 1000))
    ours = places.distance_km(lat[0], lon[0], lat[1], lon[1]) * 1000
    theirs = [Geodesic.WGS84.Inverse(*spot)["s12"] for spot in zip(lat[0], lon[0], lat[1], lon[1], strict=True)]
    np.testing.assert_allclose(ours, theirs, rtol=0.0057)


def test_directions_follow_the_geodesic() -> None:
    """The compass word is the geodesic's starting azimuth, to the nearest of eight."""
    random = np.random.default_rng(21)
    for lat, lon, north, east in zip(
        random.uniform(-60, 60, 300),
        random.uniform(-180, 180, 300),
        random.uniform(-0.5, 0.5, 300),
        random.uniform(-0.5, 0.5, 300),
        strict=True,
    ):
        azimuth = Geodesic.WGS84.Inverse(lat, lon, lat + north, lon + east)["azi1"] % 360
        if abs(azimuth % 45 - 22.5) > 1:  # not on the edge between two words
            word = places.DIRECTIONS[int(azimuth / 45 + 0.5) % 8]
            assert places.direction(lat, lon, lat + north, lon + east) == word
