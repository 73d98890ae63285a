"""Published numbers that our own code must give, each with its source and the reason of its tolerance."""

import numpy as np
import pytest
from straight_paths import UniformPaths

from shiftfix.estimation.calibration import periodic_relativity_s
from shiftfix.estimation.considered import PHASE_ADVANCE_M3_S2
from shiftfix.estimation.covariance import ellipse
from shiftfix.physics import constants, doppler, geodesy, kepler, timescales, troposphere
from shiftfix.physics.constants import GM_EARTH_M3_S2, L_G, SPEED_OF_LIGHT_M_S, W0_M2_S2
from shiftfix.physics.frames import EarthFrame
from shiftfix.physics.gravity import earth_potential
from shiftfix.physics.lighttime import Link, one_way
from shiftfix.physics.motion.forces import Forces
from shiftfix.physics.motion.harmonics import EGM2008_COEFFICIENTS
from shiftfix.physics.motion.orbit import OrbitMotion
from shiftfix.physics.motion.states import States
from shiftfix.tables.bundled_orientation import bundled_earth_orientation

C = SPEED_OF_LIGHT_M_S
ARCSEC = np.pi / 648000.0
# Where the flattening's part of the potential vanishes: sin(latitude)**2 = 1/3.
NEUTRAL = np.array([np.sqrt(2.0 / 3.0), 0.0, np.sqrt(1.0 / 3.0)])
EAST = np.array([0.0, 1.0, 0.0])


def ln_ratio(direction, velocity_t, velocity_r, **potentials):
    """ln D for one given geometry at reception and emission."""
    row = [np.atleast_2d(np.asarray(a, float)) for a in (direction, velocity_t, velocity_r)]
    zero = np.zeros((1, 3))
    link = Link(np.zeros(1), np.ones(1), np.ones(1), row[0], States(zero, row[1], zero))
    return float(doppler.log_ratio(link, States(zero, row[2], zero), **potentials)[0])


def ratio(*arguments):
    return np.exp(ln_ratio(*arguments))


# Special relativity: closed forms, computed to 18 digits

X, NONE = np.array([1.0, 0.0, 0.0]), np.zeros(3)


@pytest.mark.parametrize(
    ("beta", "longitudinal", "moving_source", "moving_observer", "transverse"),
    [
        (0.001, 0.999000499500374625, 0.999000999000999001, 0.999, 0.999999499999875),
        (0.1, 0.904534033733290868, 0.909090909090909091, 0.9, 0.994987437106619955),
        (0.5, 0.577350269189625765, 0.666666666666666667, 0.5, 0.866025403784438647),
    ],
)
def test_special_relativity(beta, longitudinal, moving_source, moving_observer, transverse):
    """Einstein 1905, sec. 7 (from memory): tolerance four roundings of a double."""
    source, observer = ratio(X, -beta * C * X, NONE), ratio(X, NONE, beta * C * X)
    assert source == pytest.approx(longitudinal, rel=1e-15) and observer == pytest.approx(longitudinal, rel=1e-15)
    assert ratio(X, beta * C * EAST, NONE) == pytest.approx(transverse, rel=1e-15)
    assert ratio(X, NONE, beta * C * EAST) == pytest.approx(1.0 / transverse, rel=1e-15)
    # The classical formulas are ours without time dilation.
    gamma = 1.0 / np.sqrt(1.0 - beta**2)
    assert source * gamma == pytest.approx(moving_source, rel=1e-15)
    assert observer / gamma == pytest.approx(moving_observer, rel=1e-15)


def test_canal_rays():
    """Ives and Stilwell 1938 (from memory): H-beta 4861.33 A, H2+ at 7780 V and 18350 V: 14.0 and 21.5 A; half of the
    sum of both lines' shifts 0.0201 and 0.0475 A. Given to three digits."""
    line, rest_energy_ev = 4861.33, 1.87705e9
    for volts, first, second in ((7780.0, 14.0, 0.0201), (18350.0, 21.5, 0.0475)):
        beta = np.sqrt(2.0 * volts / rest_energy_ev)
        toward, away = (line / ratio(X, sign * beta * C * X, NONE) for sign in (1.0, -1.0))
        assert (away - toward) / 2 == pytest.approx(first, rel=5e-3)
        assert (away + toward) / 2 - line == pytest.approx(second, rel=5e-3)


