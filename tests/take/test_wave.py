"""Wave files written here, read back by other libraries than the writer."""

from __future__ import annotations

import struct
import sys
import xml.etree.ElementTree as ET

import numpy as np
import pytest
import soundfile
from scipy.io import wavfile

from resonate.errors import TakeError
from resonate.take import wave as wave_module
from resonate.take.chunks import Cue, Heading, Loudness, Slate, ascii_only
from resonate.take.quantise import encode, room
from resonate.take.wave import write_wave

RATE = 48000
STEP = {"16-bit": 2.0**-15, "24-bit": 2.0**-23, "float": 0.0}
HEADING = Heading(
    description="Galley mug, Saltmarrow",
    reference="0123456789abcdef0123456789abcdef",
    time_reference=172_800_000 + 5_000_000_000,
    loudness=Loudness(integrated_lufs=-23.456, true_peak_dbtp=-6.02, momentary_lufs=-18.5),
    cues=(Cue(4800, "1 strike mug by spoon"), Cue(9601, "2 strike mug by ladle"), Cue(9602, "3")),
    slate=Slate(
        project="Galley <mug>",
        take="0123456789ab",
        frame_rate="30000/1001",
        drop=True,
        tracks=("near & far",),
    ),
)


def tone(channels=1, frames=12_001, seed=5):
    """Noise of a known peak, the channels all different; an odd length for the pad byte."""
    rng = np.random.default_rng(seed)
    samples = rng.uniform(-0.9, 0.9, size=(frames, channels))
    samples[17] = 0.9
    return samples


def write(path, samples, sample_format="24-bit", heading=HEADING, **more):
    write_wave(path, samples, rate_hz=RATE, sample_format=sample_format, heading=heading, **more)
    return path


@pytest.mark.parametrize("channels", [1, 2, 3, 16])
@pytest.mark.parametrize("sample_format", ["16-bit", "24-bit", "float"])
@pytest.mark.filterwarnings("ignore::scipy.io.wavfile.WavFileWarning")
def test_two_readers_find_the_samples(tmp_path, sample_format, channels):
    samples = tone(channels)
    path = write(tmp_path / "mug.wav", samples, sample_format)

    read, rate = soundfile.read(path, always_2d=True)
    _, codes = wavfile.read(path)

    assert rate == RATE
    subtype = {"16-bit": "PCM_16", "24-bit": "PCM_24", "float": "FLOAT"}[sample_format]
    assert soundfile.info(path).subtype == subtype
    if sample_format == "float":
        np.testing.assert_array_equal(read, samples.astype(np.float32))
        np.testing.assert_array_equal(codes.reshape(read.shape), samples.astype(np.float32))
    else:
        # Rounding to the nearest code errs by half a step at most; readers divide by 2^(bits - 1).
        np.testing.assert_allclose(read, samples, atol=0.5 * STEP[sample_format] * (1 + 1e-9))
        whole = 2.0 ** (8 * codes.dtype.itemsize - 1)
        np.testing.assert_array_equal(codes.reshape(read.shape) / whole, read)


@pytest.mark.parametrize("sample_format", ["16-bit", "24-bit", "float"])
@pytest.mark.parametrize("riff_limit", [2**32 - 1, 1000], ids=["RIFF", "RF64"])
def test_a_metadata_reader_finds_the_header(tmp_path, sample_format, riff_limit):
    wavinfo = pytest.importorskip(
        "wavinfo", reason="wavinfo, the independent reader of bext, is not installed"
    )
    path = write(tmp_path / "mug.wav", tone(2), sample_format, riff_limit=riff_limit)

    info = wavinfo.WavInfoReader(str(path))

    assert path.read_bytes()[:4] == (b"RF64" if riff_limit == 1000 else b"RIFF")
    assert (info.data.frame_count, info.fmt.sample_rate, info.fmt.channel_count) == (12_001, RATE, 2)
    assert info.bext.time_reference == HEADING.time_reference
    assert info.bext.description == HEADING.description
    assert info.bext.originator == "resonate"
    assert info.bext.originator_ref == HEADING.reference
    assert info.bext.version == 2
    assert info.bext.coding_history.startswith(f"A=PCM,F={RATE},W=")
    # EBU Tech 3285: hundredths.
    assert info.bext.loudness_value == pytest.approx(-23.46)
    assert info.bext.max_true_peak == pytest.approx(-6.02)
    assert info.bext.max_momentary_loudness == pytest.approx(-18.5)
    found = [(cue.position, info.cues.label_and_note(cue.name)[0]) for cue in info.cues.cues]
    assert found == [(cue.sample, cue.label) for cue in HEADING.cues]
    assert info.ixml.project == "Galley <mug>"
    tracks = [track.name for track in info.ixml.track_list]
    assert tracks == ["near & far"]


