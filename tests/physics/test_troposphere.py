"""Troposphere: zenith delays, mapping at the model's own nodes and limits, standard atmosphere."""

import numpy as np
import pytest

from shiftfix.physics import troposphere as t


def continued(sine, a, b, c):
    """Marini's fraction as written by Niell (1996), eq. 4, without vectorisation."""
    return (1 + a / (1 + b / (1 + c))) / (sine + a / (sine + b / (sine + c)))


def test_zenith_hydrostatic_delay():
    """1013.25 hPa, 45 deg, sea level: 2.30697 m (IERS Conventions 2010, eq. 9.11, formula; computed)."""
    assert t.zenith_hydrostatic_delay(101325.0, np.radians(45.0), 0.0) == pytest.approx(2.306968, abs=1e-6)
    assert t.zenith_hydrostatic_delay(101325.0, 0.0, 1000.0) == pytest.approx(2.306968 / (1 - 0.00266 - 0.00028), abs=1e-6)


def test_zenith_wet_delay():
    """Saastamoinen (1972): 0.002277 (1255/T + 0.05) e; about 0.1 m for 10 hPa at 288 K."""
    assert t.zenith_wet_delay(288.15, 1000.0) == pytest.approx(0.002277 * (1255 / 288.15 + 0.05) * 10, rel=1e-12)


@pytest.mark.parametrize("elevation_deg", [3.0, 5.0, 10.0, 45.0])
def test_niell_at_its_tabled_latitudes(elevation_deg):
    """Niell (1996), table 3: 45 deg, coldest day: average minus amplitude; equinox quarter: average (coefficients typed anew)."""
    sine, e = np.sin(np.radians(elevation_deg)), np.radians(elevation_deg)
    cold = continued(sine, 1.2465397e-3 - 2.6523662e-5, 2.9288445e-3 - 3.0160779e-5, 63.721774e-3 - 4.3497037e-5)
    mean = continued(sine, 1.2465397e-3, 2.9288445e-3, 63.721774e-3)
    latitude = np.radians(45.0)
    assert t.niell_hydrostatic(e, latitude, 0.0, 28.0) == pytest.approx(cold, rel=1e-14)
    assert t.niell_hydrostatic(e, latitude, 0.0, 28.0 + 365.25 / 4) == pytest.approx(mean, rel=1e-12)
    # The south half a year later; below 15 deg no season
    assert t.niell_hydrostatic(e, -latitude, 0.0, 28.0 + 365.25 / 2) == pytest.approx(cold, rel=1e-12)
    low = continued(sine, 1.2769934e-3, 2.9153695e-3, 62.610505e-3)
    assert t.niell_hydrostatic(e, 0.1, 0.0, 100.0) == pytest.approx(low, rel=1e-14)
    assert t.niell_wet(e, np.radians(75.0)) == pytest.approx(continued(sine, 6.1641693e-4, 1.7599082e-3, 5.4736038e-2), rel=1e-14)
    # Height correction of 1 km, Niell's eq. 6
    height = 1 / sine - continued(sine, 2.53e-5, 5.49e-3, 1.14e-3)
    assert t.niell_hydrostatic(e, latitude, 1000.0, 28.0) - cold == pytest.approx(height, rel=1e-9)


def test_mapping_is_one_at_the_zenith_and_near_ten_at_5_degrees():
    """At 5 deg elevation the factor lies between 10.0 and 10.3 (common practice)."""
    assert t.niell_hydrostatic(np.pi / 2, 0.7, 500.0, 10.0) == pytest.approx(1.0, abs=1e-12)
    assert t.niell_wet(np.pi / 2, 0.7) == pytest.approx(1.0, abs=1e-12)
    assert 10.0 < t.niell_hydrostatic(np.radians(5.0), 0.7, 0.0, 100.0) < 10.3
    elevation = np.radians(np.linspace(3, 90, 100))
    assert (np.diff(t.niell_hydrostatic(elevation, 0.7, 0.0, 100.0)) < 0).all()


@pytest.mark.parametrize(
    ("height_m", "pressure_pa", "temperature_k"),
    [(0.0, 101325.0, 288.15), (1000.0, 89874.6, 281.65),
     (5000.0, 54019.9, 255.65), (11000.0, 22632.0, 216.65), (20000.0, 5474.9, 216.65)],
)
def test_standard_atmosphere(height_m, pressure_pa, temperature_k):
    """ISO 2533:1975, table 1 (geopotential altitude; from memory)."""
    pressure, temperature, _ = t.standard_atmosphere(height_m)
    assert temperature == pytest.approx(temperature_k, abs=1e-9) and pressure == pytest.approx(pressure_pa, rel=2e-4)


def test_slant_delay_is_the_sum_and_small_high_up():
    e = np.radians(np.array([90.0, 30.0, 5.0]))
    sea = t.slant_delay(e, 0.7, 0.0)
    assert sea.shape == (3,) and 2.35 < sea[0] < 2.55 and 20 < sea[2] < 26
    pressure, temperature, vapour = t.standard_atmosphere(0.0)
    wet = t.zenith_wet_delay(temperature, vapour)
    assert sea[0] == pytest.approx(t.zenith_hydrostatic_delay(pressure, 0.7, 0.0) + wet, rel=1e-12)
    assert t.slant_delay(e, 0.7, 60e3)[0] < 1e-3 * sea[0]