def test_lithium_ions():
    """Botermann et al. 2014, PRL 113 120405 (frequencies in MHz from memory): product test (1.5 +/- 2.3)e-9, 1.47e-9
    with these numbers; beta is taken from one laser, the other's resonance predicted."""
    from scipy.optimize import brentq

    parallel, antiparallel, one, two = 777210326.98, 384225534.98, 546455143.0, 546474960.7
    beta = brentq(lambda b: parallel * ratio(X, NONE, b * C * X) - one, 0.1, 0.6, xtol=1e-16)
    assert beta == pytest.approx(0.338, abs=5e-4)
    seen = antiparallel * ratio(X, NONE, -beta * C * X)
    assert np.sqrt(seen / two) - 1.0 == pytest.approx(1.47e-9, abs=2e-11)


def test_muon_ring():
    """Bailey et al. 1977 (from memory): gamma 29.327, 2.19703 us becomes 64.43 us, two decimals; seen along the radius."""
    beta = np.sqrt(1.0 - 1.0 / 29.327**2)
    assert 2.19703 / ratio(X, beta * C * EAST, NONE) == pytest.approx(64.43, abs=5e-3)


# Clocks in the field of the Earth


def clock_rate(radius_m, speed_m_s, gm=GM_EARTH_M3_S2):
    """Rate of an orbiting clock against the geoid, minus 1: seen at right angles, the potential of W0 below."""
    w = float(earth_potential(radius_m * NEUTRAL)) * gm / GM_EARTH_M3_S2
    return np.expm1(ln_ratio(NEUTRAL, speed_m_s * EAST, NONE, emitter_potential=w, receiver_potential=W0_M2_S2))


@pytest.mark.parametrize(
    ("altitude_km", "net"),
    [(400, -2.84542e-10), (500, -2.70272e-10), (800, -2.29849e-10), (1400, -1.58358e-10), (20181.75, 4.46456e-10),
     (35786, 5.39152e-10)],
)
def test_circular_orbits(altitude_km, net):
    """(W0 - 3 GM/2a)/c**2 (IAU 2000 B1.9; computed): six digits; terms of second order are 1e-18."""
    a = 6378137.0 + altitude_km * 1e3
    assert clock_rate(a, np.sqrt(GM_EARTH_M3_S2 / a)) == pytest.approx(net, abs=2e-15)


def test_navigation_clock_offset():
    """IS-GPS-200, sec. 3.3.1.1 (from memory): -4.4647e-10, five digits; a = 26561.75 km."""
    a = 26561.75e3
    assert -clock_rate(a, np.sqrt(GM_EARTH_M3_S2 / a)) == pytest.approx(-4.4647e-10, abs=5e-14)
    assert 10.23e6 * (1 - clock_rate(a, np.sqrt(GM_EARTH_M3_S2 / a))) == pytest.approx(10.22999999543e6, abs=1e-5)


def test_no_offset_at_one_and_a_half_radii():
    """a = 1.5 GM/W0 = 9545.509 km (computed): zero to the last digit of a, 6e-17."""
    a = 9545.509e3
    assert abs(clock_rate(a, np.sqrt(GM_EARTH_M3_S2 / a))) < 6e-17


def test_geoid_rate():
    """IAU 2000 B1.9: L_G = 6.969290134e-10, from W0 = 62636856.0 m2/s2 (IERS Conventions 2010, table 1.1)."""
    assert L_G == 6.969290134e-10
    assert W0_M2_S2 / C**2 == pytest.approx(L_G, abs=1e-19)


