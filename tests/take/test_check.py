"""The check passes a good take and finds every fault that is planted in one."""

from __future__ import annotations

import csv
import hashlib
import io
import json
import shutil
import struct

import numpy as np
import pytest
import soundfile

from resonate.errors import CheckFault, TakeError
from resonate.take.check import check_take
from resonate.take.sync import onset_near, sync_by_correlation

WAV, CURVES, EVENTS, GLB, JSON = (
    f"Galley mug{end}" for end in (".wav", ".curves.csv", ".events.csv", ".glb", ".json")
)


@pytest.fixture
def take(kit, tmp_path):
    return kit.take(tmp_path)


def failing(folder):
    return {finding.name for finding in check_take(folder).findings if finding.ok is False}


def seal(take):
    """Make hashes and sizes of the manifest true again, so that only the measurements are left."""

    def renew(manifest):
        for entry in manifest["files"]:
            data = (take / entry["name"]).read_bytes()
            entry.update(bytes=len(data), sha256=hashlib.sha256(data).hexdigest())

    change_manifest(take, renew)


def change_manifest(take, change):
    manifest = json.loads((take / JSON).read_text(encoding="utf-8"))
    change(manifest)
    (take / JSON).write_text(json.dumps(manifest), encoding="utf-8")


def change_table(file, row, column, value):
    rows = list(csv.reader(file.read_text(encoding="utf-8").splitlines()))
    rows[row + 1][rows[0].index(column)] = value
    text = io.StringIO()
    csv.writer(text, lineterminator="\n").writerows(rows)
    file.write_text(text.getvalue(), encoding="utf-8")


@pytest.mark.parametrize("rate", ["24", "24000/1001", "25", "30000/1001 drop", "60000/1001 drop"])
@pytest.mark.parametrize("sample_rate", [44100, 48000, 96000])
def test_a_good_take_passes(kit, tmp_path, rate, sample_rate):
    start = "00:59:59;12" if "drop" in rate else "01:00:00:00"
    report = check_take(kit.take(tmp_path, scene=kit.scene(rate=rate, start=start, sample_rate=sample_rate)))
    assert report.ok, "\n".join(map(str, report.findings))
    report.raise_faults()
    names = {finding.name for finding in report.findings}
    assert {"cues against events", "time reference", "contacts without a key"} <= names
    onsets = next(finding for finding in report.findings if finding.name.startswith("onsets"))
    assert "over 2" in onsets.measured


@pytest.mark.parametrize(
    "more", [{"format": "16-bit"}, {"format": "float"}, {"up": "z", "unit": "cm"}, {"start": "1001"}]
)
def test_a_good_take_of_another_kind_passes(kit, tmp_path, more):
    report = check_take(kit.take(tmp_path, scene=kit.scene(**more)))
    assert report.ok, "\n".join(map(str, report.findings))


@pytest.mark.parametrize(("rate", "start"), [("24", "00:00:00:00"), ("30000/1001 drop", "00:00:00;05")])
def test_a_take_whose_handles_begin_the_day_before_passes(kit, tmp_path, rate, start):
    take = kit.take(tmp_path, scene=kit.scene(rate=rate, start=start))
    report = check_take(take)
    assert report.ok, "\n".join(map(str, report.findings))
    with (take / CURVES).open(encoding="utf-8") as file:
        assert next(csv.DictReader(file))["timecode"].startswith("23:59:59")


def test_a_moved_and_renamed_take_passes(take, tmp_path):
    moved = tmp_path / "elsewhere" / "other name"
    moved.parent.mkdir()
    shutil.move(take, moved)
    assert check_take(moved).ok


def test_one_changed_byte_is_found(take):
    data = bytearray((take / WAV).read_bytes())
    data[-1000] ^= 1
    (take / WAV).write_bytes(data)
    assert failing(take) == {"file as it was made"}


@pytest.mark.parametrize("name", [WAV, CURVES, EVENTS, GLB])
def test_a_missing_file_is_found(take, name):
    (take / name).unlink()
    report = check_take(take)
    assert [(fault.where, fault.what.split(",")[0]) for fault in report.faults] == [
        (name, "file as it was made: missing")
    ]


