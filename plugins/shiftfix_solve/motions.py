"""First-party motions bound to an arc: candidates for the search and priors from the options."""

from __future__ import annotations

import numpy as np

from shiftfix.api import (
    BoundMotion,
    FixedMotion,
    Forces,
    HeightPrior,
    OrbitMotion,
    PolynomialMotion,
    SurfaceMotion,
    ValuePrior,
    circular_orbits,
    geodetic_from_itrs,
    ground_places,
    itrs_from_geodetic,
    tai_ns_from_utc,
)


def orbit(options, scene) -> BoundMotion:
    """Return an orbit about the Earth."""
    radiation, drag = options.radiation_scale_sigma > 0, options.drag_scale_sigma > 0
    motion = OrbitMotion(
        scene.epoch_tai_ns,
        scene.span_s,
        scene.frame,
        Forces(drag=options.drag),
        estimate_radiation=radiation,
        estimate_drag=drag,
    )
    sigmas = [s for s in (options.radiation_scale_sigma, options.drag_scale_sigma) if s > 0]
    priors = tuple(ValuePrior(6 + k, 1.0, s) for k, s in enumerate(sigmas))

    def candidates(data):
        states, _ = circular_orbits(data)
        return np.hstack([states, np.ones((len(states), len(sigmas)))])

    def batch(parameters, times):
        return motion.propagate_batch(parameters[:, :6], times)

    return BoundMotion("orbit", motion, candidates, batch, "GCRS", scene.frame, priors)


def surface(options, scene) -> BoundMotion:
    """Return a vessel or vehicle on the ellipsoid."""
    turns = None
    if options.turn_times:
        turns = np.array([(tai_ns_from_utc(t) - scene.epoch_tai_ns) * 1e-9 for t in options.turn_times])
    motion = SurfaceMotion(scene.frame, legs=options.legs, turn_times_s=turns)
    names = motion.parameter_names
    priors = [ValuePrior(names.index("height_m"), options.height.value, options.height.sigma or 1.0)]
    priors += [
        ValuePrior(k, 0.0, options.speed_sigma)
        for k, name in enumerate(names)
        if name.endswith("_m_s") or "_m_s_" in name
    ]
    turn_index = [k for k, name in enumerate(names) if name.startswith("turn")]
    first, last = scene.span_s
    for k in turn_index:
        priors.append(ValuePrior(k, 0.5 * (first + last), 0.5 * (last - first)))

    def candidates(data):
        latitude, longitude, height = _region(options, scene, data, options.height.value)
        base = np.zeros((len(latitude), len(names)))
        base[:, 0], base[:, 1], base[:, names.index("height_m")] = latitude, longitude, height
        if not turn_index:
            return base
        count = len(turn_index)
        out = []
        for shift in (0.3, 0.5, 0.7) if count == 1 else (0.0,):
            moved = base.copy()
            for j, k in enumerate(turn_index):
                share = shift if count == 1 else (j + 1) / (count + 1)
                moved[:, k] = first + share * (last - first)
            out.append(moved)
        return np.vstack(out)

    return BoundMotion(
        "surface",
        motion,
        candidates,
        motion.states_batch,
        "ITRS",
        scene.frame,
        tuple(priors),
        scanned=tuple(turn_index),
    )


def fixed(options, scene) -> BoundMotion:
    """Return an emitter at rest on the ground."""
    motion = FixedMotion(scene.frame)
    priors = (ValuePrior(2, options.height.value, options.height.sigma or 1.0),)

    def candidates(data):
        return np.column_stack(_region(options, scene, data, options.height.value))

    return BoundMotion("fixed", motion, candidates, motion.states_batch, "ITRS", scene.frame, priors)


def polynomial(options, scene) -> BoundMotion:
    """Return a straight flight in the Earth-fixed frame."""
    motion = PolynomialMotion(scene.frame, degree=options.degree)
    priors: list = [ValuePrior(k, 0.0, options.speed_sigma) for k in (3, 4, 5)]
    if options.degree == 2:
        priors += [ValuePrior(k, 0.0, options.acceleration_sigma) for k in (6, 7, 8)]
    if options.height is not None:
        priors.append(HeightPrior(options.height.value, options.height.sigma or 1.0))
    heights = [options.height.value] if options.height is not None else [1e3, 6e3, 11e3, 20e3]

    def candidates(data):
        out = []
        for height in heights:
            latitude, longitude, h = _region(options, scene, data, height)
            position = itrs_from_geodetic(latitude, longitude, h)
            out.append(np.hstack([position, np.zeros((len(position), 3 * options.degree))]))
        return np.vstack(out)

    return BoundMotion(
        "polynomial",
        motion,
        candidates,
        motion.states_batch,
        "ITRS",
        scene.frame,
        tuple(priors),
        options.height is not None,
    )


def _region(options, scene, data, height_m: float):
    """Return places to start from: the declared region, what orbiting receivers see, or the stations' surroundings."""
    frame = scene.frame
    if options.centre_latitude is not None and options.centre_longitude is not None:
        centre = itrs_from_geodetic(np.radians(options.centre_latitude), np.radians(options.centre_longitude), 0.0)
        return ground_places(centre, options.radius or 500e3, height_m)
    moving = [s for s in np.unique(data.station) if scene.receivers[s].moving]
    position, _ = frame.to_itrs(data.times_s, data.position, data.velocity)
    altitude = np.linalg.norm(position, axis=1) - 6371e3
    if moving and altitude.max() > 50e3:
        # Places that every receiver position has above its horizon.
        centre = position.sum(0)
        unit = position / np.linalg.norm(position, axis=1)[:, None]
        radius = 6371e3 * float(np.arccos(np.clip(6371e3 / np.linalg.norm(position, axis=1), -1, 1)).max()) + 300e3
        latitude, longitude, height = ground_places(centre, options.radius or radius, height_m, 1500)
        place = itrs_from_geodetic(latitude, longitude, height)
        line = position[None] - place[:, None]
        up = place / np.linalg.norm(place, axis=1)[:, None]
        elevation = np.einsum("bni,bi->bn", line, up) / np.linalg.norm(line, axis=2)
        # Two degrees below the horizon of refraction and lattice spacing; a few rows may come from beyond it.
        seen = (elevation > -0.05).mean(1) > 0.9
        seen = seen if seen.any() else np.ones(len(place), bool)
        del unit
        return latitude[seen], longitude[seen], height[seen]
    centre = position.mean(0)
    spread = float(np.linalg.norm(position - centre, axis=1).max())
    latitude, longitude, _ = geodetic_from_itrs(centre)
    centre = itrs_from_geodetic(latitude, longitude, 0.0)
    return ground_places(centre, options.radius or (3.0 * spread + 150e3), height_m, 300)