def test_height_on_the_ground():
    """1.09e-16 a metre (textbooks; Pound and Rebka 1960: 22.5 m, 2.45e-15, from memory): g varies by 0.3 %."""
    station = geodesy.itrs_from_geodetic(np.arcsin(np.sqrt(1 / 3)), 0.0, 0.0)
    upper = geodesy.itrs_from_geodetic(np.arcsin(np.sqrt(1 / 3)), 0.0, 22.5)
    w = {"emitter_potential": float(earth_potential(upper)), "receiver_potential": float(earth_potential(station))}
    shift = ln_ratio(X, NONE, NONE, **w)
    assert shift / 22.5 == pytest.approx(1.09e-16, rel=1e-2) and shift == pytest.approx(2.453e-15, rel=1e-2)


def test_rocket_maser():
    """Vessot et al. 1980, PRL 45 2081: 10 000 km; potential part 4.252e-10 (computed with R = 6371 km, four digits)."""
    w = [float(earth_potential(r * NEUTRAL)) for r in (6.371e6, 16.371e6)]
    shift = ln_ratio(X, NONE, NONE, receiver_potential=w[0], emitter_potential=w[1])
    assert shift == pytest.approx(4.252e-10, abs=1e-13)


@pytest.mark.parametrize(
    ("sign", "latitude_deg", "hours", "height_m", "speed_m_s", "net_ns", "bound_ns"),
    [(1.0, 34.0, 41.2, 8900.0, 243.0, -40.0, 23.0), (-1.0, 31.0, 48.6, 9360.0, 218.0, 275.0, 21.0)],
)
def test_clocks_around_the_world(sign, latitude_deg, hours, height_m, speed_m_s, net_ns, bound_ns):
    """Hafele and Keating 1972, Science 177 166: -40 +/- 23 ns east, 275 +/- 21 ns west; the flights' means from memory.

    One turn of longitude in the time aloft gives the eastward speed, the rest of the ground speed lies north.
    """
    latitude, aloft = np.radians(latitude_deg), hours * 3600.0
    ground, air = (geodesy.itrs_from_geodetic(latitude, 0.0, h) for h in (0.0, height_m))
    turning = constants.OMEGA_EARTH_RAD_S * ground[0]
    eastward = 2.0 * np.pi * air[0] / aloft
    north = np.cross(ground / np.linalg.norm(ground), EAST)
    velocity = (turning * air[0] / ground[0] + sign * eastward) * EAST + np.sqrt(speed_m_s**2 - eastward**2) * north
    gain = ln_ratio(
        ground / np.linalg.norm(ground), velocity, turning * EAST,
        emitter_potential=float(earth_potential(air)), receiver_potential=float(earth_potential(ground)),
    )
    assert gain * aloft * 1e9 == pytest.approx(net_ns, abs=bound_ns)


def orbit_states(a, e, anomaly, gm):
    """Position and velocity at eccentric anomalies."""
    root = np.sqrt(1 - e * e)
    x = a * np.stack([np.cos(anomaly) - e, root * np.sin(anomaly), 0 * anomaly], 1)
    rate = np.sqrt(gm / a**3) / (1 - e * np.cos(anomaly))
    return States(x, a * rate[:, None] * np.stack([-np.sin(anomaly), root * np.cos(anomaly), 0 * anomaly], 1), 0 * x)


def test_eccentricity_coefficient():
    """IS-GPS-200, 20.3.3.3.3.1 (from memory): F = -4.442807633e-10 s/m**0.5 with GM 3.986005e14, ten digits."""
    anomaly = np.linspace(0.3, 6.0, 9)
    ours = periodic_relativity_s(orbit_states(2.656e7, 0.01, anomaly, 3.986005e14))
    assert ours / (0.01 * np.sqrt(2.656e7) * np.sin(anomaly)) == pytest.approx(-4.442807633e-10, rel=2e-10)


