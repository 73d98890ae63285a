"""Earth-fixed (ITRS) and celestial (GCRS) frames over one arc, with Earth orientation given as plain arrays.

The celestial part (X, Y, s of IAU 2006/2000A) is splined over nodes of at most one hour; the Earth rotation angle is
exact at every epoch. Times are seconds of TT past the arc epoch. Diurnal and semidiurnal tidal terms of UT1 and the pole
(up to 0.05 ms and 0.5 mas: 3 cm on the ground; IERS Conventions 2010, ch. 5.5 and 8, sizes from memory) are left out.
"""

from __future__ import annotations

import erfa
import numpy as np
from scipy.interpolate import CubicSpline

from shiftfix.physics.constants import TT_MINUS_TAI_S
from shiftfix.physics.motion.states import States
from shiftfix.physics.timescales import tt_jd, utc_mjd

_NODE_S = 3600.0
_REACH_S = 86400.0
"""How far past the span rotations are given (ephemeris nodes around an arc need it): 0.1 mm at 2 h, 6 cm at the end."""
_TURN = 2.0 * np.pi
_ROTATION_RATE = _TURN * 1.00273781191135448 / 86400.0
"""d(Earth rotation angle)/d(UT1) [rad/s], IAU 2000 (IERS Conventions 2010, eq. 5.15)."""


