"""Frames, samples and timecode are exact."""

from __future__ import annotations

from fractions import Fraction
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from resonate.scene.clock import Clock, FrameRate, frame_of, label_of, read_start
from resonate.scene.moments import Picture, read_moment
from resonate.scene.refused import RefusedError

DROP = FrameRate.read("30000/1001 drop")
DROP60 = FrameRate.read("60000/1001 drop")
RATES = [
    "24000/1001",
    24,
    25,
    "30000/1001",
    "30000/1001 drop",
    30,
    48,
    50,
    "60000/1001",
    "60000/1001 drop",
    60,
]

# Drop-frame labels: SMPTE ST 12-1; numbers 00 and 01 are skipped each minute but every tenth.
ANCHORS = [
    (0, "00:00:00;00"),
    (1799, "00:00:59;29"),
    (1800, "00:01:00;02"),
    (17981, "00:09:59;29"),
    (17982, "00:10:00;00"),
    (107892, "01:00:00;00"),
    (2589407, "23:59:59;29"),
]

# Samples a frame, exact fractions (cadences of SMPTE ST 299-1; arithmetic).
SAMPLES = [
    (44100, "24000/1001", Fraction(147147, 80)),
    (44100, 24, Fraction(3675, 2)),
    (44100, 25, Fraction(1764)),
    (44100, "30000/1001", Fraction(147147, 100)),
    (44100, "60000/1001", Fraction(147147, 200)),
    (48000, "24000/1001", Fraction(2002)),
    (48000, 24, Fraction(2000)),
    (48000, 25, Fraction(1920)),
    (48000, "30000/1001", Fraction(8008, 5)),
    (48000, "60000/1001", Fraction(4004, 5)),
    (96000, "24000/1001", Fraction(4004)),
    (96000, 24, Fraction(4000)),
    (96000, 25, Fraction(3840)),
    (96000, "30000/1001", Fraction(16016, 5)),
    (96000, "60000/1001", Fraction(8008, 5)),
]


def clock(rate=24, *, sample_rate=48000, start="00:00:00:00", handles=0, length="1"):
    frame = FrameRate.read(rate)
    first, numbered = read_start(start, frame)
    return Clock(frame, sample_rate, first, numbered, handles, Fraction(length))


@pytest.mark.parametrize(("frame", "label"), ANCHORS)
def test_drop_frame_anchors(frame, label):
    assert label_of(frame, DROP) == label
    assert frame_of(label, DROP) == frame
    assert frame_of(label.replace(";", ":"), DROP) == frame


def test_a_drop_frame_day_is_86_4_ms_short():
    # 2 589 408 frames last 86399.9136 s (SMPTE ST 12-1, arithmetic).
    assert DROP.day_frames == 2589408
    assert DROP.day_frames / DROP.fraction == Fraction("86399.9136")
    assert DROP60.day_frames == 2 * 2589408


@pytest.mark.parametrize(("sample_rate", "rate", "expected"), SAMPLES)
def test_samples_in_a_frame(sample_rate, rate, expected):
    ticking = clock(rate, sample_rate=sample_rate)
    assert (ticking.frame_time(1) - ticking.frame_time(0)) * sample_rate == expected


def test_the_cadence_of_29_97_at_48_khz():
    # 1602, 1601, 1602, 1601, 1602 samples: 8008 in five frames.
    ticking = clock("30000/1001", length="10")
    ends = [round(ticking.frame_time(k) * 48000) for k in range(6)]
    assert [b - a for a, b in pairwise(ends)] == [1602, 1601, 1602, 1601, 1602]


@pytest.mark.parametrize("label", ["00:01:00;00", "00:01:00;01", "00:01:00:00", "23:59:00;01"])
def test_labels_that_drop_frame_counting_skips_are_refused(label):
    with pytest.raises(RefusedError, match="does not exist") as caught:
        frame_of(label, DROP)
    assert ";02" in caught.value.fix


@pytest.mark.parametrize("frames", range(4))
def test_sixty_drops_four_numbers(frames):
    with pytest.raises(RefusedError, match="does not exist"):
        frame_of(f"00:01:00;{frames:02d}", DROP60)
    assert frame_of("00:01:00;04", DROP60) == 3600