@pytest.mark.parametrize(("a", "e", "amplitude_ns"), [(26562e3, 0.01, 22.8975), (27977.6e3, 0.162, 380.7)])
def test_eccentricity_amplitudes(a, e, amplitude_ns):
    """Ashby 2003, Living Rev. Rel. 6 1 (22.9 ns); Galileo 5 and 6, Delva et al. 2018 (about 370 ns): digits computed."""
    term = periodic_relativity_s(orbit_states(a, e, np.array([-np.pi / 2]), GM_EARTH_M3_S2))
    assert term[0] * 1e9 == pytest.approx(amplitude_ns, rel=2e-4)


def test_clock_swing_of_an_eccentric_satellite():
    """Galileo 5 and 6 (e = 0.162, a = 27977.6 km): 380.7 ns (computed; "about 370 ns", Delva et al. 2018), by the proper
    time that is used for averages, minute by minute from perigee; the flattening adds 2e-4 of it."""
    a, e = 27977.6e3, 0.162
    rate = np.sqrt(GM_EARTH_M3_S2 / a**3)
    times = np.append(np.arange(0.0, 2 * np.pi / rate, 60.0), 2 * np.pi / rate)
    anomaly = rate * times
    for _ in range(60):
        anomaly = rate * times + e * np.sin(anomaly)
    states = orbit_states(a, e, anomaly, GM_EARTH_M3_S2)
    pull = -GM_EARTH_M3_S2 * states.position / np.linalg.norm(states.position, axis=1)[:, None] ** 3
    index = np.arange(times.size)
    lost = np.append(0.0, np.cumsum(doppler.time_lost(states._replace(acceleration=pull), index[:-1], index[1:], np.diff(times))))
    swing = lost[-1] * times / times[-1] - lost
    assert np.ptp(swing) / 2 * 1e9 == pytest.approx(380.7, rel=5e-4)
    assert swing == pytest.approx(-4.442807e-10 * e * np.sqrt(a) * np.sin(anomaly), abs=2e-10)


class Turning:
    """Stations on the equator that turn with the Earth, row by row."""

    def __init__(self, longitude):
        self.longitude = longitude

    def states(self, times_s):
        r, w = constants.WGS84_A_M, constants.OMEGA_EARTH_RAD_S
        angle = self.longitude + w * np.asarray(times_s)
        c, s, zero = np.cos(angle), np.sin(angle), 0 * angle
        x = r * np.stack([c, s, zero], 1)
        return States(x, r * w * np.stack([-s, c, zero], 1), -w * w * x)


def test_signal_around_the_equator():
    """Ashby 2003: 207.4 ns around the equator; 720 hops, whose polygon has 1.3e-5 less area (3 fs); each hop against
    the rotating frame's (omega/c**2)(x_T y_R - x_R y_T)."""
    longitude = np.arange(720) * np.pi / 360
    here = Turning(longitude).states(np.zeros(720)).position
    times = []
    for side in (-1, 1):
        times.append(one_way(np.zeros(720), here, Turning(longitude + side * np.pi / 360), shapiro=False).light_time_s)
    assert (times[0] - times[1]).sum() / 2 * 1e9 == pytest.approx(207.4, abs=0.05)
    other = Turning(longitude - np.pi / 360).states(np.zeros(720)).position
    hop = constants.OMEGA_EARTH_RAD_S / C**2 * (other[:, 0] * here[:, 1] - here[:, 0] * other[:, 1])
    # Second order in omega: 1e-12 of a hop of 186 us
    assert np.abs(times[0] - np.linalg.norm(here - other, axis=1) / C - hop).max() < 1e-15


# Orbits


