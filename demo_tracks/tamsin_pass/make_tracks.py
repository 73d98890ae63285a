"""Make the logs of this scene anew: python demo_tracks/tamsin_pass/make_tracks.py (needs the test extra).

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

NOMINAL = 437.2625e6
REST, DRIFT = NOMINAL - 1840.0, -0.02
STATIONS = {
    "ORREL": (-38.91, -23.12, 118.0, 2e-12, 0.5),
    "QUOIN": (-41.36, -29.04, 43.0, 3e-8, 1.0),
    "BASTLE": (-43.87, -25.40, 12.0, 4e-7, 2.0),
}
EPOCH = datetime(2026, 3, 1, 21, 14, 0, tzinfo=UTC)


def text(seconds):
    return (EPOCH + timedelta(seconds=float(seconds))).strftime("%Y-%m-%dT%H:%M:%S.%f")[:-3] + "Z"


def main():
    random = np.random.default_rng(20260301)
    earth = worldline.Earth(2026, 3, 1, 21 * 3600 + 14 * 60, 37)
    satellite = worldline.over(earth, -41.2, -26.4, 510e3, -9.9)
    logs = {}
    for name, (latitude, longitude, height, offset, sigma) in STATIONS.items():
        station = worldline.Ground(earth, latitude, longitude, height)
        middle = np.arange(-420.0, 421.0, 2.0)
        middle = middle[worldline.elevation(satellite, station, middle) > 5.0]
        ratio = worldline.log_received(satellite, station, middle - 0.5, middle + 0.5)
        received = (REST + DRIFT * middle) * np.exp(ratio) * (1 + offset)
        logs[name] = middle, received + sigma * random.standard_normal(middle.size)
    middle, received = logs["ORREL"]
    rows = [f"{text(t)},{f:.3f}" for t, f in zip(middle, received, strict=False)]
    (HERE / "orrel_head.csv").write_text("utc_middle,received_hz\n" + "\n".join(rows) + "\n")
    middle, received = logs["QUOIN"]
    rows = [
        f"{text(t - 0.5)};{(f - NOMINAL) / 1e3:.6f}".replace(".", ",").replace(",", ".", 1)
        for t, f in zip(middle, received, strict=False)
    ]
    (HERE / "quoin_skerry.txt").write_text(
        "# offset from 437.2625 MHz, counts of 1 s, tagged at their start\ntime;offset kHz\n" + "\n".join(rows) + "\n"
    )
    middle, received = logs["BASTLE"]
    head = [
        "CCSDS_TDM_VERS = 2.0",
        f"CREATION_DATE = {text(86400)[:-1]}",
        "ORIGINATOR = VELDANE MONITORING",
        "",
        "META_START",
        "TIME_SYSTEM = UTC",
        "PARTICIPANT_1 = BASTLE",
        "PARTICIPANT_2 = TAMSIN-1",
        "MODE = SEQUENTIAL",
        "PATH = 2,1",
        "INTEGRATION_INTERVAL = 1.0",
        "INTEGRATION_REF = END",
        "FREQ_OFFSET = 437262500.0",
        "META_STOP",
        "",
        "DATA_START",
        "TRANSMIT_FREQ_2 = " + text(middle[0] - 1)[:-1] + " 437262500.0",
    ]
    rows = [f"RECEIVE_FREQ_1 = {text(t + 0.5)[:-1]} {f - NOMINAL:.3f}" for t, f in zip(middle, received, strict=False)]
    (HERE / "bastle_fen.tdm").write_text("\n".join([*head, *rows, "DATA_STOP", ""]))
    state = satellite.state(np.zeros(1))[0]
    truth = {
        "epoch_utc": text(0),
        "frame": "GCRS",
        "position_m": state[:3].tolist(),
        "velocity_m_s": state[3:].tolist(),
        "rest_frequency_hz": REST,
        "rest_frequency_drift_hz_s": DRIFT,
        "offsets": {n: s[3] for n, s in STATIONS.items()},
    }
    (HERE / "truth.json").write_text(json.dumps(truth, indent=1) + "\n")


if __name__ == "__main__":
    main()