def chunks_of(path):
    data = path.read_bytes()
    place, found = 12, {}
    while place + 8 <= len(data):
        name, size = struct.unpack_from("<4sI", data, place)
        found[name] = data[place + 8 : place + 8 + size]
        place += 8 + size + size % 2
    assert place == len(data)
    assert struct.unpack_from("<I", data, 4)[0] == len(data) - 8
    return found


def test_chunks_stand_where_the_standards_want_them(tmp_path):
    found = chunks_of(write(tmp_path / "mug.wav", tone(1)))

    # EBU Tech 3306: the place for ds64 comes first; Tech 3285: bext before data, 602 bytes and history.
    assert list(found) == [b"JUNK", b"fmt ", b"bext", b"cue ", b"LIST", b"iXML", b"data"]
    assert len(found[b"JUNK"]) == 28
    assert found[b"bext"][602:].endswith(b"\r\n")
    version, integrated, span, peak, momentary, short = struct.unpack_from("<H64x5h", found[b"bext"], 346)
    # 0x7FFF says "not set".
    assert (version, integrated, span, peak, momentary, short) == (2, -2346, 0x7FFF, -602, -1850, 0x7FFF)
    ixml = ET.fromstring(found[b"iXML"])
    assert ixml.findtext("SPEED/TIMECODE_RATE") == "30000/1001"
    assert ixml.findtext("SPEED/TIMECODE_FLAG") == "DF"
    high = int(ixml.findtext("SPEED/TIMESTAMP_SAMPLES_SINCE_MIDNIGHT_HI"))
    low = int(ixml.findtext("SPEED/TIMESTAMP_SAMPLES_SINCE_MIDNIGHT_LO"))
    assert high * 2**32 + low == HEADING.time_reference


@pytest.mark.parametrize(("channels", "tag"), [(1, 1), (2, 1), (3, 0xFFFE)])
def test_only_many_channels_use_the_extensible_form(tmp_path, channels, tag):
    form = chunks_of(write(tmp_path / "mug.wav", tone(channels)))[b"fmt "]
    assert struct.unpack_from("<HH", form) == (tag, channels)
    if tag == 0xFFFE:
        # No speaker places are claimed for microphones anywhere; then the PCM subformat.
        assert struct.unpack_from("<IH", form, 20) == (0, 1)


def test_standard_library_reads_plain_files(tmp_path):
    import wave

    path = write(tmp_path / "mug.wav", tone(2))
    with wave.open(str(path)) as file:
        assert (file.getnchannels(), file.getsampwidth(), file.getnframes()) == (2, 3, 12_001)


def test_long_files_declare_their_length_twice(tmp_path):
    path = write(tmp_path / "mug.wav", tone(2), riff_limit=1000)
    data = path.read_bytes()

    riff, sound, frames, table = struct.unpack_from("<QQQI", data, 20)
    assert (data[:4], data[4:8], data[12:16]) == (b"RF64", b"\xff\xff\xff\xff", b"ds64")
    assert (riff, sound, frames, table) == (len(data) - 8, 12_001 * 6, 12_001, 0)
    read, _ = soundfile.read(path, always_2d=True)
    np.testing.assert_allclose(read, tone(2), atol=0.5 * STEP["24-bit"] * (1 + 1e-9))
    assert len(read) == 12_001


class Silence:
    """More samples than four gibibytes hold, none of them in memory."""

    shape = (800_000_000, 2)

    def __len__(self):
        return self.shape[0]

    def __getitem__(self, part):
        return np.zeros((len(range(*part.indices(len(self)))), 2))


