"""Received frequency without the solver's forward code: emission proper time differenced over reception proper time.

Own Earth rotation (ERFA matrices with the IERS table through astropy), own orbit integration (scipy DOP853 with zonals),
own light time (plain fixed point), own clock rates (quadrature of GM/r + v**2/2). Shares nothing with shiftfix.physics.
"""

from __future__ import annotations

from dataclasses import dataclass

import astropy_iers_data
import erfa
import numpy as np
from astropy.utils import iers
from scipy.integrate import solve_ivp

C = 299792458.0
GM = 3.986004415e14
RADIUS = 6378136.3
ZONALS = {2: 1.0826261739e-3, 3: -2.5324e-6, 4: -1.6199e-6, 5: -2.277e-7, 6: 5.397e-7}
"""J2 to J6, EGM2008 tide-free (J2 as printed; the others rounded from memory: the scene needs its own field only)."""

_TABLE = None


def _iers():
    global _TABLE
    if _TABLE is None:
        iers.conf.auto_download = False
        _TABLE = iers.IERS_A.open(astropy_iers_data.IERS_A_FILE)
    return _TABLE


class Earth:
    """Earth rotation around one epoch; times are seconds of TAI past it."""

    def __init__(
        self, year: int, month: int, day: int, seconds_utc: float, tai_minus_utc: int, span_s: float = 7200.0
    ) -> None:
        day1, day2 = erfa.cal2jd(year, month, day)
        self.tai = (day1 + day2, (seconds_utc + tai_minus_utc) / 86400.0)
        utc = (day1 + day2, seconds_utc / 86400.0)
        table = _iers()
        nodes = np.arange(-span_s - 600.0, span_s + 601.0, 300.0)
        self.nodes = nodes
        tt = self.tai[1] + (32.184 + nodes) / 86400.0
        self.celestial = np.array([erfa.c2i06a(self.tai[0], t) for t in tt])
        ut1 = np.array([float(table.ut1_utc(utc[0], utc[1] + n / 86400.0).value) for n in nodes])
        self.ut1_minus_tai = ut1 - tai_minus_utc
        x, y = table.pm_xy(*utc)
        self.pole = erfa.pom00(float(x.to_value("rad")), float(y.to_value("rad")), erfa.sp00(self.tai[0], self.tai[1]))

    def matrix(self, t: np.ndarray) -> np.ndarray:
        """Return ITRS to GCRS matrices, (n, 3, 3)."""
        t = np.asarray(t, float)
        ut1 = self.tai[1] + (t + np.interp(t, self.nodes, self.ut1_minus_tai)) / 86400.0
        angle = erfa.era00(self.tai[0], ut1)
        k = np.clip(np.searchsorted(self.nodes, t) - 1, 0, len(self.nodes) - 2)
        share = ((t - self.nodes[k]) / 300.0)[:, None, None]
        celestial = (1 - share) * self.celestial[k] + share * self.celestial[k + 1]
        spin = np.zeros((t.size, 3, 3))
        spin[:, 0, 0] = spin[:, 1, 1] = np.cos(angle)
        spin[:, 0, 1], spin[:, 1, 0], spin[:, 2, 2] = np.sin(angle), -np.sin(angle), 1.0
        return np.transpose(self.pole @ spin @ celestial, (0, 2, 1))


@dataclass
class Ground:
    """Point fixed to the ground: latitude and longitude [deg], height [m]."""

    earth: Earth
    latitude: float
    longitude: float
    height: float = 0.0

    def itrs(self, t):
        place = erfa.gd2gc(1, np.radians(self.longitude), np.radians(self.latitude), self.height)
        return np.broadcast_to(place, (np.size(t), 3))

    def position(self, t):
        return np.einsum("nij,nj->ni", self.earth.matrix(t), self.itrs(t))

    def velocity(self, t, h=0.5):
        return (self.position(np.asarray(t) + h) - self.position(np.asarray(t) - h)) / (2 * h)


class Vessel(Ground):
    """Mover on the ellipsoid: legs of constant east and north velocity [m/s], each with its start time [s]."""

    def __init__(self, earth, latitude, longitude, height, legs, span):
        super().__init__(earth, latitude, longitude, height)
        self.legs, a, f = legs, 6378137.0, 1 / 298.257223563
        e2 = f * (2 - f)

        def rates(t, y, east, north):
            s = 1 - e2 * np.sin(y[0]) ** 2
            return [north / (a * (1 - e2) / s**1.5 + height), east / ((a / np.sqrt(s) + height) * np.cos(y[0]))]

        self.parts = []
        for forward in (True, False):
            y, t = [np.radians(latitude), np.radians(longitude)], 0.0
            edges = [leg[0] for leg in legs[1:]]
            stops = [e for e in edges if (e > 0) == forward and e != 0] + [span if forward else -span]
            stops = sorted(stops, key=abs)
            for stop in stops:
                middle = 0.5 * (t + stop)
                leg = [q for q in legs if q[0] <= middle][-1] if any(q[0] <= middle for q in legs) else legs[0]
                run = solve_ivp(
                    rates,
                    (t, stop),
                    y,
                    args=(leg[1], leg[2]),
                    rtol=1e-12,
                    atol=1e-15,
                    dense_output=True,
                    method="DOP853",
                )
                self.parts.append((min(t, stop), max(t, stop), run.sol))
                t, y = stop, run.y[:, -1]

    def itrs(self, t):
        t = np.atleast_1d(np.asarray(t, float))
        out = np.empty((t.size, 3))
        for low, high, solution in self.parts:
            inside = (t >= low - 1e-9) & (t <= high + 1e-9)
            if inside.any():
                latitude, longitude = solution(np.clip(t[inside], low, high))
                out[inside] = erfa.gd2gc(1, longitude, latitude, np.full(latitude.size, self.height))
        return out


