"""The tables, read by other programs than their writer."""

from __future__ import annotations

import csv
from fractions import Fraction

import numpy as np
import pytest

from resonate.take.tables import decimal, turned, write_curves, write_events

# The columns of a take, as they were agreed.
EVENT_COLUMNS = (
    "event,kind,body,other,begin_s,end_s,begin_sample,begin_frame,x_m,y_m,z_m,impulse_Ns,peak_N,"
    "closing_speed_m_s,leaving_speed_m_s"
)
CURVE_COLUMNS = (
    "frame,timecode,seconds,mug.x_m,mug.y_m,mug.z_m,mug.qx,mug.qy,mug.qz,mug.qw,mug.mode_1,mug.mode_3,"
    "mug.unresolved_m,mug.force_peak_N,mug.exaggeration"
)


def curves_file(kit, tmp_path, scene):
    path = tmp_path / "mug.curves.csv"
    curves = kit.curves(scene, kit.record())
    write_curves(path, curves, scene)
    return path, curves


def events_file(kit, tmp_path, scene, record=None):
    path = tmp_path / "mug.events.csv"
    write_events(path, record or kit.record(), scene)
    return path


def test_pandas_reads_both_in_one_line(kit, tmp_path):
    pandas = pytest.importorskip(
        "pandas", reason="pandas, the independent reader of tables, is not installed"
    )
    scene = kit.scene()
    path, curves = curves_file(kit, tmp_path, scene)
    table = pandas.read_csv(path)
    assert ",".join(table.columns) == CURVE_COLUMNS
    assert len(table) == scene.clock.frame_count
    assert table["seconds"].tolist() == [float(k * Fraction(1001, 24000)) for k in range(len(table))]
    body = curves.bodies[0]
    np.testing.assert_allclose(table[["mug.x_m", "mug.y_m", "mug.z_m"]], body.place_m, rtol=0, atol=1e-9)
    np.testing.assert_allclose(table[["mug.qx", "mug.qy", "mug.qz", "mug.qw"]], body.turn, rtol=0, atol=1e-9)
    np.testing.assert_allclose(table[["mug.mode_1", "mug.mode_3"]], body.amplitude_m, rtol=1e-8)
    assert set(table["mug.exaggeration"]) == {250.0}

    events = pandas.read_csv(events_file(kit, tmp_path, scene))
    assert ",".join(events.columns) == EVENT_COLUMNS
    assert events["event"].tolist() == [1, 2]
    assert events["other"].tolist() == ["steel ball", "steel ball"]


def test_lines_end_plainly_and_zero_has_no_sign(kit, tmp_path):
    scene = kit.scene()
    data = events_file(kit, tmp_path, scene).read_bytes() + curves_file(kit, tmp_path, scene)[0].read_bytes()
    assert b"\r" not in data
    assert data.endswith(b"\n")
    assert b",-0\n" not in data
    assert b",-0," not in data


@pytest.mark.parametrize("rate", ["24", "24000/1001", "25", "30000/1001 drop"])
def test_an_event_is_one_moment_in_seconds_samples_and_frames(kit, tmp_path, rate):
    start = "01:00:00;00" if "drop" in rate else "01:00:00:00"
    scene = kit.scene(rate=rate, start=start)
    with events_file(kit, tmp_path, scene).open(newline="") as file:
        rows = list(csv.DictReader(file))
    exact = Fraction(rate.removesuffix(" drop"))
    for row, begin in zip(rows, (0.3111, 1.0), strict=True):
        # Frame 0 and sample 0 lie 8 frames before the start.
        seconds = Fraction(begin) + 8 / exact
        assert float(row["begin_s"]) == float(seconds)
        assert abs(Fraction(row["begin_sample"]) - seconds * 48000) <= Fraction(1, 2000)
        assert abs(Fraction(row["begin_frame"]) - seconds * exact) <= Fraction(1, 2 * 10**9)
        assert float(row["end_s"]) == float(Fraction(begin + 2e-4) + 8 / exact)


def test_frames_are_numbered_as_the_scene_does(kit, tmp_path):
    scene = kit.scene(rate="24", start="1001")
    with curves_file(kit, tmp_path, scene)[0].open(newline="") as file:
        frames = [row["frame"] for row in csv.DictReader(file)]
    assert frames[0] == "993"
    assert frames[8] == "1001"
    with events_file(kit, tmp_path, scene).open(newline="") as file:
        row = next(csv.DictReader(file))
    assert row["begin_frame"] == "1008.466400000"


def test_timecode_drops_numbers(kit, tmp_path):
    scene = kit.scene(rate="30000/1001 drop", start="00:01:00;02")
    with curves_file(kit, tmp_path, scene)[0].open(newline="") as file:
        labels = [row["timecode"] for row in csv.DictReader(file)]
    # SMPTE ST 12-1: ;00 and ;01 do not exist in minute 1.
    assert labels[7:9] == ["00:00:59;29", "00:01:00;02"]


def test_up_and_unit_change_the_tables(kit, tmp_path):
    pandas = pytest.importorskip(
        "pandas", reason="pandas, the independent reader of tables, is not installed"
    )
    scipy_rotation = pytest.importorskip("scipy.spatial.transform").Rotation
    plain = pandas.read_csv(curves_file(kit, tmp_path, kit.scene())[0])
    scene = kit.scene(up="z", unit="cm")
    path, curves = curves_file(kit, tmp_path, scene)
    table = pandas.read_csv(path)

    # A quarter turn about x takes Y up to Z up; bodies' own axes turn with the world.
    quarter = scipy_rotation.from_euler("x", 90, degrees=True)
    place = quarter.apply(np.array(curves.bodies[0].place_m)) * 100.0
    np.testing.assert_allclose(table[["mug.x_cm", "mug.y_cm", "mug.z_cm"]], place, rtol=0, atol=1e-6)
    wanted = quarter * scipy_rotation.from_quat(np.array(curves.bodies[0].turn)) * quarter.inv()
    found = scipy_rotation.from_quat(table[["mug.qx", "mug.qy", "mug.qz", "mug.qw"]].to_numpy())
    # Nine digits of each part.
    assert np.max((wanted.inv() * found).magnitude()) < 1e-8
    np.testing.assert_allclose(table["mug.mode_1"], 100.0 * plain["mug.mode_1"], rtol=1e-8)
    np.testing.assert_allclose(table["mug.unresolved_cm"], 100.0 * plain["mug.unresolved_m"], rtol=1e-8)
    np.testing.assert_array_equal(table["seconds"], plain["seconds"])
    events = pandas.read_csv(events_file(kit, tmp_path, scene))
    np.testing.assert_allclose(events.loc[0, ["x_cm", "y_cm", "z_cm"]].astype(float), [10.0, 30.0, 20.0])


def test_axes_stay_right_handed():
    x, y, z = turned(np.eye(3), "z")
    np.testing.assert_array_equal(np.cross(x, y), z)
    np.testing.assert_array_equal(y, [0.0, 0.0, 1.0])


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (Fraction(1, 8), "0.12"),
        (Fraction(3, 8), "0.38"),
        (Fraction(-1, 1000), "0.00"),
        (Fraction(-5, 4), "-1.25"),
        (Fraction(10**15, 3), "333333333333333.33"),
    ],
)
def test_decimals_are_exact(value, text):
    assert decimal(value, digits=2) == text


def test_names_with_odd_letters_stay_in_their_column(kit, tmp_path):
    record = kit.record()
    record.events[0].other = 'the "big", one'
    with events_file(kit, tmp_path, kit.scene(), record).open(newline="") as file:
        assert next(csv.DictReader(file))["other"] == 'the "big", one'