@pytest.mark.skipif(sys.platform == "win32", reason="a hole in a file takes room on this system")
def test_four_gibibytes_for_real(tmp_path, monkeypatch):
    # The samples are a hole in the file, so that it takes no room on the disk.
    path = tmp_path / "long.wav"
    monkeypatch.setattr(wave_module, "largest", lambda _: 0.0)
    monkeypatch.setattr(wave_module, "encode", lambda *_, **__: b"")
    write_wave(path, Silence(), rate_hz=RATE, sample_format="24-bit", heading=HEADING)
    with path.open("rb+") as file:
        file.truncate(path.stat().st_size + 800_000_000 * 6)

    info = soundfile.info(path)
    assert (info.frames, info.format, info.subtype) == (800_000_000, "RF64", "PCM_24")


def test_the_same_sound_gives_the_same_bytes(tmp_path):
    for sample_format in ("16-bit", "24-bit", "float"):
        first = write(tmp_path / "a.wav", tone(2), sample_format, rng=np.random.default_rng(7)).read_bytes()
        second = write(tmp_path / "b.wav", tone(2), sample_format, rng=np.random.default_rng(7)).read_bytes()
        assert first == second
        assert b"PEAK" not in first
    other = write(tmp_path / "c.wav", tone(2), "24-bit", rng=np.random.default_rng(8)).read_bytes()
    same = write(tmp_path / "d.wav", tone(2), "24-bit", rng=np.random.default_rng(7)).read_bytes()
    assert other != same


def test_half_steps_go_to_the_even_code():
    halves = (np.array([-2.5, -1.5, -0.5, 0.5, 1.5, 2.5]) / 2**15)[:, None]
    np.testing.assert_array_equal(np.frombuffer(encode(halves, "16-bit"), "<i2"), [-2, -2, 0, 0, 2, 2])


def test_dither_does_not_depend_on_blocks():
    samples = tone(2)
    whole = encode(samples, "24-bit", rng=np.random.default_rng(3))
    rng = np.random.default_rng(3)
    parts = b"".join(encode(samples[n : n + 1000], "24-bit", rng=rng) for n in range(0, len(samples), 1000))
    assert whole == parts


@pytest.mark.parametrize("sample_format", ["16-bit", "24-bit"])
def test_the_largest_codes_are_reached_and_no_further(tmp_path, sample_format):
    most = room(sample_format, dither=False)
    path = write(tmp_path / "full.wav", np.array([[most], [-1.0 * most]]), sample_format)
    read, _ = soundfile.read(path)
    assert read[0] == most
    with pytest.raises(TakeError, match=r"peaks at \+0\.00 dB of full scale and would clip"):
        write(tmp_path / "over.wav", np.array([[1.0]]), sample_format)


def test_clipping_is_refused_with_the_gain_that_helps(tmp_path):
    samples = 2.0 * tone(1)
    with pytest.raises(TakeError, match=r"lower it by 5\.11 dB") as caught:
        write(tmp_path / "loud.wav", samples)
    assert not (tmp_path / "loud.wav").exists()
    assert "1.801" in caught.value.faults[0].fix
    write(tmp_path / "loud.wav", samples, gain=10.0 ** (-5.11 / 20.0))
    # A float file has no ceiling.
    write(tmp_path / "float.wav", samples, "float")
    np.testing.assert_array_equal(soundfile.read(tmp_path / "float.wav")[0], samples[:, 0].astype(np.float32))


def test_numbers_that_are_none_are_refused(tmp_path):
    samples = tone(1)
    samples[70] = np.nan
    with pytest.raises(TakeError, match="not finite"):
        write(tmp_path / "bad.wav", samples)


def test_an_empty_file_is_still_a_wave(tmp_path):
    assert soundfile.info(write(tmp_path / "none.wav", np.zeros((0, 1)))).frames == 0


def test_text_outside_ascii_is_spelt(tmp_path):
    assert ascii_only("Kombüse: été ☂\n") == b"Kombuse: ete ??"
    heading = Heading(description="Kombüse " + 300 * "x", reference="", time_reference=0)
    data = chunks_of(write(tmp_path / "mug.wav", tone(1), heading=heading))[b"bext"]
    assert data[:256] == b"Kombuse " + 248 * b"x"
    assert data[256:264] == b"resonate"
