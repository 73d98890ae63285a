"""Predicted ln(received / rest frequency) of an arc for any emitter path, with partial derivatives.

Reception events are collected once: counts of one unbroken record share their end events, so that n chained rows cost
n + 1 light-time solutions. The station offset and the rest frequency are linear in the logarithm and stand apart
(`shiftfix.estimation.nuisance`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from shiftfix.estimation.observations import Observations
from shiftfix.estimation.receivers import Receiver
from shiftfix.physics import constants, doppler, gravity, lighttime, troposphere
from shiftfix.physics.motion.states import Path, States


@dataclass(frozen=True)
class Media:
    """Which media enter the prediction.

    Parameters
    ----------
    troposphere : bool
        Slant delay of a standard atmosphere with Niell mapping, at receivers below 20 km.
    day_of_year : float
        For the mapping function.
    """

    troposphere: bool = False
    day_of_year: float = 28.0


class ForwardModel:
    """Observation equation of one arc.

    Parameters
    ----------
    rows : Observations
    receivers : sequence of Receiver
        Indexed by `rows.station`.
    media : Media
    """

    def __init__(self, rows: Observations, receivers: Sequence[Receiver], media: Media | None = None) -> None:
        self.rows, self.receivers, self.media = rows, tuple(receivers), media or Media()
        self.mean = rows.stop_s > rows.start_s
        self._collect_events()

    def _collect_events(self) -> None:
        rows = self.rows
        times, index = [], np.empty((2, len(rows)), np.int64)
        stations: list[np.ndarray] = []
        states: list[States] = []
        count = 0
        for s, receiver in enumerate(self.receivers):
            mine = np.flatnonzero(rows.station == s)
            if not mine.size:
                continue
            unique, inverse = np.unique(np.concatenate([rows.start_s[mine], rows.stop_s[mine]]), return_inverse=True)
            index[:, mine] = count + inverse.reshape(2, -1)
            times.append(unique)
            states.append(receiver.path.states(unique))
            stations.append(np.full(unique.size, s))
            count += unique.size
        self.event_times_s = np.concatenate(times) if times else np.empty(0)
        self.event_station = np.concatenate(stations) if stations else np.empty(0, np.int64)
        self.first, self.last = index
        self.receiver = States(*(np.concatenate(part) for part in zip(*states, strict=True))) if states else None
        if self.receiver is not None:
            self.receiver_potential = gravity.earth_potential(self.receiver.position)
            self.interval_s = np.where(self.mean, rows.interval_s, 1.0)
            self.receiver_lost_s = doppler.time_lost(self.receiver, self.first, self.last, self.interval_s)
            # Media are evaluated with the geocentric vertical turned to the geodetic one by the ellipsoid's normal.
            normal = self.receiver.position * np.array([1.0, 1.0, 1.0 / (1.0 - constants.WGS84_E2)])
            self.vertical = normal / np.linalg.norm(normal, axis=1)[:, None]

    def links(self, path: Path) -> lighttime.Link:
        """Return the one-way links to all reception events."""
        return lighttime.one_way(self.event_times_s, self.receiver.position, path)

    def predict(self, path: Path, link: lighttime.Link | None = None) -> np.ndarray:
        """Return ln(mean received / rest frequency) without station offset, shape (n,)."""
        link = self.links(path) if link is None else link
        if self.mean.all():
            out = self._mean(link)
        elif not self.mean.any():
            out = self._instantaneous(link)[self.first]
        else:
            out = np.where(self.mean, self._mean(link), self._instantaneous(link)[self.first])
        if self.media.troposphere:
            out = out - self.delay_rate(self.slant_delay(link), link)
        return out

    def partials(self, path: Path, link: lighttime.Link | None = None) -> np.ndarray:
        """Return d ln(received) / d motion parameters, shape (n, p); media partials (below 1e-5 of it) are left out."""
        link = self.links(path) if link is None else link
        d_position, d_velocity = path.partials(link.emission_times_s)
        if self.mean.all():
            return self._mean_partials(link, d_position, d_velocity)
        instantaneous = doppler.log_ratio_partials(link, self.receiver, d_position, d_velocity)[self.first]
        if not self.mean.any():
            return instantaneous
        return np.where(self.mean[:, None], self._mean_partials(link, d_position, d_velocity), instantaneous)

    def _instantaneous(self, link: lighttime.Link) -> np.ndarray:
        return doppler.log_ratio(
            link,
            self.receiver,
            receiver_potential=self.receiver_potential,
            emitter_potential=gravity.earth_potential(link.emitter.position),
            light_delay=True,
        )

    def _mean(self, link: lighttime.Link) -> np.ndarray:
        return doppler.mean_ratio_of_events(link, self.first, self.last, self.interval_s, self.receiver_lost_s)

    def _mean_partials(self, link: lighttime.Link, d_position: np.ndarray, d_velocity: np.ndarray) -> np.ndarray:
        return doppler.mean_partials_of_events(link, self.first, self.last, self.interval_s, d_position, d_velocity)

    def sin_elevation(self, link: lighttime.Link) -> np.ndarray:
        """Return the sine of the geometric elevation of the emitter at each event."""
        return -np.einsum("ni,ni->n", link.direction, self.vertical)

    def slant_delay(self, link: lighttime.Link) -> np.ndarray:
        """Return the tropospheric delay at each event [m], of the standard atmosphere at each receiver."""
        elevation = np.arcsin(np.clip(self.sin_elevation(link), np.sin(np.radians(2.0)), 1.0))
        out = np.zeros(elevation.size)
        for s, receiver in enumerate(self.receivers):
            if not receiver.height_m < 20e3:
                continue
            mine = self.event_station == s
            out[mine] = troposphere.slant_delay(
                elevation[mine], receiver.latitude_rad, receiver.height_m, self.media.day_of_year
            )
        return out

    def zenith_mapping(self, link: lighttime.Link) -> np.ndarray:
        """Return d slant delay / d zenith delay at each event (wet mapping; the hydrostatic one differs by 5 % at 5 deg)."""
        elevation = np.arcsin(np.clip(self.sin_elevation(link), np.sin(np.radians(2.0)), 1.0))
        out = np.zeros(elevation.size)
        for s, receiver in enumerate(self.receivers):
            if receiver.height_m < 20e3:
                mine = self.event_station == s
                out[mine] = troposphere.niell_wet(elevation[mine], receiver.latitude_rad)
        return out

    def delay_rate(self, delay_m: np.ndarray, link: lighttime.Link) -> np.ndarray:
        """Return d(delay)/dt / c over each row [1] from delays at the events; corrections of the zenith delay included."""
        rows = self.rows
        if rows.zenith_correction_m.any():
            mapping = self.zenith_mapping(link)
            first = delay_m[self.first] + rows.zenith_correction_m * mapping[self.first]
            last = delay_m[self.last] + rows.zenith_correction_m * mapping[self.last]
        else:
            first, last = delay_m[self.first], delay_m[self.last]
        interval = np.where(self.mean, rows.interval_s, 1.0)
        rate = (last - first) / interval
        if not self.mean.all():
            point = ~self.mean
            rate[point] = self._point_rate(delay_m, link)[self.first][point]
        return rate / constants.SPEED_OF_LIGHT_M_S

    def _point_rate(self, delay_m: np.ndarray, link: lighttime.Link) -> np.ndarray:
        step = 0.5
        relative = link.emitter.velocity - self.receiver.velocity
        line = -link.direction * link.distance_m[:, None] + step * relative
        moved = link._replace(direction=-line / np.linalg.norm(line, axis=1)[:, None])
        return (self.slant_delay(moved) - delay_m) / step

    def elevation_deg(self, path: Path) -> np.ndarray:
        """Return the elevation of the emitter at the middle of each row [deg]."""
        s = self.sin_elevation(self.links(path))
        return np.degrees(np.arcsin(np.clip(0.5 * (s[self.first] + s[self.last]), -1.0, 1.0)))
