"""The manifest says what was asked and what came out, and nothing of this machine."""

from __future__ import annotations

import hashlib
import json
import subprocess

import pytest

from resonate.sound.levels import Levels
from resonate.take.manifest import Arrivals, Heard, cautions


def read(take):
    return json.loads((take / "Galley mug.json").read_text(encoding="utf-8"))


def test_hashes_are_those_of_the_files(kit, tmp_path):
    take = kit.take(tmp_path)
    listed = read(take)["files"]
    assert [entry["name"] for entry in listed] == [
        "Galley mug.curves.csv",
        "Galley mug.events.csv",
        "Galley mug.glb",
        "Galley mug.wav",
    ]
    for entry in listed:
        assert entry["sha256"] == hashlib.sha256((take / entry["name"]).read_bytes()).hexdigest()
        assert entry["bytes"] == (take / entry["name"]).stat().st_size
    tool = subprocess.run(
        ["sha256sum", "Galley mug.wav"], cwd=take, capture_output=True, text=True, check=False
    ).stdout
    assert not tool or tool.split()[0] == listed[3]["sha256"]


def test_it_holds_the_scene_the_clock_and_the_ledger(kit, tmp_path):
    scene = kit.scene()
    found = read(kit.take(tmp_path, scene=scene))
    assert found["scene"]["text"] == scene.text
    assert found["scene"]["digest"] == scene.digest
    assert (found["seed"], found["draws"]) == (11, {})
    clock = found["clock"]
    # 00:59:59:16 is frame 86392 from midnight; a frame of 24000/1001 is 2002 samples at 48 kHz.
    assert clock["time_reference"] == 86392 * 2002
    assert (clock["time_reference_rest"], clock["frame_rate"]) == ("0", "24000/1001")
    assert clock["frame_0"] == {"label": 0, "timecode": "00:59:59:16", "scene_s": "-1001/3000"}
    assert found["ledger"]["joules"]["given"] == 0.005
    assert found["ledger"]["residual_share"] == pytest.approx(2e-8)
    assert found["events"] == 2
    body = found["bodies"][0]
    assert body["mass_kg"] == 0.6
    assert (body["modes"]["heard"], body["modes"]["solved"], body["modes"]["solved_hz"]) == (20, 45, 80e3)
    assert body["modes"]["largest_residual"] == 3e-11
    assert body["shown"]["enlarged"] == 250.0
    assert body["shown"]["exaggerated"] is True
    assert "EXAGGERATED" in body["shown"]["note"]
    assert set(found["versions"]) == {"resonate", "python", "numpy", "scipy", "numba"}


def test_the_part_of_a_sample_is_kept_as_a_fraction(kit, tmp_path):
    scene = kit.scene(rate="30000/1001 drop", start="01:00:00;00", sample_rate=44100)
    clock = read(kit.take(tmp_path, scene=scene))["clock"]
    # 107892 - 8 frames of 147147/100 samples.
    assert clock["time_reference"] == round(107884 * 147147 / 100)
    assert clock["time_reference_rest"] == "12/25"


def test_same_take_same_bytes_wherever_it_is_written(kit, tmp_path):
    (tmp_path / "a").mkdir()
    (tmp_path / "b").mkdir()
    first, second = kit.take(tmp_path / "a"), kit.take(tmp_path / "b")
    for file in first.iterdir():
        assert file.read_bytes() == (second / file.name).read_bytes()
    assert str(tmp_path) not in (first / "Galley mug.json").read_text(encoding="utf-8")


def heard(peak_spl_db):
    levels = Levels(
        peak_dbfs=-6.0,
        true_peak_dbtp=-6.0,
        momentary_lufs=-20.0,
        integrated_lufs=None,
        peak_spl_db=peak_spl_db,
        mean_spl_db=80.0,
        full_scale_pa=20.0,
    )
    return Heard(levels, ("mic",), Arrivals(0.0, {}, {}), ())


def test_loud_takes_carry_a_warning_for_the_ears():
    # 120 dB peak: common practice as a threshold for a caution, not a limit of any standard.
    quiet, loud = cautions(heard(119.9)), cautions(heard(120.1))
    assert len(loud) == len(quiet) + 1
    assert "120.1 dB" in loud[-1]
    assert "harm hearing" in loud[-1]
    assert "local codes" in loud[-1]
    assert "engineering safety" in quiet[0]


def test_silence_has_no_level_but_is_still_json(kit, tmp_path):
    scene = kit.scene()
    record = kit.record(hits_s=())
    found = read(kit.take(tmp_path, scene=scene, record=record))
    assert found["sound"]["levels"]["peak_dbfs"] is None
    assert found["events"] == 0
