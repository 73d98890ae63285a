"""Orbit motion: partial derivatives, conservation laws, spans, refusals."""

import numpy as np
import pytest

from shiftfix.physics.motion.bodies import SunMoon
from shiftfix.physics.motion.orbit import Forces, OrbitMotion

GM, RADIUS, J2 = 3.986004415e14, 6378136.3, 1.0826261739e-3
TWO_BODY = Forces(
    degree=0, zonal_degree=0, sun=False, moon=False, relativity=False, radiation=False, drag=False
)
J2_ONLY = Forces(degree=0, zonal_degree=2, sun=False, moon=False, relativity=False, radiation=False, drag=False)


@pytest.mark.parametrize(
    "name, span_s, bound_1",
    [
        # Central differences of 10 m and 1 cm/s are themselves good to about 1e-8 of the largest element.
        ("leo", (-450.0, 450.0), 1e-7),
        ("leo", (0.0, 86400.0), 1e-6),
        ("meo", (-5000.0, 10120.0), 1e-7),
        ("eccentric", (-20000.0, 40000.0), 1e-6),
    ],
)
def test_partials_are_central_differences(name, span_s, bound_1, orbits, spin_frame, epoch_tai_ns):
    motion = OrbitMotion(epoch_tai_ns, span_s, spin_frame, Forces(), estimate_radiation=True, estimate_drag=True)
    parameters = np.append(orbits[name], [1.3, 0.8])
    times = np.linspace(*span_s, 41)
    d_position, d_velocity = motion.at(parameters).partials(times)
    assert d_position.shape == d_velocity.shape == (41, 3, 8)
    for column, step in enumerate([10.0, 10.0, 10.0, 0.01, 0.01, 0.01, 0.5, 0.5]):
        shift = np.zeros(8)
        shift[column] = step
        after, before = (motion.at(parameters + sign * shift).states(times) for sign in (1, -1))
        for partial, up, down in (
            (d_position, after.position, before.position),
            (d_velocity, after.velocity, before.velocity),
        ):
            numeric = (up - down) / (2.0 * step)
            largest = np.abs(numeric).max()
            # Changes below 1 cm or 0.01 mm/s show the rounding: drag on the navigation satellite, radiation in a pass.
            if largest * step > 1e-2 * (1.0 if partial is d_position else 1e-3):
                # Radiation after a day of LEO: the gradients of the shadow's edge and of relativity are left out.
                bound = 3e-5 if column == 6 and bound_1 > 1e-7 else bound_1
                assert np.abs(partial[:, :, column] - numeric).max() < bound * largest, column


def test_drag_is_felt_in_low_orbit_and_not_in_high(orbits, spin_frame, epoch_tai_ns):
    # 31 m in a day is the size named for no drag at all in a LEO; here at 500 km, mean activity, 0.022 m2/kg.
    day = (0.0, 86400.0)
    moved = {}
    for name in ("leo", "meo"):
        with_drag = OrbitMotion(epoch_tai_ns, day, spin_frame, Forces()).at(orbits[name])
        without = OrbitMotion(epoch_tai_ns, day, spin_frame, Forces(drag=False)).at(orbits[name])
        moved[name] = np.linalg.norm(with_drag.states(day).position[1] - without.states(day).position[1])
    assert 20.0 < moved["leo"] < 5000.0
    assert moved["meo"] < 1e-6


@pytest.mark.parametrize("name", ["leo", "meo", "eccentric"])
def test_two_body_energy_momentum_and_period(name, orbits, epoch_tai_ns):
    orbit = orbits[name]
    axis = 1.0 / (2.0 / np.linalg.norm(orbit[:3]) - orbit[3:] @ orbit[3:] / GM)
    period = 2.0 * np.pi * np.sqrt(axis**3 / GM)
    path = OrbitMotion(epoch_tai_ns, (-period, 2.0 * period), None, TWO_BODY).at(orbit)
    times = np.linspace(-period, 2.0 * period, 301)
    states = path.states(times)
    radius = np.linalg.norm(states.position, axis=1)
    energy = 0.5 * np.sum(states.velocity**2, axis=1) - GM / radius
    momentum = np.cross(states.position, states.velocity)
    # Rounding: 1e-16 per operation over some thousand operations.
    assert np.abs(energy / energy[0] - 1.0).max() < 3e-12
    assert np.abs(momentum - momentum[0]).max() < 3e-12 * np.linalg.norm(momentum[0])
    # After a whole period the state returns; 1e-13 of the phase is a micrometre.
    for t in (-period, period, 2.0 * period):
        assert np.linalg.norm(path.states(t).position[0] - orbit[:3]) < 1e-4
    # The acceleration is that of the force.
    assert np.abs(states.acceleration + GM * states.position / radius[:, None] ** 3).max() < 1e-9


