"""Normal gravity against the published ellipsoid and an independent potential."""

import numpy as np
import pytest

from reduction import gravity


@pytest.mark.parametrize(
    ("degrees", "expected"),
    # NIMA TR8350.2: equator and pole as printed there; the rest worked independently from Somigliana's formula
    [(0.0, 9.7803253359), (30.0, 9.7932472692), (45.0, 9.8061977694), (60.0, 9.8191769531), (90.0, 9.8321849378)],
)
def test_gravity_on_the_ellipsoid(degrees, expected):
    assert gravity.normal_gravity(np.radians(degrees), 0.0) == pytest.approx(expected, abs=3e-10)


@pytest.mark.parametrize(
    ("degrees", "elevation", "expected"),
    # ellipsoidal-harmonic potential of WGS 84, evaluated independently with 30 digits
    [(45.0, 1000.0, 9.803112896936), (52.0, 200.0, 9.811857094)],
)
def test_gravity_above_the_ellipsoid_agrees_with_the_exact_potential(degrees, elevation, expected):
    assert gravity.normal_gravity(np.radians(degrees), elevation) == pytest.approx(expected, abs=1e-7)


def test_standard_gravity_is_met_near_45_degrees():
    # 9.80665 m/s2, third General Conference on Weights and Measures 1901, met at about 45.5 degrees
    assert gravity.normal_gravity(np.radians(45.5), 0.0) == pytest.approx(9.80665, abs=1e-5)


def test_hemispheres_are_alike():
    assert gravity.normal_gravity(-0.7, 100.0) == gravity.normal_gravity(0.7, 100.0)


def test_gravity_falls_with_height_at_the_free_air_gradient():
    # 0.3086 mGal/m, common practice in geodesy
    fall = gravity.normal_gravity(0.8, 0.0) - gravity.normal_gravity(0.8, 100.0)
    assert fall == pytest.approx(100 * 0.3086e-5, rel=1e-3)


def test_uncertainty_covers_local_anomalies():
    assert 3e-5 <= gravity.RELATIVE_U <= 1e-4
