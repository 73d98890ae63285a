"""Scenes for Monte-Carlo runs: geometry once from the independent simulator, noise and priors anew for every seed."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import worldline

from shiftfix.api import (
    AnswerSettings,
    BoundMotion,
    ClockModels,
    FitSettings,
    FixedMotion,
    Forces,
    Gates,
    HeightPrior,
    OrbitMotion,
    PolynomialMotion,
    Receiver,
    SampledPath,
    SurfaceMotion,
    ValuePrior,
    bundled_earth_orientation,
    earth_frame,
    fit_arc,
    ground_receiver,
    itrs_from_geodetic,
    observations,
    solve_arc,
    tai_ns_from_utc,
)

EPOCH = "2026-03-01T12:00:00Z"
SIX_PLACES = [(-40.8, -26.6), (-41.4, -25.6), (-40.6, -25.4), (-41.5, -26.5), (-41.0, -25.1), (-40.5, -26.1)]


def make_earth(span=2600.0):
    """Return the simulator's Earth and the solver's frame around one epoch."""
    earth = worldline.Earth(2026, 3, 1, 43200.0, 37, span)
    epoch = tai_ns_from_utc(EPOCH)
    frame, _ = earth_frame(epoch, (-span, span), bundled_earth_orientation())
    return earth, frame, epoch


@dataclass
class Campaign:
    """One scene: true curves of each station, how to bind the motion, and what is uncertain."""

    name: str
    bound: BoundMotion
    truth: np.ndarray
    receivers: tuple
    rows: object
    clean: np.ndarray
    clocks: ClockModels
    offset_sigma: float
    height: tuple | None
    plane: int

    def draw(self, seed: int):
        """Return rows with noise and the bound motion with drawn priors."""
        random = np.random.default_rng(seed)
        offsets = self.offset_sigma * random.standard_normal(len(self.receivers))
        z = self.clean + np.log1p(offsets[self.rows.station]) + self.rows.sigma * random.standard_normal(len(self.rows))
        bound = self.bound
        if self.height is not None:
            index, value, sigma = self.height
            drawn = value + sigma * random.standard_normal()
            prior = HeightPrior(drawn, sigma) if index is None else ValuePrior(index, drawn, sigma)
            bound = replace(bound, priors=(*bound.priors, prior))
        return replace(self.rows, z=z), bound

    def error(self, answer) -> tuple[np.ndarray, np.ndarray]:
        """Return position error and its covariance: three-dimensional, or horizontal where `plane` is 2."""
        position, _, _ = self.bound.state(self.bound.motion.at(self.truth))
        error, covariance = answer.position - position, answer.state_covariance[:3, :3]
        if self.plane == 3:
            return error, covariance
        up = position / np.linalg.norm(position)
        east = np.cross([0, 0, 1.0], up)
        axes = np.array([east / np.linalg.norm(east), np.cross(up, east / np.linalg.norm(east))])
        return axes @ error, axes @ covariance @ axes.T

    def settings(self, bound) -> AnswerSettings:
        return AnswerSettings(fit=FitSettings(clocks=self.clocks, priors=tuple(bound.priors)))

    def bound_m(self) -> float:
        """Return the Cramer-Rao bound of the position error [m], at the truth."""
        rows, bound = replace(self.rows, z=self.clean), self.bound
        priors = tuple(bound.priors)
        if self.height is not None:
            index, value, sigma = self.height
            priors += (HeightPrior(value, sigma) if index is None else ValuePrior(index, value, sigma),)
        fit = fit_arc(
            rows,
            self.receivers,
            bound.motion,
            self.truth,
            FitSettings(clocks=self.clocks, priors=priors, gates=Gates(keep_all=True)),
        )
        _, _, jacobian = bound.state(fit.path)
        p = self.truth.size
        covariance = (jacobian @ fit.covariance[:p, :p] @ jacobian.T)[:3, :3]
        position = bound.state(fit.path)[0]
        if self.plane == 2:
            up = position / np.linalg.norm(position)
            covariance = covariance - np.outer(up, up) * (up @ covariance @ up)
        return float(np.sqrt(np.trace(covariance)))


@dataclass(frozen=True)
class Outcome:
    """What many seeds gave: rms error over the bound, share inside the 95 % region, mean normalised error squared."""

    ratio: float
    coverage: float
    mean_square: float
    verdicts: dict


def run(campaign: Campaign, seeds) -> Outcome:
    """Return the outcome of a campaign over seeds, each started a little off the truth."""
    from scipy.stats import chi2

    squares, normalised, verdicts = [], [], {}
    limit = chi2.ppf(0.95, campaign.plane)
    for seed in seeds:
        rows, bound = campaign.draw(seed)
        start = campaign.truth + 0.02 * bound.motion.scales * np.random.default_rng(seed + 10**6).standard_normal(
            campaign.truth.size
        )
        answer = solve_arc(rows, campaign.receivers, bound, start[None], campaign.settings(bound))
        verdicts[answer.verdict] = verdicts.get(answer.verdict, 0) + 1
        if answer.position is None:
            continue
        error, covariance = campaign.error(answer)
        squares.append(error @ error)
        normalised.append(error @ np.linalg.solve(covariance, error))
    normalised = np.array(normalised)
    return Outcome(
        float(np.sqrt(np.mean(squares)) / campaign.bound_m()),
        float((normalised <= limit).mean()),
        float(normalised.mean()),
        verdicts,
    )


def _rows(clean, station, middle, count, sigma_hz, carrier):
    rows, order = observations(
        station=station,
        middle_s=middle,
        interval_s=np.full(middle.size, count),
        received_hz=np.full(middle.size, carrier),
        sigma_hz=np.full(middle.size, sigma_hz),
        reference_hz=carrier,
    )
    return rows, clean[order]


def leo_pass() -> Campaign:
    """Satellite pass over three stations, 437 MHz, 1 Hz, references 1e-9, a value every 4 s."""
    earth, frame, epoch = make_earth(1200.0)
    satellite = worldline.over(earth, -41.2, -26.4, 510e3, -9.9, span=700.0)
    places = [("A", -38.91, -23.12), ("B", -41.36, -29.04), ("C", -43.87, -25.40)]
    receivers, clean, station, middle = [], [], [], []
    for k, (name, latitude, longitude) in enumerate(places):
        ground = worldline.Ground(earth, latitude, longitude, 50.0)
        t = np.arange(-300.0, 301.0, 4.0)
        t = t[worldline.elevation(satellite, ground, t) > 5]
        clean.append(worldline.log_received(satellite, ground, t - 0.5, t + 0.5))
        station.append(np.full(t.size, k))
        middle.append(t)
        receivers.append(
            ground_receiver(
                name, frame, itrs_from_geodetic(np.radians(latitude), np.radians(longitude), 50.0), offset_sigma=1e-9
            )
        )
    rows, clean = _rows(np.concatenate(clean), np.concatenate(station), np.concatenate(middle), 1.0, 1.0, 437e6)
    # The scene has zonal terms only: the solver is told so.
    forces = Forces(degree=0, sun=False, moon=False, relativity=False, radiation=False, drag=False)
    motion = OrbitMotion(epoch, (-320.0, 320.0), frame, forces)
    bound = BoundMotion("orbit", motion, None, motion.propagate_batch, "GCRS", frame)
    return Campaign(
        "leo pass", bound, satellite.state(np.zeros(1))[0], tuple(receivers), rows, clean, ClockModels(), 1e-9, None, 3
    )


def vessel_with_turn() -> Campaign:
    """Vessel of 12 m/s with a turn of 50 degrees, four fixed stations, 158.3 MHz, 0.5 Hz, references 1e-9."""
    earth, frame, _ = make_earth(2000.0)
    legs = [
        (-1e9, 12 * np.sin(np.radians(20)), 12 * np.cos(np.radians(20))),
        (103.0, 12 * np.sin(np.radians(70)), 12 * np.cos(np.radians(70))),
    ]
    vessel = worldline.Vessel(earth, -40.66, -25.31, 0.0, legs, 1300.0)
    places = [("A", -40.58, -25.22), ("B", -40.86, -24.79), ("C", -40.31, -24.86), ("D", -40.95, -25.49)]
    receivers, clean, station, middle = [], [], [], []
    for k, (name, latitude, longitude) in enumerate(places):
        ground = worldline.Ground(earth, latitude, longitude, 30.0)
        t = np.arange(-1195.0, 1200.0, 10.0)
        clean.append(worldline.log_received(vessel, ground, t - 5, t + 5))
        station.append(np.full(t.size, k))
        middle.append(t)
        receivers.append(
            ground_receiver(
                name, frame, itrs_from_geodetic(np.radians(latitude), np.radians(longitude), 30.0), offset_sigma=1e-9
            )
        )
    rows, clean = _rows(np.concatenate(clean), np.concatenate(station), np.concatenate(middle), 10.0, 0.5, 158.3e6)
    motion = SurfaceMotion(frame, legs=2)
    truth = np.array(
        [np.radians(-40.66), np.radians(-25.31), 0.0, legs[0][1], legs[0][2], legs[1][1], legs[1][2], 103.0]
    )
    names = motion.parameter_names
    assert names[3:] == ("east_1_m_s", "north_1_m_s", "east_2_m_s", "north_2_m_s", "turn_2_s")
    bound = BoundMotion("surface", motion, None, motion.states_batch, "ITRS", frame)
    return Campaign("vessel", bound, truth, tuple(receivers), rows, clean, ClockModels(), 1e-9, (2, 0.0, 5.0), 2)


def beacon_from_orbit() -> Campaign:
    """Beacon on the ground heard by a low orbiter, 406 MHz, a value of 2 Hz every 4 s, 5 degrees off the track."""
    earth, frame, _ = make_earth(1200.0)
    beacon = worldline.Ground(earth, -41.2, -26.4, 20.0)
    orbiter = worldline.over(earth, -41.2, -20.0, 850e3, -8.0, span=900.0)
    t = np.arange(-400.0, 401.0, 4.0)
    t = t[worldline.elevation(orbiter, beacon, t) > 3]
    clean = worldline.log_received(beacon, orbiter, t - 0.25, t + 0.25)
    nodes = np.arange(-800.0, 801.0, 30.0)
    state = orbiter.state(nodes)
    receivers = (Receiver("PETREL-A", SampledPath(nodes, state[:, :3], state[:, 3:], None), moving=True),)
    rows, clean = _rows(clean, np.zeros(t.size, int), t, 0.5, 2.0, 406e6)
    motion = FixedMotion(frame)
    bound = BoundMotion("fixed", motion, None, motion.states_batch, "ITRS", frame)
    truth = np.array([np.radians(-41.2), np.radians(-26.4), 20.0])
    return Campaign("beacon", bound, truth, receivers, rows, clean, ClockModels(), 0.0, (2, 20.0, 100.0), 2)


def aircraft() -> Campaign:
    """Aircraft of 230 m/s at 11 km over six stations, 130 MHz, 0.5 Hz, references 1e-9, height known to 200 m."""
    earth, frame, _ = make_earth(1200.0)
    plane = worldline.Straight(earth, -41.0, -26.0, 11000.0, 200.0, 110.0, 0.0)
    receivers, clean, station, middle = [], [], [], []
    for k, (latitude, longitude) in enumerate(SIX_PLACES):
        ground = worldline.Ground(earth, latitude, longitude, 30.0)
        t = np.arange(-148.0, 150.0, 4.0)
        clean.append(worldline.log_received(plane, ground, t - 1, t + 1))
        station.append(np.full(t.size, k))
        middle.append(t)
        receivers.append(
            ground_receiver(
                f"S{k}", frame, itrs_from_geodetic(np.radians(latitude), np.radians(longitude), 30.0), offset_sigma=1e-9
            )
        )
    rows, clean = _rows(np.concatenate(clean), np.concatenate(station), np.concatenate(middle), 2.0, 0.5, 130e6)
    motion = PolynomialMotion(frame, degree=1)
    truth = np.concatenate([plane.itrs(np.zeros(1))[0], plane.v])
    bound = BoundMotion("polynomial", motion, None, motion.states_batch, "ITRS", frame)
    return Campaign(
        "aircraft", bound, truth, tuple(receivers), rows, clean, ClockModels(), 1e-9, (None, 11000.0, 200.0), 3
    )


def turning_aircraft() -> Campaign:
    """The same flight with a constant acceleration of 0.3 m/s2 that is estimated, prior 3 m/s2 a component."""
    earth, frame, _ = make_earth(1200.0)
    plane = worldline.Straight(earth, -41.0, -26.0, 11000.0, 200.0, 110.0, 0.0)
    plane.acceleration = np.array([0.2, -0.1, 0.2])
    straight = plane.itrs
    plane.itrs = lambda t: straight(t) + 0.5 * np.atleast_1d(t)[:, None] ** 2 * plane.acceleration
    campaign = aircraft()
    rows = campaign.rows
    clean = np.empty(len(rows))
    for s, (latitude, longitude) in enumerate(SIX_PLACES):
        mine = rows.station == s
        ground = worldline.Ground(earth, latitude, longitude, 30.0)
        clean[mine] = worldline.log_received(plane, ground, rows.start_s[mine], rows.stop_s[mine])
    motion = PolynomialMotion(frame, degree=2)
    priors = tuple(ValuePrior(k, 0.0, 3.0) for k in (6, 7, 8))
    bound = BoundMotion("polynomial", motion, None, motion.states_batch, "ITRS", frame, priors)
    truth = np.concatenate([straight(np.zeros(1))[0], plane.v, plane.acceleration])
    return Campaign(
        "turning aircraft",
        bound,
        truth,
        campaign.receivers,
        rows,
        clean,
        ClockModels(),
        1e-9,
        (None, 11000.0, 200.0),
        3,
    )


SCENES = {
    "leo pass": leo_pass,
    "vessel with a turn": vessel_with_turn,
    "beacon from orbit": beacon_from_orbit,
    "aircraft": aircraft,
    "turning aircraft": turning_aircraft,
}