def test_universal_variables():
    """Vallado, Fundamentals of Astrodynamics, ex. 2-4, and Curtis, Orbital Mechanics, ex. 3.7 (from memory)."""
    position, velocity = kepler.propagate(
        np.array([1131.340e3, -2282.343e3, 6672.423e3]), np.array([-5643.05, 4303.33, 2428.79]), 2400.0, 398600.4418e9
    )
    assert position / 1e3 == pytest.approx([-4219.7527, 4363.0292, -3958.7666], abs=1e-3)
    assert velocity / 1e3 == pytest.approx([3.689866, -1.916735, -6.112511], abs=1e-6)
    position, velocity = kepler.propagate(
        np.array([7e6, -12124e3, 0.0]), np.array([2667.9, 4621.0, 0.0]), 3600.0, 398600e9
    )
    assert position / 1e3 == pytest.approx([-3297.8, 7413.4, 0.0], abs=0.06)
    assert velocity / 1e3 == pytest.approx([-8.2976, -0.96404, 0.0], abs=6e-5)


ELEMENT_CASES = [
    # Vallado, ex. 2-5 (from memory): km, 1, deg
    ([6524.834, 6862.875, 6448.296], [4.901327, 5.533756, -1.976341], 398600.4418,
     (36127.338, 0.8328534, 87.86913, 227.89826, 53.38493, 92.33516), (1e-2, 1e-6, 1e-4)),
    # Curtis, ex. 4.3 (from memory); printed to 5 digits: a follows from h and e
    ([-6045.0, -3490.0, 2500.0], [-3.457, 6.618, 2.533], 398600.0,
     (8788.10, 0.171212, 153.2492, 255.2793, 20.0683, 28.4456), (1e-2, 1e-6, 1e-4)),
    # CCSDS 502.0-B-3, figure G-4; its anomaly 41.922339 deg is the mean one: Kepler's equation makes 43.549401 of it
    ([6655.9942, -40218.5751, -82.9177], [3.11548208, 0.47042605, -0.00101495], 398600.4415,
     (41399.5123, 0.020842611, 0.117746, 17.604721, 218.242943, 43.549401), (1e-3, 1e-7, 3e-5)),
]


@pytest.mark.parametrize(("position", "velocity", "gm", "expected", "bounds"), ELEMENT_CASES)
def test_elements(position, velocity, gm, expected, bounds):
    found = kepler.elements_from_state(np.array(position) * 1e3, np.array(velocity) * 1e3, gm * 1e9)
    values = list(found.values())
    assert values[0] / 1e3 == pytest.approx(expected[0], abs=bounds[0])
    assert values[1] == pytest.approx(expected[1], abs=bounds[1])
    assert np.degrees(values[2:]) == pytest.approx(expected[2:], abs=bounds[2])


@pytest.mark.parametrize(("altitude_km", "inclination_deg"), [(705.0, 98.2084), (800.0, 98.6031)])
def test_sun_synchronous_orbits(altitude_km, inclination_deg):
    """98.2 and 98.6 deg (common practice): the node of the integrated orbit follows the Sun, 0.98565 deg a day.

    The state is osculating where the rate needs a mean semi-major axis, up to 9 km apart: 0.5 % of the rate.
    """
    a, i = 6378136.3 + altitude_km * 1e3, np.radians(inclination_deg)
    speed = np.sqrt(GM_EARTH_M3_S2 / a)
    epoch, span = timescales.tai_ns_from_utc("2026-03-01T00:00:00Z"), (0.0, 43200.0)
    forces = Forces(degree=2, zonal_degree=2, sun=False, moon=False, relativity=False, radiation=False, drag=False)
    motion = OrbitMotion(epoch, span, EarthFrame.without_orientation(epoch, span), forces)
    path = motion.at(np.array([a, 0.0, 0.0, 0.0, speed * np.cos(i), speed * np.sin(i)]))
    period = 2 * np.pi * np.sqrt(a**3 / GM_EARTH_M3_S2)
    times = np.linspace(0.0, 7 * period, 700)
    states = path.states(times)
    node = np.unwrap(kepler.elements_from_state(states.position, states.velocity, GM_EARTH_M3_S2)["node_rad"])
    assert np.degrees(np.polyfit(times, node, 1)[0]) * 86400 == pytest.approx(0.98565, rel=1e-2)