@pytest.mark.parametrize("name", [WAV, CURVES, EVENTS, GLB])
def test_a_truncated_file_is_found_and_read_no_further(take, name):
    data = (take / name).read_bytes()
    (take / name).write_bytes(data[: len(data) // 2])
    seal(take)
    assert failing(take)


AGAINST_RUN = {"sound at front against the run", "samples at front against the run, largest difference"}


@pytest.mark.parametrize("late", [1, -1, 48, 4800])
@pytest.mark.parametrize("hits_s", [(0.3111, 1.0), (0.3111, 0.3191, 0.3253, 0.34)])
def test_late_sound_is_found_although_all_hashes_fit(kit, tmp_path, late, hits_s):
    # Also where hits come so close together that no onset can be told from the last one's ringing.
    report = check_take(kit.take(tmp_path, record=kit.record(hits_s), late_samples=late))
    found = {finding.name for finding in report.findings if finding.ok is False}
    assert found >= AGAINST_RUN
    assert all("against the run" in name or "against the contacts" in name or "onsets" in name for name in found)
    told = next(finding for finding in report.findings if finding.name == "sound at front against the run")
    assert float(told.measured.split()[0]) == pytest.approx(late, abs=0.01)
    # What a person would hear is found by the contacts as well, without the run's help.
    assert ("first sound at front against the contacts" in found) == (late == 4800)


def test_sound_that_was_edited_in_the_middle_is_found(take):
    samples, rate = soundfile.read(take / WAV)
    place = np.argmax(np.abs(samples)) + 20
    data = bytearray((take / WAV).read_bytes())
    begin = data.index(b"data" + (3 * len(samples)).to_bytes(4, "little")) + 8 + 3 * int(place)
    data[begin : begin + 3] = bytes(3)
    (take / WAV).write_bytes(data)
    seal(take)
    assert failing(take) == {"samples at front against the run, largest difference"}
    assert rate == 48000


def test_what_cannot_be_measured_is_not_called_ok(kit, tmp_path):
    record = kit.record(())
    report = check_take(kit.take(tmp_path, record=record))
    verdicts = {finding.name: finding.ok for finding in report.findings}
    assert verdicts["first sound at front against the contacts"] is None
    assert verdicts["onsets against contacts"] is None
    assert "none  onsets against contacts: no contact" in "\n".join(map(str, report.findings))
    # A silent take is measured to be silent.
    assert verdicts["sound at front, where the run has none"] is True
    assert report.ok
    assert {entry["ok"] for entry in report.as_json()["findings"]} == {True, None}


def test_sound_where_the_run_has_none_is_found(kit, tmp_path):
    take = kit.take(tmp_path, record=kit.record(()))
    data = bytearray((take / WAV).read_bytes())
    data[-3 * 20000] = 100
    (take / WAV).write_bytes(data)
    seal(take)
    assert {"sound at front, where the run has none", "first sound at front against the contacts"} <= failing(take)


def test_a_wrong_time_reference_is_found(take):
    data = bytearray((take / WAV).read_bytes())
    place = data.index(b"bext") + 8 + 338
    (was,) = struct.unpack_from("<Q", data, place)
    struct.pack_into("<Q", data, place, was + 1)
    (take / WAV).write_bytes(data)
    seal(take)
    assert failing(take) == {"time reference", "time reference against the exact time of frame 0"}


def test_a_clock_that_disagrees_with_itself_is_found(take):
    change_manifest(take, lambda manifest: manifest["clock"].update(time_reference_rest="1/3"))
    assert failing(take) == {"part of a sample that rounding took"}


def test_a_moved_cue_is_found(take):
    data = bytearray((take / WAV).read_bytes())
    place = data.index(b"cue ") + 12
    number, position, *_, offset = struct.unpack_from("<II4sIII", data, place)
    struct.pack_into("<II4sIII", data, place, number, position + 1, b"data", 0, 0, offset + 1)
    (take / WAV).write_bytes(data)
    seal(take)
    assert failing(take) == {"cues against events"}


def test_an_edited_curve_is_found(take):
    change_table(take / CURVES, 20, "mug.y_m", "0.95")
    assert failing(take) == {"file as it was made", "place of mug against the curves"}
    seal(take)
    assert failing(take) == {"place of mug against the curves"}


@pytest.mark.parametrize(
    ("column", "value", "name"),
    [
        ("timecode", "01:00:00:13", "frames with a wrong timecode"),
        ("frame", "21", "frames with a wrong number"),
        ("seconds", "0.8342", "frame times against the frame rate"),
        ("mug.qx", "0.9", "turns of mug, length"),
        ("mug.qx", "nan", "turns of mug, length"),
        ("timecode", "soon", "file"),
    ],
)
def test_a_wrong_frame_is_found(take, column, value, name):
    change_table(take / CURVES, 20, column, value)
    seal(take)
    assert name in failing(take)


def test_a_moved_event_is_found(take):
    # 100 microseconds: five samples, far less than anyone sees.
    rows = list(csv.DictReader((take / EVENTS).read_text().splitlines()))
    change_table(take / EVENTS, 0, "begin_s", repr(float(rows[0]["begin_s"]) + 1e-4))
    seal(take)
    assert failing(take) == {
        "event samples against event seconds",
        "event frames against event seconds",
        "contacts without a key",
        "cues against events",
    }


def test_a_ledger_that_does_not_close_is_found(take):
    change_manifest(take, lambda manifest: manifest["ledger"]["joules"].update(residual=6e-9))
    assert failing(take) == {"energy ledger, unexplained share"}


def test_a_changed_level_is_found(take):
    def louder(manifest):
        manifest["sound"]["levels"]["peak_dbfs"] += 0.01
        manifest["sound"]["levels"]["true_peak_dbtp"] += 0.3

    change_manifest(take, louder)
    found = failing(take)
    assert found == {"peak against the manifest, steps of the format", "true peak against the manifest"}


def test_a_changed_scene_is_found(take):
    def sly(manifest):
        manifest["scene"]["text"] = manifest["scene"]["text"].replace("speed = 1.5", "speed = 9.5")

    change_manifest(take, sly)
    assert failing(take) == {"hash of the scene"}


def test_another_format_is_found(take):
    samples, rate = soundfile.read(take / WAV)
    soundfile.write(take / WAV, samples, rate, subtype="PCM_16")
    seal(take)
    assert "format of samples" in failing(take)


@pytest.mark.parametrize("text", ["", "{", "[]", "{}", '{"files": 3}', '{"files": [{}]}', '{"files": []}'])
def test_a_damaged_manifest_is_a_fault_not_a_crash(take, text):
    (take / JSON).write_text(text)
    assert failing(take) == {"file"}


def test_faults_are_raised_all_at_once_with_what_where_and_fix(take):
    (take / WAV).unlink()
    (take / GLB).unlink()
    with pytest.raises(CheckFault, match="missing") as caught:
        check_take(take).raise_faults()
    assert caught.value.exit_code == 1
    assert [fault.where for fault in caught.value.faults] == [GLB, WAV]
    assert all(fault.fix for fault in caught.value.faults)


def test_what_is_no_take_is_bad_input(tmp_path):
    with pytest.raises(TakeError, match="no such folder"):
        check_take(tmp_path / "nowhere")
    with pytest.raises(TakeError, match="no manifest"):
        check_take(tmp_path)


@pytest.mark.parametrize("late", [0.0, 0.25, -0.4, 3.5, -17.125, 480.0])
def test_correlation_finds_parts_of_a_sample(late):
    # A band-limited sound moved exactly, by the phase of its spectrum (the shift theorem).
    count, rate = 9600, 48000.0
    rng = np.random.default_rng(6)
    spectrum = np.fft.rfft(rng.normal(size=count) * np.exp(-np.arange(count) / 900.0), 4 * count)
    hertz = np.fft.rfftfreq(4 * count, 1.0 / rate)
    spectrum[hertz > 18e3] = 0.0
    turn = np.exp(-2j * np.pi * hertz * (late + 1000.0) / rate)
    still = np.fft.irfft(spectrum * np.exp(-2j * np.pi * hertz * 1000.0 / rate))
    moved = np.fft.irfft(spectrum * turn)
    # Rounding to 24 bits and a gain must not matter.
    written = np.round(0.7 * moved * 2**23) / 2**23
    assert sync_by_correlation(written, still, rate_hz=rate) == pytest.approx(late, abs=1e-4)


def test_silence_has_no_place_in_time():
    with pytest.raises(TakeError, match="silence"):
        sync_by_correlation(np.zeros(100), np.ones(100), rate_hz=48000.0)


def test_onsets_agree_with_another_detector(kit):
    librosa = pytest.importorskip("librosa", reason="librosa, the independent detector, is not installed")
    scene = kit.scene()
    wave = kit.sound(scene, kit.record())[:, 0]
    # Spectral flux over 5 ms, looked at every third of a millisecond.
    strength = librosa.onset.onset_strength(y=wave, sr=48000, hop_length=16, n_fft=256, n_mels=16)
    theirs = librosa.onset.onset_detect(
        onset_envelope=strength, sr=48000, hop_length=16, units="time", backtrack=True
    )
    for begin in (0.3111, 1.0):
        expected = begin + 8 * 1001 / 24000
        ours = onset_near(wave, rate_hz=48000, expected_s=expected, reach_s=0.02)
        assert ours == pytest.approx(expected, abs=2e-4)
        assert np.min(np.abs(theirs - ours)) < 2e-3


def test_no_onset_is_claimed_where_nothing_rises():
    wave = np.sin(2 * np.pi * 440.0 * np.arange(48000) / 48000)
    assert onset_near(wave, rate_hz=48000, expected_s=0.5, reach_s=0.02) is None
    assert onset_near(np.zeros(48000), rate_hz=48000, expected_s=0.5, reach_s=0.02) is None


def test_hashes_are_told_shortly_and_both_sides_alike(take):
    data = bytearray((take / WAV).read_bytes())
    data[-1000] ^= 1
    (take / WAV).write_bytes(data)
    lines = [str(finding) for finding in check_take(take).findings]
    assert all(len(line) < 150 for line in lines)
    (told,) = (finding for finding in check_take(take).findings if finding.ok is False)
    # The same size and another hash, each told the same way.
    parts = [text.split(", SHA-256 ") for text in (told.measured, told.limit)]
    assert parts[0][0] == parts[1][0] == f"{len(data)} bytes"
    assert parts[0][1] != parts[1][1]
    assert parts[0][1] == f"{hashlib.sha256(data).hexdigest()[:12]}..."