@pytest.mark.parametrize("inclination_deg", [28.5, 63.4349, 98.1880])
def test_node_and_perigee_rates_by_flattening(inclination_deg, elements_state, epoch_tai_ns):
    """First-order secular rates of J2: node -1.5 J2 (R/p)^2 n cos i (textbook; checked numerically in the sources)."""
    a, e, i = 7_078_137.0, 0.02, np.radians(inclination_deg)
    orbit = elements_state(a, e, i)
    motion = OrbitMotion(epoch_tai_ns, (0.0, 20 * 86400.0 / 4), None, J2_ONLY)
    times = np.linspace(0.0, 432000.0, 4001)
    states = motion.at(orbit).states(times)
    normal = np.cross(states.position, states.velocity)
    node = np.unwrap(np.arctan2(normal[:, 0], -normal[:, 1]))
    slope = np.polyfit(times, node, 1)[0]
    # Mean elements from the mean of the osculating ones over the arc.
    speed_square = np.sum(states.velocity**2, axis=1)
    mean_axis = np.mean(1.0 / (2.0 / np.linalg.norm(states.position, axis=1) - speed_square / GM))
    tilt = np.mean(np.arccos(normal[:, 2] / np.linalg.norm(normal, axis=1)))
    n, p = np.sqrt(GM / mean_axis**3), mean_axis * (1 - e * e)
    expected = -1.5 * J2 * (RADIUS / p) ** 2 * n * np.cos(tilt)
    # Second order is J2 times as large, 0.1-0.3 %.
    assert slope == pytest.approx(expected, rel=4e-3)


@pytest.mark.parametrize("height_km, inclination_deg", [(500, 97.4018), (700, 98.1880), (705, 98.2084), (800, 98.6031)])
def test_sun_synchronous_orbits(height_km, inclination_deg, elements_state, epoch_tai_ns):
    """Sun-synchronous inclinations (practice, recomputed): the node moves by 360 degrees in a tropical year."""
    orbit = elements_state(6_378_137.0 + 1e3 * height_km, 1e-6, np.radians(inclination_deg))
    times = np.linspace(0.0, 10 * 86400.0, 3001)
    states = OrbitMotion(epoch_tai_ns, (0.0, 10 * 86400.0), None, J2_ONLY).at(orbit).states(times)
    normal = np.cross(states.position, states.velocity)
    node = np.unwrap(np.arctan2(normal[:, 0], -normal[:, 1]))
    rate_deg_day = np.degrees(np.polyfit(times, node, 1)[0]) * 86400.0
    # Osculating start elements are not the mean ones: up to 0.3 % in semi-axis, 1 % in the rate.
    assert rate_deg_day == pytest.approx(0.98565, rel=1e-2)


def test_any_order_of_times_and_epoch_outside_the_span(orbits, spin_frame, epoch_tai_ns):
    motion = OrbitMotion(epoch_tai_ns, (-3000.0, 9000.0), spin_frame)
    path = motion.at(orbits["leo"])
    times = np.random.default_rng(7).uniform(-3000.0, 9000.0, 200)
    mixed, ordered = path.states(times), path.states(np.sort(times))
    rank = np.argsort(times)
    assert np.abs(mixed.position[rank] - ordered.position).max() < 1e-8
    assert np.allclose(path.partials(times)[1][rank], path.partials(np.sort(times))[1], rtol=1e-9, atol=1e-12)
    later = OrbitMotion(epoch_tai_ns, (5000.0, 9000.0), spin_frame).at(orbits["leo"])
    assert np.abs(later.states([7777.0]).position - path.states([7777.0]).position).max() < 1e-4
    # Velocity is the derivative of position, acceleration that of velocity: cubic error of the difference, 1e-5.
    t = np.array([1234.0, -2222.0])
    before, at, after = path.states(t - 0.5), path.states(t), path.states(t + 0.5)
    assert np.abs(after.position - before.position - at.velocity).max() < 1e-3
    assert np.abs(after.velocity - before.velocity - at.acceleration).max() < 1e-5


def test_the_answer_does_not_depend_on_earlier_calls(orbits, spin_frame, epoch_tai_ns):
    used = OrbitMotion(epoch_tai_ns, (0.0, 6000.0), spin_frame)
    for shift in (5e4, -3e4, 1e5):
        used.at(orbits["leo"] + shift * np.array([1, 0, 0, 0, 0, 0]))
    fresh = OrbitMotion(epoch_tai_ns, (0.0, 6000.0), spin_frame)
    t = np.linspace(0.0, 6000.0, 50)
    assert np.array_equal(used.at(orbits["leo"]).states(t).position, fresh.at(orbits["leo"]).states(t).position)