@pytest.mark.parametrize(
    ("label", "rate", "what"),
    [
        ("01:00:00;00", 25, "does not drop"),
        ("24:00:00:00", 25, "outside 23:59:59:24"),
        ("00:60:00:00", 25, "outside"),
        ("00:00:61:00", 25, "outside"),
        ("00:00:00:25", 25, "outside"),
        ("00:00:00:24", "24000/1001", "outside 23:59:59:23"),
        ("1:00:00", 25, "not a timecode"),
        ("00:00:00.00", 25, "not a timecode"),
    ],
)
def test_wrong_labels_are_refused(label, rate, what):
    with pytest.raises(RefusedError, match=what):
        frame_of(label, FrameRate.read(rate))


@pytest.mark.parametrize(
    ("given_rate", "fraction", "drop"),
    [
        (23.976, Fraction(24000, 1001), False),  # common practice: decimals name the exact fractions
        ("23.98", Fraction(24000, 1001), False),
        (29.97, Fraction(30000, 1001), False),
        ("29.97 drop", Fraction(30000, 1001), True),
        (59.94, Fraction(60000, 1001), False),
        ("60000/1001 drop", Fraction(60000, 1001), True),
        ("25", Fraction(25), False),
        (24.0, Fraction(24), False),
        ("24 fps", Fraction(24), False),
    ],
)
def test_rates(given_rate, fraction, drop):
    assert FrameRate.read(given_rate) == FrameRate(fraction, drop=drop)


@pytest.mark.parametrize(
    "given_rate",
    [0, -24, 23, 29.5, "24/0", "24 drop", "24000/1001 drop", "48 drop", "fast", True, None, "25,0", 1e9],
)
def test_other_rates_are_refused(given_rate):
    with pytest.raises(RefusedError, match="frame rate|drop-frame labels"):
        FrameRate.read(given_rate)


@given(rate=st.sampled_from(RATES), frame=st.integers(0, 5_200_000))
def test_labels_come_back(rate, frame):
    read = FrameRate.read(rate)
    frame %= read.day_frames
    assert frame_of(label_of(frame, read), read) == frame


@pytest.mark.parametrize("rate", RATES)
def test_no_two_neighbours_share_a_label(rate):
    read = FrameRate.read(rate)
    minute = 60 * read.nominal
    for start in (0, 9 * minute, 10 * minute, read.day_frames - 2 * minute):
        labels = [label_of(frame, read) for frame in range(start, start + 2 * minute, 7)]
        assert labels == sorted(set(labels))


