"""Measures the wave file of a take."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

import numpy as np

from resonate.take.check_motion import Frames
from resonate.take.check_sync import STEPS, contact_findings, run_findings
from resonate.take.readback import WaveFacts, read_table, read_wave_chunks
from resonate.take.report import Finding, equal, within

if TYPE_CHECKING:
    from collections.abc import Iterator
    from pathlib import Path

    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Json = dict[str, Any]  # a JSON object holds any JSON value

_AGAIN: Final = "the file was changed or damaged; make the take again with --replace"
_SUBTYPES: Final = {"16-bit": "PCM_16", "24-bit": "PCM_24", "float": "FLOAT"}


def sound_findings(file: Path, manifest: Json) -> Iterator[Finding]:
    """Length, format, position, cues, levels, and where the sound stands in time."""
    import soundfile

    clock, promised, where = Frames.of(manifest), manifest["sound"], file.name
    with soundfile.SoundFile(file) as wave:
        yield equal("format of samples", wave.subtype, _SUBTYPES[promised["format"]], where=where, fix=_AGAIN)
        yield equal("samples a second", wave.samplerate, clock.sample_rate, where=where, fix=_AGAIN)
        yield equal("channels", wave.channels, len(promised["channels"]), where=where, fix=_AGAIN)
        samples = wave.read(dtype="float64", always_2d=True)
    yield equal("samples", len(samples), clock.samples, where=where, fix=_AGAIN)
    yield _second_reader(file, samples)
    yield from _place_findings(read_wave_chunks(file), clock, manifest, where)
    yield from _level_findings(samples, promised, where)
    events_file = file.with_name(file.name.removesuffix(".wav") + ".events.csv")
    if events_file.is_file():
        table = read_table(events_file)
        yield from _cue_findings(read_wave_chunks(file), table.numbers("begin_s"), clock, where)
        yield from contact_findings(samples, table, manifest, where)
    yield from run_findings(samples, promised, clock.sample_rate, where)


def _second_reader(file: Path, samples: Array) -> Finding:
    import warnings

    from scipy.io import wavfile

    with warnings.catch_warnings():
        # It remarks on every chunk it does not know.
        warnings.simplefilter("ignore", wavfile.WavFileWarning)
        _, codes = wavfile.read(file)
    codes = codes.reshape(len(codes), -1)
    # Integers come left-justified in their type.
    whole = 1.0 if codes.dtype.kind == "f" else 2.0 ** (8 * codes.dtype.itemsize - 1)
    apart = float(np.max(np.abs(codes / whole - samples), initial=0.0))
    return within("two readers, largest difference", apart, 0.0, unit="", where=file.name, fix=_AGAIN)


def _place_findings(facts: WaveFacts, clock: Frames, manifest: Json, where: str) -> Iterator[Finding]:
    exact = clock.reference
    yield equal(
        "time reference", facts.time_reference, manifest["clock"]["time_reference"], where=where, fix=_AGAIN
    )
    yield within(
        "time reference against the exact time of frame 0",
        float(facts.time_reference - exact),
        0.5,
        unit="samples",
        where=where,
        fix=_AGAIN,
    )
    rest = str(exact - manifest["clock"]["time_reference"])
    yield equal(
        "part of a sample that rounding took",
        manifest["clock"]["time_reference_rest"],
        rest,
        where=where,
        fix=_AGAIN,
    )


def _level_findings(samples: Array, promised: Json, where: str) -> Iterator[Finding]:
    step = STEPS[promised["format"]]
    peak = float(np.max(np.abs(samples), initial=0.0))
    stated_db = promised["levels"]["peak_dbfs"]
    stated = 0.0 if stated_db is None else 10.0 ** (stated_db / 20.0)
    # Rounding moves a sample by half a step, dither by one more.
    yield within(
        "peak against the manifest, steps of the format",
        (peak - stated) / step,
        1.5 + 1e-9 * stated / step,
        unit="steps",
        where=where,
        fix=_AGAIN,
    )
    true_db = promised["levels"]["true_peak_dbtp"]
    if true_db is not None and peak > 100.0 * step:
        measured_db = 20.0 * np.log10(_true_peak(samples))
        # Two interpolators of ITU-R BS.1770 quality agree this well.
        yield within(
            "true peak against the manifest", measured_db - true_db, 0.2, unit="dB", where=where, fix=_AGAIN
        )


def _true_peak(samples: Array) -> float:
    from scipy.signal import resample_poly

    block, margin = 1 << 17, 512
    peak = 0.0
    for begin in range(0, len(samples), block):
        part = samples[max(0, begin - margin) : begin + block + margin]
        finer = resample_poly(part, 8, 1, axis=0, padtype="constant")
        peak = max(peak, float(np.max(np.abs(finer))))
    return peak


def _cue_findings(facts: WaveFacts, begin_s: Array, clock: Frames, where: str) -> Iterator[Finding]:
    # A contact has a cue when the sample nearest to it is in the file.
    moments = begin_s * clock.sample_rate
    nearest = np.rint(moments)
    inside = moments[(nearest >= 0) & (nearest < clock.samples)]
    cues = np.array([sample for sample, _ in facts.cues], dtype=np.float64)
    yield equal("cues", len(cues), len(inside), where=where, fix=_AGAIN)
    if len(cues) == len(inside):
        late = float(np.max(np.abs(np.sort(cues) - np.sort(inside)), initial=0.0))
        # Half a sample by rounding, and the last digit of the table.
        yield within("cues against events", late, 0.5 + 1e-3, unit="samples", where=where, fix=_AGAIN)
    unnamed = sum(not label for _, label in facts.cues)
    yield equal("cues without a label", unnamed, 0, where=where, fix=_AGAIN)
