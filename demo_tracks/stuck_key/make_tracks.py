"""Make the logs of this scene anew: python demo_tracks/stuck_key/make_tracks.py (needs the test extra).

The received frequency comes from differencing emission proper time over reception proper time (tests/support/worldline.py),
which shares no code with the solver. Seeded: the same files each time.
"""

import json
import sys
from datetime import UTC, datetime, timedelta
from pathlib import Path

import numpy as np

HERE = Path(__file__).parent
sys.path.insert(0, str(HERE.parents[1] / "tests" / "support"))
import worldline  # noqa: E402

REST = 158.3e6 + 214.0
PILOT, PILOT_PLACE = 98.1e6, (-40.72, -25.05, 210.0)
STATIONS = {
    "MERROW": (-40.58, -25.22, 64.0, 4e-10),
    "SALLOW": (-40.86, -24.79, 21.0, -1.3e-9),
    "INCH": (-40.31, -24.86, 37.0, 9e-10),
    "GARTH": (-40.95, -25.49, 15.0, -6e-10),
}
EPOCH = datetime(2026, 5, 9, 4, 30, 0, tzinfo=UTC)
SPEED, COURSES, TURN_S = 12.0, (20.0, 70.0), 0.0


def text(seconds):
    return (EPOCH + timedelta(seconds=float(seconds))).strftime("%Y-%m-%dT%H:%M:%S.%f")[:-3] + "Z"


def main():
    random = np.random.default_rng(20260509)
    earth = worldline.Earth(2026, 5, 9, 4 * 3600 + 30 * 60, 37)
    legs = [
        (-1e9 if k == 0 else TURN_S, SPEED * np.sin(np.radians(c)), SPEED * np.cos(np.radians(c)))
        for k, c in enumerate(COURSES)
    ]
    vessel = worldline.Vessel(earth, -40.66, -25.31, 0.0, legs, 1300.0)
    pilot = worldline.Ground(earth, *PILOT_PLACE)
    rows = ["station,emitter,time_start,count_s,received_hz,sigma_hz"]
    for name, (latitude, longitude, height, offset) in STATIONS.items():
        station = worldline.Ground(earth, latitude, longitude, height)
        start = np.arange(-1200.0, 1200.0, 10.0)
        received = REST * np.exp(worldline.log_received(vessel, station, start, start + 10.0)) * (1 + offset)
        received += 0.5 * random.standard_normal(start.size)
        rows += [f"{name},,{text(t)},10,{f:.4f},0.5" for t, f in zip(start, received, strict=False)]
        start = np.arange(-1200.0, 1200.0, 60.0)
        received = PILOT * np.exp(worldline.log_received(pilot, station, start, start + 60.0)) * (1 + offset)
        received += 0.02 * random.standard_normal(start.size)
        rows += [f"{name},PILOT,{text(t)},60,{f:.4f},0.02" for t, f in zip(start, received, strict=False)]
    (HERE / "monitoring_log.csv").write_text("\n".join(rows) + "\n")
    place = vessel.itrs(np.zeros(1))[0]
    truth = {
        "epoch_utc": text(0),
        "frame": "ITRS",
        "position_m": place.tolist(),
        "rest_frequency_hz": REST,
        "east_north_m_s": [list(leg[1:]) for leg in legs],
        "turn_utc": text(TURN_S),
        "offsets": {n: s[3] for n, s in STATIONS.items()},
    }
    (HERE / "truth.json").write_text(json.dumps(truth, indent=1) + "\n")


if __name__ == "__main__":
    main()