def test_gravity_field():
    """EGM2008, tide-free, fully normalised (Pavlis et al. 2012; degrees 2 to 4 of the coefficient file): exact."""
    field = {(n, m): (c, s) for n, m, c, s in EGM2008_COEFFICIENTS}
    assert field[2, 0] == (-0.484165143790815e-3, 0.0)
    assert field[3, 0] == (0.957161207093473e-6, 0.0)
    assert field[4, 0] == (0.539965866638991e-6, 0.0)
    assert field[2, 2] == (0.243938357328313e-5, -0.140027370385934e-5)
    assert (GM_EARTH_M3_S2, constants.EARTH_RADIUS_M) == (3.986004415e14, 6378136.3)
    assert constants.J2_1 == pytest.approx(-np.sqrt(5.0) * field[2, 0][0], rel=1e-10)


# Frames, time and the ellipsoid


def test_terrestrial_to_celestial():
    """Vallado, Fundamentals of Astrodynamics, 3rd ed., ex. 3-14 (from memory), 2004-04-06 07:51:28.386009 UTC.

    20 mm: the book's Julian date in one double costs 8 mm at this speed.
    """
    epoch = timescales.tai_ns_from_utc("2004-04-06T07:51:28.386009Z")
    mjd = np.arange(53097.0, 53107.0)
    ut1 = -0.4399619 - 32.0 - 0.0015563 * (mjd - timescales.utc_mjd(epoch))
    angles = [np.full(10, a * ARCSEC) for a in (-0.140682, 0.333309, -0.000205, -0.000136)]
    frame = EarthFrame.from_orientation(epoch, (0.0, 10.0), mjd, ut1, *angles)
    states = frame.to_gcrs(
        np.zeros(1), np.array([-1033479.3830, 7901295.2754, 6380356.5958]), np.array([-3225.636520, -2872.451450, 5531.924446])
    )
    assert states.position[0] / 1e3 == pytest.approx([5102.5089579, 6123.0114007, 6378.1369282], abs=2e-5)
    assert states.velocity[0] / 1e3 == pytest.approx([-4.743220157, 0.790536497, 5.533755727], abs=2e-8)


def fixed_frame(tt_mjd, tt_minus_ut1_s):
    """Frame at one instant of TT, with a given UT1, the pole at the origin and no celestial offsets."""
    epoch = round((tt_mjd - 40587.0) * 86400) * 10**9 - 32_184_000_000
    mjd = np.floor(timescales.utc_mjd(epoch)) + np.arange(-4.0, 6.0)
    zero = np.zeros(mjd.size)
    return EarthFrame.from_orientation(epoch, (-10.0, 10.0), mjd, zero + 32.184 - tt_minus_ut1_s, zero, zero, zero, zero)


def test_celestial_pole_and_sidereal_time():
    """SOFA test suite, xys06a and gst06a at MJD 53736 (TT, and UT1 for the latter): the pole as our rotation has it, and the
    turn from the true equinox (of ERFA's matrix). 3e-12: splines and rounding of the day, 2e-5 m on the ground."""
    import erfa

    turn = fixed_frame(53736.0, 0.0).rotation(np.zeros(1))[0]
    assert turn[:2, 2] == pytest.approx([5.791308482835292617e-4, 4.020580099454020310e-5], abs=3e-12)
    of_date = erfa.pnm06a(2400000.5, 53736.0) @ turn
    # The TIO locator, -47 microarcseconds a century, stands between the prime meridian and the origin of longitudes.
    locator = erfa.sp00(2400000.5, 53736.0)
    assert np.arctan2(of_date[1, 0], of_date[0, 0]) - locator == pytest.approx(1.754166137675019159, abs=3e-12)


