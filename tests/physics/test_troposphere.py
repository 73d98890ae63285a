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


# Niell (1996), tables 3 and 4, typed anew from public files of the coefficients, in the units of the tables
AVERAGE = (
    (12.769934, 12.683230, 12.465397, 12.196049, 12.045996),
    (29.153695, 29.152299, 29.288445, 29.022565, 29.024912),
    (626.10505, 628.37393, 637.21774, 638.24265, 642.58455),
)
SWING = (
    (0.0, 1.2709626, 2.6523662, 3.4000452, 4.1202191),
    (0.0, 2.1414979, 3.0160779, 7.2562722, 11.723375),
    (0.0, 9.0128400, 4.3497037, 84.795348, 170.37206),
)
WET = (
    (5.8021897, 5.6794847, 5.8118019, 5.9727542, 6.1641693),
    (14.275268, 15.138625, 14.572752, 15.007428, 17.599082),
    (434.72961, 467.29510, 439.08931, 446.26982, 547.36038),
)


@pytest.mark.parametrize("elevation_deg", [3.0, 9.0, 40.0])
@pytest.mark.parametrize("column", range(5))
def test_niell_at_its_tabled_latitudes(column, elevation_deg):
    """Average, swing with the season (coldest on day 28 in the north, half a year later in the south), wet: all 45 numbers."""
    sine, e, latitude = np.sin(np.radians(elevation_deg)), np.radians(elevation_deg), np.radians(15.0 + 15.0 * column)
    average = [row[column] * 1e-4 for row in AVERAGE]
    swing = [row[column] * 1e-5 for row in SWING]
    cold = continued(sine, *(a - b for a, b in zip(average, swing, strict=True)))
    warm = continued(sine, *(a + b for a, b in zip(average, swing, strict=True)))
    mean = continued(sine, *average)
    assert t.niell_hydrostatic(e, latitude, 0.0, 28.0) == pytest.approx(cold, rel=1e-12)
    assert t.niell_hydrostatic(e, latitude, 0.0, 28.0 + 365.25 / 4) == pytest.approx(mean, rel=1e-12)
    assert t.niell_hydrostatic(e, -latitude, 0.0, 28.0) == pytest.approx(warm, rel=1e-12)
    assert t.niell_wet(e, -latitude) == pytest.approx(continued(sine, *(row[column] * 1e-4 for row in WET)), rel=1e-12)
    # Height correction of 1 km, Niell's eq. 6
    height = 1 / sine - continued(sine, 2.53e-5, 5.49e-3, 1.14e-3)
    assert t.niell_hydrostatic(e, latitude, 1000.0, 28.0) - cold == pytest.approx(height, rel=1e-9)


def test_niell_between_and_beyond_its_latitudes():
    """Coefficients run straight between the columns (22.5 and 63 deg) and stand still below 15 and above 75 deg."""
    sine, e = np.sin(np.radians(4.0)), np.radians(4.0)
    for latitude_deg, (low, high, part) in ((22.5, (0, 1, 0.5)), (63.0, (3, 4, 0.2))):
        own = [row[low] + part * (row[high] - row[low]) for row in AVERAGE]
        swing = [row[low] + part * (row[high] - row[low]) for row in SWING]
        cold = continued(sine, *(a * 1e-4 - b * 1e-5 for a, b in zip(own, swing, strict=True)))
        wet = continued(sine, *((row[low] + part * (row[high] - row[low])) * 1e-4 for row in WET))
        assert t.niell_hydrostatic(e, np.radians(latitude_deg), 0.0, 28.0) == pytest.approx(cold, rel=1e-12)
        assert t.niell_wet(e, np.radians(latitude_deg)) == pytest.approx(wet, rel=1e-12)
    for inside, outside in ((15.0, 0.0), (75.0, 89.0)):
        inside, outside = np.radians(inside), np.radians(outside)
        assert t.niell_hydrostatic(e, outside, 0.0, 200.0) == t.niell_hydrostatic(e, inside, 0.0, 200.0)
        assert t.niell_wet(e, outside) == t.niell_wet(e, inside)


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
    assert temperature == pytest.approx(temperature_k, abs=1e-9) and pressure == pytest.approx(pressure_pa, rel=2e-5)


def test_slant_delay_is_the_sum_and_small_high_up():
    e = np.radians(np.array([90.0, 30.0, 5.0]))
    sea = t.slant_delay(e, 0.7, 0.0)
    assert sea.shape == (3,) and 2.35 < sea[0] < 2.55 and 20 < sea[2] < 26
    pressure, temperature, vapour = t.standard_atmosphere(0.0)
    wet = t.zenith_wet_delay(temperature, vapour)
    assert sea[0] == pytest.approx(t.zenith_hydrostatic_delay(pressure, 0.7, 0.0) + wet, rel=1e-12)
    assert t.slant_delay(e, 0.7, 60e3)[0] < 1e-3 * sea[0]
    # Half of 17.04 hPa at the ground (15 deg C), 1/e of it at 2 km; both parts mapped by their own factor
    assert vapour == pytest.approx(852.0) and t.standard_atmosphere(2000.0)[2] == pytest.approx(852.0 / np.e)
    pressure, temperature, vapour = t.standard_atmosphere(1500.0)
    parts = [t.zenith_hydrostatic_delay(pressure, -0.7, 1500.0), t.zenith_wet_delay(temperature, vapour)]
    maps = [t.niell_hydrostatic(e, -0.7, 1500.0, 200.0), t.niell_wet(e, -0.7)]
    expected = parts[0] * maps[0] + parts[1] * maps[1]
    assert t.slant_delay(e, -0.7, 1500.0, 200.0) == pytest.approx(expected, rel=1e-13)
