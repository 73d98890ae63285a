"""Orbit ephemeris messages to ephemerides: frames, scales, blocks, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest

from shiftfix.api import InputError, tai_ns_from_utc
from shiftfix_ingest.oem import OemParams, frame_bias, read_oem

META = {
    "OBJECT_NAME": "KITE-4", "OBJECT_ID": "2026-014B", "CENTER_NAME": "EARTH", "REF_FRAME": "GCRF",
    "TIME_SYSTEM": "UTC",
    "START_TIME": "2026-03-01T06:00:00", "STOP_TIME": "2026-03-01T06:03:00",
}  # fmt: skip
ORDER = ("OBJECT_NAME", "OBJECT_ID", "CENTER_NAME", "REF_FRAME", "TIME_SYSTEM", "START_TIME", "USEABLE_START_TIME",
"USEABLE_STOP_TIME",
         "STOP_TIME", "INTERPOLATION", "INTERPOLATION_DEGREE")  # fmt: skip


def states(minute=0, count=4):
    return [
        f"2026-03-01T06:{minute + k:02d}:00.000 {6800.25 + k} -1234.5 {77.125 * k:.3f} -1.5 7.25 0.125"
        for k in range(count)
    ]


def block(lines=None, **meta):
    values = {**META, **meta}
    return ["META_START", *(f"{k} = {values[k]}" for k in ORDER if k in values), "META_STOP", *(lines or states())]


def oem(*blocks):
    head = ["CCSDS_OEM_VERS = 3.0", "COMMENT test", "CREATION_DATE = 2026-03-02T00:00:00", "ORIGINATOR = VELDANE"]
    return "\n".join([*head, *(line for b in blocks for line in b)]) + "\n"


@pytest.fixture
def read(tmp_path, context):
    def run(*texts, **params):
        paths = []
        for k, text in enumerate(texts):
            path = tmp_path / f"orbit{k}.oem"
            path.write_text(text)
            paths.append(path)
        return read_oem({}, OemParams(files=tuple(paths), **params), context)["ephemeris"]

    return run


def test_units_time_and_frame(read):
    table = read(oem(block()))
    row = table.rows.iloc[1]
    assert table.frame == "GCRS"
    assert (row.x_m, row.y_m, row.z_m) == pytest.approx((6801250.0, -1234500.0, 77125.0), abs=1e-6)
    assert (row.vx_m_s, row.vy_m_s, row.vz_m_s) == pytest.approx((-1500.0, 7250.0, 125.0), abs=1e-9)
    assert row.time_tai_ns == tai_ns_from_utc("2026-03-01T06:01:00Z") and row.object_id == "KITE-4"
    assert np.isnan(row.clock_s)
    gps = read(oem(block(TIME_SYSTEM="GPS")))
    assert gps.rows.time_tai_ns[0] - table.rows.time_tai_ns[0] == -18_000_000_000


def test_earth_fixed_frames_and_ids(read):
    table = read(oem(block(REF_FRAME="ITRF2000")), objects={"2026-014b": "KITE"}, position_sigma=3.0)
    assert table.frame == "ITRS" and set(table.rows.object_id) == {"KITE"} and table.position_sigma_m == 3.0
    assert table.rows.x_m[0] == 6800250.0


def test_frame_bias_of_eme2000(read):
    """IERS Conventions 2010, section 5.4.4: xi0 = -16.6170 mas, eta0 = -6.8192 mas, d_alpha0 = -14.6 mas."""
    mas = np.pi / 648e6
    xi, eta, alpha = -16.6170 * mas, -6.8192 * mas, -14.6 * mas
    small = np.eye(3) + np.array([[0, alpha, -xi], [-alpha, 0, -eta], [xi, eta, 0]])
    # Angles rounded to 1e-4 mas are 5e-13 rad; 1e-12 rad is 7 um at 7000 km.
    assert np.abs(frame_bias() - small).max() < 1e-12
    true = read(oem(block())).rows[["x_m", "y_m", "z_m"]].to_numpy()
    mean = read(oem(block(REF_FRAME="EME2000"))).rows[["x_m", "y_m", "z_m"]].to_numpy()
    assert small @ mean[2] == pytest.approx(true[2], abs=1e-5)
    assert 0.3 < np.linalg.norm(mean[2] - true[2]) < 0.8


def test_blocks_become_segments_and_useable_spans_are_kept(read, caplog):
    first = block(USEABLE_START_TIME="2026-03-01T06:00:30", USEABLE_STOP_TIME="2026-03-01T06:02:00")
    second = block(states(2), START_TIME="2026-03-01T06:02:00", STOP_TIME="2026-03-01T06:05:00")
    table = read(oem(first, second))
    assert table.rows.segment_1.tolist() == [0, 0, 1, 1, 1, 1]
    minutes = [(t - tai_ns_from_utc("2026-03-01T06:00:00Z")) / 60e9 for t in table.rows.time_tai_ns]
    assert minutes == [1.0, 2.0, 2.0, 3.0, 4.0, 5.0]
    assert table.sources[0].rows_read == 8 and table.sources[0].rows_rejected == 2
    assert "2 states outside the useable spans" in caplog.text
    assert len(read(oem(first, second), span="all")) == 8
    assert set(read(oem(first), oem(block(OBJECT_NAME="OTHER"))).rows.object_id) == {"KITE-4", "OTHER"}


def test_accelerations_and_covariances_are_passed_over(read, caplog):
    lines = [line + " 0.001 0.002 0.003" for line in states()]
    lines += [
        "COVARIANCE_START",
        "EPOCH = 2026-03-01T06:00:00",
        "COV_REF_FRAME = RTN",
        *("1.0e-4 " * k for k in range(1, 7)),
        "COVARIANCE_STOP",
    ]
    table = read(oem(block(lines)))
    assert len(table) == 4 and "1 covariance matrices are passed over" in caplog.text


def test_xml_equals_kvn(read):
    names = ("EPOCH", "X", "Y", "Z", "X_DOT", "Y_DOT", "Z_DOT")
    vectors = "".join(
        "<stateVector>"
        + "".join(f"<{n}>{v}</{n}>" for n, v in zip(names, line.split(), strict=True))
        + "</stateVector>\n"
        for line in states()
    )
    meta = "".join(f"<{k}>{v}</{k}>\n" for k, v in META.items())
    text = (
        '<?xml version="1.0" encoding="UTF-8"?>\n<oem id="CCSDS_OEM_VERS" version="3.0">\n'
        f"<header><CREATION_DATE>2026-03-02T00:00:00</CREATION_DATE><ORIGINATOR>V</ORIGINATOR></header>\n<body><segment><metadata>\n{meta}</metadata><data>\n{vectors}</data>"
        "</segment></body></oem>\n"
    )
    assert read(text).rows.equals(read(oem(block())).rows)
    with pytest.raises(InputError, match=r"orbit0.oem:7: another centre"):
        read(text.replace("EARTH", "MARS"))


def test_all_mistakes_are_named_at_once(tmp_path, context):
    good = oem(block())
    files = {
        "centre.oem": oem(block(CENTER_NAME="MARS BARYCENTER")), "frame.oem": oem(block(REF_FRAME="TEME")),
        "scale.oem": oem(block(TIME_SYSTEM="TDB")), "order.oem": good.replace("06:02:00.000", "06:00:30.000"),
        "number.oem": good.replace("-1234.5 77.125", "-1234.5 NaN"), "short.oem": good.replace(" 0.125\n", "\n", 1),
        "date.oem": good.replace("2026-03-01T06:02", "2026-02-30T06:02"),
        "meta.oem": good.replace("OBJECT_ID = 2026-014B\n", ""),
        "degree.oem": oem(block(INTERPOLATION="HERMITE")), "span.oem": oem(block(STOP_TIME="2026-03-01T05:00:00")),
        "keyword.oem": good.replace("CENTER_NAME", "CENTRE_NAME"), "cut.oem": "\n".join(good.splitlines()[:7]),
        "opm.oem": good.replace("OEM_VERS", "OPM_VERS"), "version.oem": good.replace("3.0", "9.0"), "none.oem": "",
        "few.oem": oem(block(states(count=1))), "comment.oem": good.replace("VELDANE", "VELDANE\nCOLOUR = RED"),
    }  # fmt: skip
    for name, text in files.items():
        (tmp_path / name).write_text(text)
    with pytest.raises(InputError) as caught:
        read_oem({}, OemParams(files=tuple(tmp_path / n for n in [*files, "absent.oem"])), context)
    text = str(caught.value)
    for expected in (
        "centre.oem:8: another centre",
        "frame.oem:9: frame that cannot be converted",
        "scale.oem:10: time system that cannot",
        "order.oem:16: epochs do not increase",
        "number.oem:15: state cannot be read",
        "short.oem:14: state cannot be read",
        "date.oem:16: epoch cannot be read",
        "meta.oem:5: OBJECT_ID is missing",
        "degree.oem:5: INTERPOLATION_DEGREE is missing",
        "span.oem:12: STOP_TIME lies before START_TIME",
        "keyword.oem:8: unknown keyword",
        "cut.oem:7: the message ends without META_STOP",
        "opm.oem:1: not an orbit ephemeris message",
        "version.oem:1: unsupported version",
        "none.oem: the file is empty",
        "few.oem:5: fewer than two states",
        "comment.oem:5: unknown keyword in the header",
        "absent.oem: no such file",
    ):
        assert expected in text, expected
    with pytest.raises(InputError, match="inertial and Earth-fixed frames in one"):
        (tmp_path / "a.oem").write_text(good)
        (tmp_path / "b.oem").write_text(oem(block(REF_FRAME="ITRF-97")))
        read_oem({}, OemParams(files=(tmp_path / "a.oem", tmp_path / "b.oem")), context)


def test_public_samples(shared_data, context):
    """Of the samples only one object moves about the Earth; the others are refused by their centre or kind."""
    read = {}
    for path in sorted((shared_data / "odm").iterdir()):
        try:
            read[path.name] = len(read_oem({}, OemParams(files=(path,)), context)["ephemeris"])
        except InputError as error:
            assert (
                "another centre" in str(error) or "not an orbit ephemeris" in str(error) or "another kind" in str(error)
            )
    assert read == {"odmv2-testcase6_abbrev.kvn": 6, "odmv2-testcase6_abbrev.xml": 6}