class EarthFrame:
    """Rotation between ITRS and GCRS over the span of one arc.

    Made by `from_orientation` or `without_orientation`.

    Attributes
    ----------
    degraded : bool
        Whether no Earth orientation is used (UT1 = UTC, no polar motion).
    bound_m : float
        Largest error of an Earth-fixed position that this causes [m]; 0 with Earth orientation.
    """

    def __init__(
        self, epoch_tai_ns: int, span_s: tuple[float, float], ut1: np.ndarray, pole: np.ndarray, offsets: np.ndarray,
        node_s: np.ndarray, degraded: bool,
    ) -> None:
        self.epoch_tai_ns, self.span_s, self.degraded = int(epoch_tai_ns), span_s, degraded
        self.bound_m = 420.0 if degraded else 0.0
        jd1, jd2 = tt_jd(epoch_tai_ns)
        day = jd2 + node_s / 86400.0
        x, y, s = erfa.xys06a(jd1, day)
        x, y = x + offsets[0], y + offsets[1]
        # TIO locator (IERS Conventions 2010, eq. 5.13) with the pole.
        tio = erfa.sp00(jd1, day)
        self._celestial = CubicSpline(node_s, np.column_stack([x, y, s, pole[0], pole[1], tio, ut1]))
        self._midnight, self._fraction_tt = jd1, jd2
        self._kept: tuple[bytes, np.ndarray, np.ndarray, np.ndarray] | None = None

    @classmethod
    def from_orientation(
        cls,
        epoch_tai_ns: int,
        span_s: tuple[float, float],
        mjd_utc: np.ndarray,
        ut1_minus_tai_s: np.ndarray,
        xp_rad: np.ndarray,
        yp_rad: np.ndarray,
        dx_rad: np.ndarray,
        dy_rad: np.ndarray,
    ) -> EarthFrame:
        """Return the frame of an arc from daily Earth orientation.

        Raises
        ------
        ValueError
            When the span is not inside the table.
        """
        nodes = _nodes(span_s)
        middle = utc_mjd(epoch_tai_ns)
        mjd = middle + nodes / 86400.0
        table = np.asarray(mjd_utc, float)
        if mjd[0] < table[0] or mjd[-1] > table[-1]:
            raise ValueError(
                f"times MJD {mjd[0]:.3f} to {mjd[-1]:.3f} are outside the Earth-orientation table, "
                f"which covers MJD {table[0]:.0f} to {table[-1]:.0f}"
            )
        # A few days around the arc are enough for the interpolation (linear values of a daily table would be off by
        # up to 0.1 ms of UT1, 5 cm; the cubic is below 0.02 ms).
        low = max(0, int(np.searchsorted(table, mjd[0])) - 4)
        high = min(len(table), int(np.searchsorted(table, mjd[-1])) + 4)
        columns = np.column_stack([ut1_minus_tai_s, xp_rad, yp_rad, dx_rad, dy_rad])[low:high]
        values = CubicSpline(table[low:high], columns)(mjd)
        return cls(epoch_tai_ns, span_s, values[:, 0], values[:, 1:3].T, values[:, 3:5].T, nodes, False)

    @classmethod
    def without_orientation(cls, epoch_tai_ns: int, span_s: tuple[float, float]) -> EarthFrame:
        """Return the frame with UT1 = UTC and no polar motion: off by up to `bound_m` in longitude."""
        nodes = _nodes(span_s)
        tai_minus_utc = epoch_tai_ns / 1e9 / 86400.0 + 40587.0 - utc_mjd(epoch_tai_ns)
        zero = np.zeros((2, nodes.size))
        return cls(epoch_tai_ns, span_s, np.full(nodes.size, -round(tai_minus_utc * 86400.0)), zero, zero, nodes, True)

    def rotation(self, times_s: np.ndarray) -> np.ndarray:
        """Return rotation matrices that turn ITRS into GCRS components, shape (n, 3, 3).

        Raises
        ------
        ValueError
            When a time lies more than a day outside the span.
        """
        return self._turned(times_s)[1]

    def _turned(self, times_s: np.ndarray) -> tuple[bytes, np.ndarray, np.ndarray, np.ndarray]:
        """Return key, rotation, its celestial part and the Earth rotation angle; the last epochs asked for are kept."""
        times = np.atleast_1d(np.asarray(times_s, float))
        key, kept = times.tobytes(), self._kept
        if kept is not None and kept[0] == key:
            return kept
        low, high = min(self.span_s[0], 0.0) - _REACH_S, max(self.span_s[1], 0.0) + _REACH_S
        if times.size and not (low <= times.min() and times.max() <= high):
            raise ValueError(
                f"times {times.min():.0f} to {times.max():.0f} s past the epoch are outside this frame, "
                f"which holds from {low:.0f} to {high:.0f} s"
            )
        x, y, s, xp, yp, tio, ut1_minus_tai = self._celestial(times).T
        # Earth rotation angle (IERS Conventions 2010, eq. 5.15) from UT1 split in whole and fractional days.
        tai_days = self._fraction_tt - TT_MINUS_TAI_S / 86400.0 + times / 86400.0
        ut1_days = tai_days + ut1_minus_tai / 86400.0
        since_2000 = (self._midnight - 2451545.0) + ut1_days
        angle = _TURN * ((self._midnight % 1.0 + ut1_days) % 1.0 + 0.7790572732640 + 0.00273781191135448 * since_2000)
        celestial = _celestial_matrix(x, y, s)
        self._kept = kept = (key, celestial @ _terrestrial_matrix(angle, xp, yp, tio), celestial, angle)
        return kept

    def spin(self, times_s: np.ndarray) -> np.ndarray:
        """Return the angular velocity of the Earth in GCRS [rad/s], (n, 3).

        The Earth turns about the celestial intermediate pole; the pole's own motion turns it by up to 5e-12 rad/s
        (3e-5 m/s on the ground) and polar motion by 2e-13 rad/s (1e-6 m/s). Both origins are non-rotating ones
        (IERS Conventions 2010, sec. 5.4), so neither turns the Earth along the pole. Products of the pole's
        coordinates with those rates (1e-18 rad/s) are left out.
        """
        times = np.atleast_1d(np.asarray(times_s, float))
        _, _, celestial, angle = self._turned(times)
        rates = self._celestial(times, 1)
        turn = _ROTATION_RATE * (1.0 + rates[:, 6])
        cosine, sine = np.cos(angle), np.sin(angle)
        # Polar motion turns by (-yp', -xp', 0) in axes fixed to the Earth.
        across = -cosine * rates[:, 4] + sine * rates[:, 3], -sine * rates[:, 4] - cosine * rates[:, 3]
        pole = celestial[:, :, 2]
        moving = np.column_stack([rates[:, :2], -(pole[:, 0] * rates[:, 0] + pole[:, 1] * rates[:, 1]) / pole[:, 2]])
        spin = pole * turn[:, None] + _cross(pole, moving)
        return spin + celestial[:, :, 0] * across[0][:, None] + celestial[:, :, 1] * across[1][:, None]

    def to_gcrs(self, times_s: np.ndarray, position_itrs_m: np.ndarray, velocity_itrs_m_s: np.ndarray | float = 0.0) -> States:
        """Return GCRS states of Earth-fixed positions and velocities (relative to the rotating Earth).

        The acceleration is that of uniform Earth-fixed velocity: centripetal and Coriolis terms. The turning of the
        axis itself and changes in the length of day are left out: below 3e-9 m/s2 on the ground.
        """
        times = np.atleast_1d(np.asarray(times_s, float))
        rotation = self.rotation(times)
        omega = self.spin(times)
        position = np.einsum("nij,nj->ni", rotation, np.broadcast_to(position_itrs_m, (times.size, 3)))
        own = np.einsum("nij,nj->ni", rotation, np.broadcast_to(np.asarray(velocity_itrs_m_s, float), (times.size, 3)))
        carried = _cross(omega, position)
        return States(position, own + carried, _cross(omega, carried + 2.0 * own))

    def to_itrs(
        self, times_s: np.ndarray, position_gcrs_m: np.ndarray, velocity_gcrs_m_s: np.ndarray
    ) -> tuple[np.ndarray, np.ndarray]:
        """Return Earth-fixed position [m] and velocity relative to the rotating Earth [m/s], each (n, 3)."""
        times = np.atleast_1d(np.asarray(times_s, float))
        rotation = self.rotation(times)
        position = np.broadcast_to(position_gcrs_m, (times.size, 3))
        own = np.broadcast_to(velocity_gcrs_m_s, (times.size, 3)) - _cross(self.spin(times), position)
        return np.einsum("nji,nj->ni", rotation, position), np.einsum("nji,nj->ni", rotation, own)


