"""Earth frames against astropy and ERFA: positions, velocities, degraded mode, refusals."""

import erfa
import numpy as np
import pytest

from shiftfix.physics.frames import EarthFrame
from shiftfix.physics.geodesy import itrs_from_geodetic
from shiftfix.physics.timescales import tai_ns_from_utc, tt_jd
from shiftfix.tables.bundled_orientation import bundled_earth_orientation

COLUMNS = ("mjd_utc_1", "ut1_minus_tai_s", "xp_rad", "yp_rad", "dx_rad", "dy_rad")
PLACES = itrs_from_geodetic(
    np.radians([-41.3, 0.1, 78.2, 12.0]), np.radians([-27.5, 179.0, 15.4, 77.6]), np.array([5.0, 0.0, 400.0, 9e3])
)


@pytest.fixture(scope="module")
def table():
    rows = bundled_earth_orientation().rows
    return {name: rows[name].to_numpy() for name in COLUMNS}


def frame_of(text, span, table, **changed):
    values = {**table, **changed}
    return EarthFrame.from_orientation(tai_ns_from_utc(text), span, *(values[name] for name in COLUMNS))


def at_day(table, mjd):
    index = int(np.flatnonzero(table["mjd_utc_1"] == mjd)[0])
    return {name: values[index] for name, values in table.items()}


def erfa_rotation(epoch_tai_ns, seconds, day, ut1_minus_tai_s):
    """ITRS to GCRS by ERFA's own matrices, IAU 2006/2000A, from given orientation."""
    jd1, jd2 = tt_jd(epoch_tai_ns)
    tt = jd2 + seconds / 86400.0
    ut1 = tt + (ut1_minus_tai_s - 32.184) / 86400.0
    x, y, s = erfa.xys06a(jd1, tt)
    pole = erfa.pom00(day["xp_rad"], day["yp_rad"], erfa.sp00(jd1, tt))
    return erfa.c2tcio(erfa.c2ixys(x + day["dx_rad"], y + day["dy_rad"], s), erfa.era00(jd1, ut1), pole).T


@pytest.mark.parametrize(
    ("text", "mjd"),
    [("1998-09-10T00:00:00Z", 51066), ("2012-06-15T00:00:00Z", 56093), ("2024-03-01T00:00:00Z", 60370)],
)
def test_positions_and_velocities_against_astropy_on_days_of_the_table(text, mjd, table):
    """At 0 h both take the table's values; astropy has no celestial pole offsets here, so ours are put to zero."""
    from astropy.coordinates.builtin_frames.intermediate_rotation_transforms import cirs_to_itrs_mat, gcrs_to_cirs_mat
    from astropy.time import Time
    from astropy.utils import iers
    from astropy_iers_data import IERS_A_FILE

    none = np.zeros_like(table["dx_rad"])
    frame = frame_of(text, (-86400.0, 2 * 86400.0), table, dx_rad=none, dy_rad=none)
    with iers.conf.set_temp("auto_download", False), iers.earth_orientation_table.set(iers.IERS_A.open(IERS_A_FILE)):

        def astropy_rotation(time):
            return (cirs_to_itrs_mat(time) @ gcrs_to_cirs_mat(time)).T

        for k in (0, 1):
            time = Time(mjd + k, format="mjd", scale="utc")
            tai_minus_utc = (time.tai.jd1 - time.jd1 + time.tai.jd2 - time.jd2) * 86400.0
            ut1 = at_day(table, mjd + k)["ut1_minus_tai_s"] + round(tai_minus_utc)
            offsets = np.array([-20.0, 0.0, 20.0])
            moved = [Time(time.jd1, time.jd2 + s / 86400.0, format="jd", scale="utc") for s in offsets]
            rotations = []
            for m in moved:
                m.delta_ut1_utc = ut1
                rotations.append(astropy_rotation(m))
            for place in PLACES:
                states = frame.to_gcrs(np.array([86400.0 * k]), place)
                assert np.abs(states.position[0] - rotations[1] @ place).max() <= 1e-3
                # x' by central differences; third-order term omega**3 h**2/6 taken off.
                rate = (rotations[2] - rotations[0]) @ place / 40.0
                rate = rate * (1.0 + (7.292115e-5 * 20.0) ** 2 / 6.0)
                slope = (at_day(table, mjd + k + 1)["ut1_minus_tai_s"] - at_day(table, mjd + k)["ut1_minus_tai_s"]) / 86400.0
                rate = rate + slope * np.cross([0, 0, 7.292115e-5], rotations[1] @ place)
                assert np.abs(states.velocity[0] - rate).max() <= 1e-5


@pytest.mark.parametrize("text", ["2004-04-06T00:00:00Z", "2024-03-01T00:00:00Z"])
def test_rotation_against_erfa_between_nodes(text, table):
    """Splines of X, Y, s and the pole over hours, with all offsets, at odd times: 0.1 mm on the ground."""
    mjd = {"2004-04-06T00:00:00Z": 53101, "2024-03-01T00:00:00Z": 60370}[text]
    near = (table["mjd_utc_1"] >= mjd - 5) & (table["mjd_utc_1"] <= mjd + 6)
    day = at_day(table, mjd)
    constant = {name: np.full(near.sum(), day[name]) for name in COLUMNS[1:]}
    frame = frame_of(text, (0.0, 86400.0), {**constant, "mjd_utc_1": table["mjd_utc_1"][near]})
    times = np.linspace(11.0, 86390.0, 97)
    ours = frame.rotation(times)
    theirs = np.array([erfa_rotation(tai_ns_from_utc(text), t, day, day["ut1_minus_tai_s"]) for t in times])
    assert np.abs(ours - theirs).max() * 6.4e6 <= 1e-4


