"""The bundled Earth orientation, column by column, against astropy's reader of the same files."""

import numpy as np
import pytest

from shiftfix.tables.bundled_orientation import bundled_earth_orientation


@pytest.fixture(scope="module")
def theirs():
    from astropy.utils import iers
    from astropy_iers_data import IERS_A_FILE

    table = iers.IERS_A.open(IERS_A_FILE)
    return table[~np.ma.getmaskarray(table["UT1_UTC"])]


def test_every_row_is_that_of_the_file(theirs):
    """Bulletin B where it is given, Bulletin A elsewhere; exact to the rounding of radians."""
    ours = bundled_earth_orientation()
    assert (ours.array("mjd_utc_1") == theirs["MJD"].value).all()
    for name, column, unit, none in (
        ("xp_rad", "PM_x", "rad", False), ("yp_rad", "PM_y", "rad", False),
        ("dx_rad", "dX_2000A", "rad", True), ("dy_rad", "dY_2000A", "rad", True),
    ):
        expected = theirs[column].filled(np.nan).to_value(unit) if hasattr(theirs[column], "filled") else theirs[column].to_value(unit)
        given = np.isfinite(expected) & (ours.array("mjd_utc_1") <= ours.last_observed_mjd)
        assert given.sum() > 19000, name
        assert np.abs(ours.array(name)[given] - expected[given]).max() < 1e-18, name
        assert np.isfinite(ours.array(name)).all() and (none or np.isfinite(expected).all())


def test_ut1_is_taken_from_tai(theirs):
    """UT1 - UTC of the file plus UTC - TAI of the same day (leap seconds by astropy): to 1e-9 s."""
    from astropy.time import Time

    ours = bundled_earth_orientation()
    days = Time(ours.array("mjd_utc_1"), format="mjd", scale="utc")
    tai = days.tai
    tai_minus_utc = np.round(((tai.jd1 - days.jd1) + (tai.jd2 - days.jd2)) * 86400.0)
    expected = theirs["UT1_UTC"].to_value("s") - tai_minus_utc
    assert np.abs(ours.array("ut1_minus_tai_s") - expected).max() < 1e-9


def test_last_observed_day_and_reach_of_leap_seconds(theirs):
    from astropy.utils import iers
    from astropy_iers_data import IERS_LEAP_SECOND_FILE

    ours = bundled_earth_orientation()
    observed = np.asarray(theirs["UT1Flag"]) != "P"
    assert ours.last_observed_mjd == theirs["MJD"].value[observed].max()
    expires = iers.LeapSeconds.from_iers_leap_seconds(IERS_LEAP_SECOND_FILE).expires
    assert ours.leap_seconds_hold_until_mjd == round(expires.mjd)
    assert ours.name.startswith("IERS finals2000A of astropy-iers-data 0.20")
    assert bundled_earth_orientation() is ours