def test_earth_rotation_angle():
    """SOFA test suite, era00 at UT1 MJD 54388: 0.4022837240028158 rad, from our rotation and the origin of its own X, Y, s."""
    import erfa

    frame = fixed_frame(54388.0, 0.0)
    turn = frame.rotation(np.zeros(1))[0]
    from_celestial = erfa.c2ixys(*erfa.xys06a(2400000.5, 54388.0)) @ turn
    angle = np.arctan2(from_celestial[1, 0], from_celestial[0, 0]) - erfa.sp00(2400000.5, 54388.0)
    assert angle == pytest.approx(0.4022837240028158, abs=3e-12)


@pytest.mark.parametrize(
    ("mjd", "xp", "yp", "ut1_minus_utc", "tai_minus_utc"),
    [(53101, -0.140857, 0.333539, -0.4399552, 32), (57754, 0.080549, 0.263128, 0.5912870, 37)],
)
def test_earth_orientation_rows(mjd, xp, yp, ut1_minus_utc, tai_minus_utc):
    """IERS C04 (20). Our table is Bulletin B: 0.4 mas and 0.05 ms apart at most (12 mm, 23 mm)."""
    rows = bundled_earth_orientation().rows
    row = rows[rows["mjd_utc_1"] == mjd].iloc[0]
    assert row["xp_rad"] / ARCSEC == pytest.approx(xp, abs=4e-4)
    assert row["yp_rad"] / ARCSEC == pytest.approx(yp, abs=4e-4)
    assert row["ut1_minus_tai_s"] + tai_minus_utc == pytest.approx(ut1_minus_utc, abs=5e-5)


@pytest.mark.parametrize(
    ("date", "seconds"),
    [("1972-01-01", 10), ("1998-12-31", 31), ("1999-01-01", 32), ("2006-01-01", 33), ("2009-01-01", 34),
     ("2012-07-01", 35), ("2015-07-01", 36), ("2016-12-31", 36), ("2017-01-01", 37), ("2026-03-01", 37)],
)
def test_tai_minus_utc(date, seconds):
    """IERS Bulletin C: exact."""
    assert int(timescales.tai_minus_utc_s(np.datetime64(date).astype(int))) == seconds


def test_scale_offsets():
    """TT - TAI = 32.184 s (IAU 1991), TAI - GPS = 19 s, GPS - UTC = 18 s since 2017 (IS-GPS-200): exact."""
    tai, tt, gps, utc = (timescales.tai_ns_from_calendar(2020, 1, 1, 0, 0, 0, s) for s in ("TAI", "TT", "GPS", "UTC"))
    assert (tai - tt, gps - tai, utc - gps) == (32184 * 10**6, 19 * 10**9, 18 * 10**9)


@pytest.mark.parametrize(
    ("latitude_deg", "longitude_deg", "height_m", "position", "bound_m"),
    [
        # SOFA test suite, gd2gc, WGS84
        (np.degrees(-0.5), np.degrees(3.1), 2500.0, (-5599000.5577049947, 233011.67223479203, -3040909.4706983363), 1e-8),
        # Test of a geodesy package (common practice): 42 N, 82 W, 200 m
        (42.0, -82.0, 200.0, (660675.2518247, -4700948.68316, 4245737.66222), 1e-5),
        # Sites in IERS and IGS files, rounded to 0.1 microdegree (11 mm) and 10 mm
        (49.1442261, 12.8789043, 666.04, (4075578.385, 931852.890, 4801570.154), 2e-2),
        (38.9189631, -77.0662263, 48.86, (1112189.660, -4842955.026, 3985352.284), 2e-2),
        (40.6807215, -112.8604576, 1469.16, (-1882182.8402, -4464343.6597, 4136557.1040), 2e-2),
    ],
)
def test_geodetic_to_cartesian(latitude_deg, longitude_deg, height_m, position, bound_m):
    ours = geodesy.itrs_from_geodetic(np.radians(latitude_deg), np.radians(longitude_deg), height_m)
    assert ours == pytest.approx(position, abs=bound_m)