def test_state_transition_composes(orbits, spin_frame, epoch_tai_ns):
    whole = OrbitMotion(epoch_tai_ns, (0.0, 5000.0), spin_frame, Forces(sun=False, moon=False, radiation=False))
    path = whole.at(orbits["leo"])
    transition = path.state_transition(np.array([0.0, 5000.0]))
    assert np.abs(transition[0] - np.eye(6)).max() < 1e-9
    # A conservative field, so near enough symplectic; drag and the turning Earth change the volume by 1e-6 at most.
    assert np.linalg.det(transition[1]) == pytest.approx(1.0, abs=1e-5)


@pytest.mark.parametrize("speed", [1.0, 3.0])
def test_hyperbolic_orbit(speed, epoch_tai_ns):
    orbit = np.array([7.0e6, 1.0e6, -2.0e6, 3.0e3 * speed, 11.0e3 * speed, 4.0e3 * speed])
    states = OrbitMotion(epoch_tai_ns, (-20000.0, 20000.0), None, TWO_BODY).at(orbit).states(np.linspace(-2e4, 2e4, 99))
    energy = 0.5 * np.sum(states.velocity**2, axis=1) - GM / np.linalg.norm(states.position, axis=1)
    assert energy[0] > 0
    assert np.abs(energy / energy[0] - 1.0).max() < 1e-11


def test_refusals(orbits, spin_frame, epoch_tai_ns):
    motion = OrbitMotion(epoch_tai_ns, (0.0, 3000.0), spin_frame)
    with pytest.raises(ValueError, match="km from the Earth's centre"):
        motion.at(np.array([7.0e6, 0.0, 0.0, 100.0, 10.0, 0.0]))
    with pytest.raises(ValueError, match="finite"):
        motion.at(np.array([7.0e6, 0.0, np.nan, 100.0, 10.0, 0.0]))
    with pytest.raises(ValueError, match="6 to 6"):
        motion.at(np.append(orbits["leo"], 1.0))
    with pytest.raises(ValueError, match="allowed: 0.000 .. 3000.000"):
        motion.at(orbits["leo"]).states([3002.0])
    with pytest.raises(ValueError, match="switched off"):
        OrbitMotion(epoch_tai_ns, (0.0, 1.0), spin_frame, Forces(drag=False), estimate_drag=True)
    with pytest.raises(ValueError, match="rotation"):
        OrbitMotion(epoch_tai_ns, (0.0, 1.0), None, Forces())
    with pytest.raises(ValueError, match="span"):
        OrbitMotion(epoch_tai_ns, (1.0, 0.0), spin_frame)


def test_no_shadow_is_overlooked_between_nodes(spin_frame, epoch_tai_ns, monkeypatch):
    """Cells far from the shadow skip the fine grid; orbits that graze the shadow come out as with it everywhere."""
    sun = SunMoon(epoch_tai_ns, (0.0, 6000.0)).positions(np.array([3000.0]))[0][0]
    sun /= np.linalg.norm(sun)
    aside = np.cross(sun, [0.0, 0.0, 1.0])
    aside /= np.linalg.norm(aside)
    radius = 7.0e6
    motion = OrbitMotion(epoch_tai_ns, (0.0, 6000.0), spin_frame, Forces(drag=False))
    moved = []
    for elevation in np.arcsin(6_378_137.0 / radius) - np.linspace(-0.003, 0.03, 12):
        normal = np.sin(elevation) * sun + np.cos(elevation) * aside
        along = np.cross(normal, [0.3, -0.2, 0.9])
        along /= np.linalg.norm(along)
        orbit = np.append(radius * along, np.sqrt(GM / radius) * np.cross(normal, along))
        monkeypatch.undo()
        skipped = motion.at(orbit).states([6000.0]).position
        monkeypatch.setattr("shiftfix.physics.motion.forces._CLEAR_RAD", 4.0)
        assert np.abs(motion.at(orbit).states([6000.0]).position - skipped).max() < 1e-6
        monkeypatch.setattr("shiftfix.physics.motion.forces._CLEAR_RAD", -1.0)
        moved.append(np.abs(motion.at(orbit).states([6000.0]).position - skipped).max())
    assert max(moved) > 1e-3  # the scene has shadows that the nodes alone treat wrongly