class Straight(Ground):
    """Aircraft: straight line in ITRS, velocity as east, north, up [m/s] at the start."""

    def __init__(self, earth, latitude, longitude, height, east, north, up=0.0):
        super().__init__(earth, latitude, longitude, height)
        f, g = np.radians(latitude), np.radians(longitude)
        axes = np.array(
            [
                [-np.sin(g), np.cos(g), 0],
                [-np.sin(f) * np.cos(g), -np.sin(f) * np.sin(g), np.cos(f)],
                [np.cos(f) * np.cos(g), np.cos(f) * np.sin(g), np.sin(f)],
            ]
        )
        self.v = np.array([east, north, up]) @ axes

    def itrs(self, t):
        return super().itrs(t) + np.atleast_1d(t)[:, None] * self.v


class Orbit:
    """Satellite under the zonal field about a pole, from a GCRS state at time 0."""

    def __init__(self, position, velocity, span, pole=(0.0, 0.0, 1.0), zonals=ZONALS):
        self.zonals, self.pole = zonals, np.asarray(pole, float)
        state = np.concatenate([position, velocity])
        run = dict(rtol=1e-12, atol=1e-6, dense_output=True, method="DOP853", max_step=20.0)
        self.after = solve_ivp(self.rates, (0, span), state, **run).sol
        self.before = solve_ivp(self.rates, (0, -span), state, **run).sol

    def rates(self, t, y):
        x = y[:3]
        r = np.sqrt(x @ x)
        s = x @ self.pole / r
        p = [1.0, s]
        d = [0.0, 1.0]
        for n in range(2, 7):
            p.append(((2 * n - 1) * s * p[-1] - (n - 1) * p[-2]) / n)
            d.append(n * p[n - 1] + s * d[n - 1])
        a = -GM * x / r**3
        for n, j in self.zonals.items():
            # Gradient of GM/r (R/r)**n J P_n(sin) with the sign of the potential -J.
            k = GM / r**2 * j * (RADIUS / r) ** n
            a = a + k * ((n + 1) * p[n] + s * d[n]) * x / r
            a = a - k * d[n] * self.pole
        return np.concatenate([y[3:], a])

    def state(self, t):
        t = np.atleast_1d(np.asarray(t, float))
        out = np.empty((6, t.size))
        late = t >= 0
        if late.any():
            out[:, late] = self.after(t[late])
        if (~late).any():
            out[:, ~late] = self.before(t[~late])
        return out.T

    def position(self, t):
        return self.state(t)[:, :3]

    def velocity(self, t):
        return self.state(t)[:, 3:]


def light_time(emitter, receiver, t):
    """Return the light time to receptions at t by plain iteration."""
    place = receiver.position(t)
    out = np.zeros(np.size(t))
    for _ in range(12):
        out = np.linalg.norm(place - emitter.position(t - out), axis=1) / C
    return out


def _clock_loss(body, start, stop):
    """Return coordinate minus proper time between two times, by five-point Gauss quadrature."""
    nodes, weights = np.polynomial.legendre.leggauss(5)
    half = 0.5 * (stop - start)
    total = np.zeros(np.size(start))
    for x, w in zip(nodes, weights, strict=True):
        t = start + half * (1 + x)
        r, v = body.position(t), body.velocity(t)
        rate = (GM / np.linalg.norm(r, axis=1) + 0.5 * (v * v).sum(1)) / C**2
        total += w * half * rate
    return total


def log_received(emitter, receiver, start, stop):
    """Return ln(mean received / rest frequency) over counts [start, stop] at the receiver."""
    start, stop = np.asarray(start, float), np.asarray(stop, float)
    first, last = light_time(emitter, receiver, start), light_time(emitter, receiver, stop)
    lost_emitter = _clock_loss(emitter, start - first, stop - last)
    lost_receiver = _clock_loss(receiver, start, stop)
    span = stop - start
    return np.log1p((lost_receiver - lost_emitter - (last - first)) / (span - lost_receiver))


def elevation(emitter, receiver, t):
    """Return the geocentric elevation of the emitter [deg]."""
    place = receiver.position(t)
    line = emitter.position(t) - place
    return np.degrees(np.arcsin((line * place).sum(1) / np.linalg.norm(line, axis=1) / np.linalg.norm(place, axis=1)))


def over(earth, latitude, longitude, altitude, heading, offset_s=0.0, span=2000.0):
    """Return a circular orbit that passes over a place at time `offset_s` with a heading [deg] (celestial)."""
    up = Ground(earth, latitude, longitude, 0.0).position(np.array([offset_s]))[0]
    up = up / np.linalg.norm(up)
    east = np.cross([0, 0, 1.0], up)
    east /= np.linalg.norm(east)
    north = np.cross(up, east)
    a = RADIUS + altitude
    h = np.radians(heading)
    v = np.sqrt(GM / a) * (np.cos(h) * north + np.sin(h) * east)
    back = -np.sqrt(GM / a**3) * offset_s
    along = v / np.linalg.norm(v)
    place, speed = a * (np.cos(back) * up + np.sin(back) * along), np.linalg.norm(v)
    # The celestial intermediate pole carries the zonal field: 0.15 deg from z in 2026, worth 6 mm/s after four minutes.
    pole = earth.celestial[len(earth.celestial) // 2][2]
    return Orbit(place, speed * (np.cos(back) * along - np.sin(back) * up), span, pole)