def test_velocity_is_the_derivative_of_position(table):
    """Richardson differences of our own positions: 2e-7 m/s, where precession of the pole alone is 3e-5 m/s."""
    frame = frame_of("2024-03-01T00:00:00Z", (-86400.0, 86400.0), table)
    times, place = np.linspace(-8e4, 8e4, 200), PLACES[3]
    own = np.array([120.0, -200.0, 30.0])

    def position(shift):
        return np.einsum("nij,nj->ni", frame.rotation(times + shift), place + own * (times + shift)[:, None])

    h = 4.0
    rate = (8.0 * (position(h) - position(-h)) - (position(2 * h) - position(-2 * h))) / (12.0 * h)
    acceleration = (position(40.0) - 2.0 * position(0.0) + position(-40.0)) / 1600.0
    # The place moves itself: positions of to_gcrs at each time, velocity relative to the ground.
    states = [frame.to_gcrs(times[k : k + 1], place + own * times[k], own) for k in range(len(times))]
    velocity = np.concatenate([s.velocity for s in states])
    assert np.abs(velocity - rate).max() <= 1e-6
    assert np.abs(np.concatenate([s.acceleration for s in states]) - acceleration).max() <= 1e-6
    still = frame.to_gcrs(times, place)
    rate = (8.0 * (frame.to_gcrs(times + h, place).position - frame.to_gcrs(times - h, place).position)
            - (frame.to_gcrs(times + 2 * h, place).position - frame.to_gcrs(times - 2 * h, place).position)) / (12.0 * h)
    assert np.abs(still.velocity - rate).max() <= 2e-7


def test_there_and_back(table):
    frame = frame_of("2024-03-01T00:00:00Z", (0.0, 7200.0), table)
    times = np.linspace(0.0, 7200.0, 50)
    position = np.random.default_rng(1).standard_normal((50, 3)) * 7e6
    velocity = np.random.default_rng(2).standard_normal((50, 3)) * 4e3
    states = frame.to_gcrs(times, position, velocity)
    back = frame.to_itrs(times, states.position, states.velocity)
    assert np.abs(back[0] - position).max() < 1e-7 and np.abs(back[1] - velocity).max() < 1e-10


def test_degraded_frame_stays_within_its_bound(table):
    """UT1 = UTC and no polar motion: the largest offsets between leap seconds since 1973 keep inside 420 m."""
    worst = 0.0
    for mjd in (42778, 44238, 50628, 51178, 56107, 57202, 57753, 60370):
        year, month, day, _ = erfa.jd2cal(2400000.5, mjd)
        text = f"{year:04d}-{month:02d}-{day:02d}T00:00:00Z"
        full, bare = frame_of(text, (0.0, 600.0), table), EarthFrame.without_orientation(tai_ns_from_utc(text), (0.0, 600.0))
        assert bare.degraded and not full.degraded and full.bound_m == 0.0
        times = np.array([0.0, 600.0])
        for place in PLACES[:3]:
            apart = full.to_gcrs(times, place).position - bare.to_gcrs(times, place).position
            worst = max(worst, np.linalg.norm(apart, axis=1).max())
    assert 200.0 < worst < bare.bound_m


def test_span_outside_the_table_is_refused(table):
    with pytest.raises(ValueError, match=r"outside the Earth-orientation table, which covers MJD 41684 to \d+"):
        frame_of("1972-06-01T00:00:00Z", (0.0, 600.0), table)
    short = {name: values[(table["mjd_utc_1"] >= 60368) & (table["mjd_utc_1"] <= 60372)] for name, values in table.items()}
    frame_of("2024-03-01T00:00:00Z", (0.0, 86400.0), short)
    with pytest.raises(ValueError, match="MJD 60368 to 60372"):
        frame_of("2024-03-01T00:00:00Z", (0.0, 2.1 * 86400.0), short)
    with pytest.raises(ValueError, match="two finite times in order"):
        EarthFrame.without_orientation(0, (5.0, np.nan))


def test_angle_runs_on_through_a_leap_second(table):
    """UT1 - TAI has no step on 2016-12-31: the Earth turns 1 s worth between 23:59:60 and 00:00:00."""
    frame = frame_of("2016-12-31T23:59:59Z", (-600.0, 600.0), table)
    times = np.arange(-5.0, 6.0)
    x = frame.to_gcrs(times, PLACES[1]).position
    step = np.linalg.norm(np.diff(x, axis=0), axis=1)
    assert np.abs(step - step[0]).max() < 1e-5 and 465.0 < step[0] < 465.2


def test_times_far_outside_the_span_are_refused(table):
    """Ephemeris nodes two hours past the arc are turned to 0.1 mm; a day past it the splines no longer hold."""
    short = frame_of("2024-03-01T00:00:00Z", (-600.0, 600.0), table)
    wide = frame_of("2024-03-01T00:00:00Z", (-90000.0, 90000.0), table)
    near, far = np.array([-7800.0, 7800.0]), np.array([0.0, 86000.0])
    assert np.abs(short.rotation(near) - wide.rotation(near)).max() * 6.4e6 < 1e-4
    assert np.abs(short.rotation(far) - wide.rotation(far)).max() * 6.4e6 < 6e-2
    for times in ([0.0, 87100.0], [-87100.0], [np.nan]):
        with pytest.raises(ValueError, match="outside this frame, which holds from -87000 to 87000 s"):
            short.rotation(np.array(times))
    assert short.rotation(np.zeros(0)).shape == (0, 3, 3)