@pytest.mark.parametrize("spelling", ["29.97", "59.94", "23.976", "24", "25", "30", "50", "60", "48"])
def test_labels_agree_with_another_library(spelling):
    timecode = pytest.importorskip("timecode")
    drop = spelling in ("29.97", "59.94")
    rate = FrameRate.read(f"{spelling} drop" if drop else spelling)
    minute = 60 * rate.nominal
    frames = [*range(0, 3 * minute, 97), *range(9 * minute, 11 * minute, 131), 86399 * rate.nominal // 2]
    for frame in frames:
        # Its count begins at 1 for 00:00:00:00.
        theirs = str(timecode.Timecode(spelling, frames=frame + 1))
        assert label_of(frame, rate).replace(";", ":") == theirs.replace(";", ":")


def test_handles_come_before_and_after():
    ticking = clock(24, start=1001, handles=8, length="3")
    assert ticking.frame_count == 8 + 72 + 8
    assert ticking.frame_time(8) == 0
    assert ticking.begin == Fraction(-8, 24)
    assert ticking.end == 3 + Fraction(8, 24)
    assert [ticking.label(k) for k in (0, 8, 87)] == [993, 1001, 1080]


def test_a_part_of_a_frame_is_delivered_whole():
    assert clock(25, length="1.001").frame_count == 26
    assert clock(25, length="1").frame_count == 25


def test_the_run_begins_20_ms_earlier():
    assert clock(25, start="01:00:00:00", handles=5).run_begin_s == pytest.approx(-0.22, abs=1e-15)


@pytest.mark.parametrize(
    ("rate", "start", "handles", "sample_rate", "expected"),
    [
        # TimeReference counts samples from midnight (EBU Tech 3285): frames / rate x samples a second.
        (25, "01:00:00:00", 0, 48000, 3600 * 48000),
        (25, "01:00:00:00", 25, 48000, 3599 * 48000),
        ("24000/1001", "01:00:00:00", 0, 48000, Fraction(86400 * 1001, 24000) * 48000),
        ("30000/1001 drop", "01:00:00;00", 0, 44100, Fraction(107892 * 1001, 30000) * 44100),
        ("30000/1001 drop", "00:00:00;01", 0, 48000, Fraction(8008, 5)),
        (24, 1001, 8, 48000, Fraction(993, 24) * 48000),
        # Handles before midnight: from the midnight before. A day of 30 drop-frame labels is 2589408 frames
        # (SMPTE ST 12-1: 108000 an hour less 2 in 9 of 10 minutes).
        (24, "00:00:00:00", 8, 48000, Fraction(24 * 86400 - 8, 24) * 48000),
        ("30000/1001 drop", "00:00:00;05", 8, 48000, Fraction((2589408 - 3) * 1001, 30000) * 48000),
    ],
)
def test_time_reference(rate, start, handles, sample_rate, expected):
    ticking = clock(rate, start=start, handles=handles, sample_rate=sample_rate)
    assert ticking.time_reference + ticking.time_reference_rest == expected
    assert -Fraction(1, 2) <= ticking.time_reference_rest <= Fraction(1, 2)


def test_timecode_of_delivered_frames():
    ticking = clock("30000/1001 drop", start="00:01:00;02", handles=2, length="1")
    assert [ticking.timecode(k) for k in range(4)] == [
        "00:00:59;28",
        "00:00:59;29",
        "00:01:00;02",
        "00:01:00;03",
    ]
    assert clock(25, start="23:59:59:24", length="1").timecode(1) == "00:00:00:00"


def test_handles_may_reach_back_across_midnight():
    ticking = clock(24, start="00:00:00:00", handles=8, length="1")
    assert ticking.begins_the_day_before
    assert [ticking.timecode(k) for k in (0, 7, 8)] == ["23:59:59:16", "23:59:59:23", "00:00:00:00"]
    assert [ticking.label(k) for k in (0, 8)] == [0, 8]
    assert not clock(24, start="00:00:00:08", handles=8, length="1").begins_the_day_before


@pytest.mark.parametrize(
    ("start", "moment", "frames"),
    [("00:00:00:00", "23:59:59:20", -4), ("23:59:59:20", "00:00:00:02", 6), ("01:00:00:00", "00:59:59:23", -1)],
)
def test_labels_across_midnight_are_near(start, moment, frames):
    rate = FrameRate.read(24)
    picture = Picture(rate=rate, start_frame=frame_of(start, rate), numbered=False)
    assert read_moment(moment, picture) * 24 == frames


@given(
    rate=st.sampled_from(RATES),
    sample_rate=st.sampled_from([44100, 48000, 88200, 96000, 176400, 192000]),
    handles=st.integers(0, 100),
    length=st.fractions(min_value=Fraction(1, 1000), max_value=1000, max_denominator=1000),
)
def test_identities(rate, sample_rate, handles, length):
    ticking = Clock(FrameRate.read(rate), sample_rate, 10**5, numbered=True, handles=handles, length=length)
    assert ticking.frame_time(0) == ticking.sample_time(0) == ticking.begin
    assert ticking.frame_time(handles) == 0
    assert ticking.frame_time(ticking.frame_count) == ticking.end
    # The length is covered, by less than one frame more.
    over = ticking.end - handles / ticking.frame.fraction - length
    assert 0 <= over < 1 / ticking.frame.fraction
    # The last sample lies in the take, the next one does not.
    assert (
        ticking.sample_time(ticking.sample_count - 1)
        < ticking.end
        <= ticking.sample_time(ticking.sample_count)
    )
