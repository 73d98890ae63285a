"""Earth orientation that is bundled with the installation: the IERS tables of the package astropy-iers-data."""

from __future__ import annotations

from functools import lru_cache
from importlib import metadata

import numpy as np
import pandas as pd

from shiftfix.tables.orientation import EarthOrientation

_ARCSEC = np.pi / 648000.0


@lru_cache(maxsize=1)
def bundled_earth_orientation() -> EarthOrientation:
    """Return the bundled table: observed values of IERS Bulletin A and B since 1973, predictions at its end.

    Notes
    -----
    File `finals2000A.all` (fixed columns, IERS readme.finals2000A): Bulletin B values where they are final, Bulletin A
    elsewhere. UT1 - TAI is formed day by day, so that it runs smoothly across leap seconds.
    """
    import astropy_iers_data
    import erfa

    path = astropy_iers_data.IERS_A_FILE
    with open(path, "rb") as handle:
        lines = handle.read().split(b"\n")
    width = 188
    block = np.frombuffer(b"".join(line.ljust(width)[:width] for line in lines if line.strip()), dtype="S1").reshape(
        -1, width
    )

    def column(first: int, last: int) -> np.ndarray:
        text = np.ascontiguousarray(block[:, first - 1 : last]).view(f"S{last - first + 1}").ravel()
        text = np.char.strip(text)
        return np.where(text == b"", b"nan", text).astype(float)

    mjd = column(8, 15)
    prefer = lambda b, a: np.where(np.isfinite(b), b, a)  # noqa: E731
    xp, yp = prefer(column(135, 144), column(19, 27)), prefer(column(145, 154), column(38, 46))
    ut1 = prefer(column(155, 165), column(59, 68))
    dx, dy = prefer(column(166, 175), column(98, 106)), prefer(column(176, 185), column(117, 125))
    good = np.isfinite(mjd) & np.isfinite(xp) & np.isfinite(yp) & np.isfinite(ut1)
    mjd, xp, yp, ut1, dx, dy = (a[good] for a in (mjd, xp, yp, ut1, dx, dy))
    # Predicted celestial pole offsets end earlier than the others: the last value stands on (below 1 mas, 3 cm).
    dx, dy = (pd.Series(a).ffill().fillna(0.0).to_numpy() for a in (dx, dy))
    leaps = erfa.leap_seconds.get()
    leaps = leaps[leaps["year"] >= 1972]
    first_days = np.array([erfa.cal2jd(int(r["year"]), int(r["month"]), 1)[1] for r in leaps])
    tai_minus_utc = leaps["tai_utc"][np.clip(np.searchsorted(first_days, mjd, side="right") - 1, 0, None)]
    observed = np.isfinite(column(155, 165))[good] | (block[good, 57] == b"I")
    with open(astropy_iers_data.IERS_LEAP_SECOND_FILE, encoding="ascii") as handle:
        words = next(line for line in handle if "expires on" in line).split("expires on")[1].split()
    month = (
        ("January February March April May June July August September October November December")
        .split()
        .index(words[1])
    )
    return EarthOrientation(
        rows=pd.DataFrame(
            {
                "mjd_utc_1": mjd,
                "ut1_minus_tai_s": ut1 - tai_minus_utc,
                "xp_rad": xp * _ARCSEC,
                "yp_rad": yp * _ARCSEC,
                "dx_rad": dx * 1e-3 * _ARCSEC,
                "dy_rad": dy * 1e-3 * _ARCSEC,
            }
        ),
        name=f"IERS finals2000A of astropy-iers-data {metadata.version('astropy-iers-data')}",
        leap_seconds_hold_until_mjd=erfa.cal2jd(int(words[2]), month + 1, int(words[0]))[1],
        last_observed_mjd=float(mjd[observed].max()) if observed.any() else float(mjd[0]),
    )