def test_cartesian_to_geodetic():
    """SOFA test suite, gc2gd, WGS84: its own tolerances."""
    latitude, longitude, height = geodesy.geodetic_from_itrs(np.array([2e6, 3e6, 5.244e6]))
    assert longitude == pytest.approx(0.9827937232473290680, abs=1e-14)
    assert latitude == pytest.approx(0.97160184819075459, abs=1e-14)
    assert height == pytest.approx(331.41724614260599, abs=1e-8)


# Media and statistics


def test_zenith_delay():
    """IERS Conventions 2010, ch. 9 (formula; computed): 1013.25 hPa, 45 deg, 0 m: 2.30697 m, five decimals."""
    assert troposphere.zenith_hydrostatic_delay(101325.0, np.radians(45.0), 0.0) == pytest.approx(2.30697, abs=5e-6)


def test_mapping_against_the_global_function():
    """IERS Conventions 2010, software GMF, header: 3.425245519339138678 and 3.449589116182419257 at 16.75 deg.

    Niell's functions are another model of the same air: they differ by 3e-5 and 4e-6 here (0.1 mm of delay).
    """
    elevation, latitude, day_of_year = np.pi / 2 - 1.278564131, 0.6708665767, 55055 - 54831
    hydrostatic = troposphere.niell_hydrostatic(elevation, latitude, 844.715, day_of_year)
    assert hydrostatic == pytest.approx(3.425245519339138678, rel=5e-5)
    assert troposphere.niell_wet(elevation, latitude) == pytest.approx(3.449589116182419257, rel=1e-5)


@pytest.mark.parametrize(("frequency_mhz", "path_m", "bound_m"), [(1575.42, 0.1624, 5e-5), (400.0, 2.519, 5e-4)])
def test_one_electron_content_unit(frequency_mhz, path_m, bound_m):
    """1 TECU (1e16 electrons a square metre), all printed digits; e**2/(8 pi**2 eps0 m_e) with CODATA's constants."""
    from scipy import constants as codata

    assert PHASE_ADVANCE_M3_S2 * 1e16 / (frequency_mhz * 1e6) ** 2 == pytest.approx(path_m, abs=bound_m)
    expected = codata.e**2 / (8 * np.pi**2 * codata.epsilon_0 * codata.m_e)
    assert PHASE_ADVANCE_M3_S2 == pytest.approx(expected, rel=1e-7)


def test_error_ellipse():
    """95 % of a normal plane lies inside sqrt(5.991) = 2.448 sigma (tables of chi-square)."""
    found = ellipse(np.diag([4.0, 1.0]), 0.95)
    assert found["semi_major_m"] == pytest.approx(2 * 2.448, abs=1e-3) and found["azimuth_deg"] == pytest.approx(90.0)


def test_bound_of_a_straight_pass():
    """sigma_along = (c sigma/f) sqrt(8 R/(3 pi v r)), sigma_R = sqrt(3) sigma_along (derived; long pass): 8.131, 14.083 m.

    406.025 MHz, 7 km/s, 1000 km, 1 Hz each second, rest frequency estimated; 200 000 s stand for a long pass (0.12 %).
    """
    times = np.arange(-100000.0, 100000.5, 1.0)
    n, v = times.size, np.array([7e3, 0.0, 0.0])
    x = times[:, None] * v
    receiver = States(x, np.broadcast_to(v, (n, 3)), np.zeros((n, 3)))
    beacon = UniformPaths(np.broadcast_to([0.0, 1e6, 0.0], (n, 3)), np.zeros((n, 3)))
    link = one_way(times, x, beacon, shapiro=False)
    # The Earth's potential at the beacon would add 1e-7 of the partials.
    partials = doppler.log_ratio_partials(link, receiver, np.broadcast_to(np.eye(3)[:, :2], (n, 3, 2)), np.zeros((n, 3, 2)))
    design = np.column_stack([partials, np.ones(n)]) * 406.025e6
    sigma = np.sqrt(np.diag(np.linalg.inv(design.T @ design)))
    assert sigma[0] == pytest.approx(8.131, rel=2e-3) and sigma[1] == pytest.approx(14.083, rel=2e-3)