def _nodes(span_s: tuple[float, float]) -> np.ndarray:
    first, last = float(span_s[0]), float(span_s[1])
    if not (np.isfinite(first) and np.isfinite(last) and first <= last):
        raise ValueError(f"span {span_s}: two finite times in order are needed")
    # The epoch itself belongs to the span: states are reported there.
    first, last = min(first, 0.0) - 60.0, max(last, 0.0) + 60.0
    count = max(4, int(np.ceil((last - first) / _NODE_S)) + 1)
    return np.linspace(first, last, count)


def _cross(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    return np.stack(
        [
            a[:, 1] * b[:, 2] - a[:, 2] * b[:, 1],
            a[:, 2] * b[:, 0] - a[:, 0] * b[:, 2],
            a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0],
        ],
        axis=1,
    )


def _celestial_matrix(x: np.ndarray, y: np.ndarray, s: np.ndarray) -> np.ndarray:
    """Return CIRS to GCRS rotations from X, Y, s (IERS Conventions 2010, eq. 5.10)."""
    square = x * x + y * y
    # 1/(1 + cos d) with d the pole's distance from z.
    a = 1.0 / (1.0 + np.sqrt(1.0 - square))
    q = np.empty((x.size, 3, 3))
    q[:, 0, 0], q[:, 0, 1], q[:, 0, 2] = 1.0 - a * x * x, -a * x * y, x
    q[:, 1, 0], q[:, 1, 1], q[:, 1, 2] = -a * x * y, 1.0 - a * y * y, y
    q[:, 2, 0], q[:, 2, 1], q[:, 2, 2] = -x, -y, 1.0 - a * square
    sine, cosine = np.sin(s), np.cos(s)
    first, second = q[:, :, 0].copy(), q[:, :, 1].copy()
    q[:, :, 0] = first * cosine[:, None] - second * sine[:, None]
    q[:, :, 1] = first * sine[:, None] + second * cosine[:, None]
    return q


def _terrestrial_matrix(angle: np.ndarray, xp: np.ndarray, yp: np.ndarray, tio: np.ndarray) -> np.ndarray:
    """Return ITRS to CIRS rotations R3(-angle) R3(-tio) R2(xp) R1(yp) (IERS Conventions 2010, eq. 5.3 and 5.5)."""
    turn = angle + tio
    c, s = np.cos(turn), np.sin(turn)
    cx, sx, cy, sy = np.cos(xp), np.sin(xp), np.cos(yp), np.sin(yp)
    w = np.empty((angle.size, 3, 3))
    w[:, 0, 0], w[:, 0, 1], w[:, 0, 2] = cx, sx * sy, -sx * cy
    w[:, 1, 0], w[:, 1, 1], w[:, 1, 2] = 0.0, cy, sy
    w[:, 2, 0], w[:, 2, 1], w[:, 2, 2] = sx, -cx * sy, cx * cy
    out = np.empty_like(w)
    out[:, 0] = c[:, None] * w[:, 0] - s[:, None] * w[:, 1]
    out[:, 1] = s[:, None] * w[:, 0] + c[:, None] * w[:, 1]
    out[:, 2] = w[:, 2]
    return out
