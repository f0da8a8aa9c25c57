"""Measures where the sound of a take stands in time: against its contacts, and against the run itself."""

from __future__ import annotations

import base64
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from resonate.take.report import Finding, nothing, within
from resonate.take.sync import first_sound, fit_piece, onset_near

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from resonate.take.readback import Table

    Array = NDArray[np.float64]
    Json = dict[str, Any]  # a JSON object holds any JSON value

#: An onset may be this far from its contact: what a detector can tell, not what the file keeps.
ONSET_LIMIT_S: Final = 2e-3
#: The sound may be off the run's own pressure by this much.
SYNC_LIMIT_SAMPLES: Final = 0.5
#: One step of the format as a share of full scale; single precision keeps 24 bits.
STEPS: Final = {"16-bit": 2.0**-15, "24-bit": 2.0**-23, "float": 2.0**-24}
_DEFECT: Final = "make the take again with --replace; if it stays, report it with the scene"
_MOVED: Final = "the sound was moved or changed after the run; make the take again with --replace"
# Rounding moves a sample by half a step, dither by one more.
_ROUNDING: Final = 1.5
# Hits closer than this are not told apart.
_APART_S: Final = 20e-3
# A piece whose peak is lower than so many steps is too faint to be placed in time.
_FAINT: Final = 64.0
# A moved sound is looked for as far as this, and is the same sound where it is at least so alike.
_SEARCH_S: Final = 0.5
_ALIKE: Final = 0.9


def contact_findings(samples: Array, table: Table, manifest: Json, where: str) -> Iterator[Finding]:
    """Whether every channel begins to sound at a contact, and the onsets of the later ones."""
    promised, rate = manifest["sound"], manifest["clock"]["sample_rate_hz"]
    begin_s, bodies = table.numbers("begin_s"), table.columns["body"]
    reach_s = max((promised["delay"]["reach_s"][body] for body in bodies), default=0.0)
    limit_ms = 1e3 * (ONSET_LIMIT_S + reach_s)
    floor = 2.0 * _ROUNDING * STEPS[promised["format"]]
    onsets: list[float] = []
    for channel, mic in enumerate(promised["channels"]):
        wave = samples[:, channel]
        expected = begin_s + np.array([promised["delay"]["late_s"][body][mic] for body in bodies])
        yield _first_finding(wave, expected, mic, rate=rate, floor=floor, limit_ms=limit_ms, where=where)
        for moment in expected:
            if np.sum(np.abs(expected - moment) < 3.0 * _APART_S) > 1:
                continue
            heard = onset_near(wave, rate_hz=rate, expected_s=moment, reach_s=_APART_S)
            if heard is not None:
                onsets.append(1e3 * (heard - moment))
    name = "onsets against contacts"
    if not onsets:
        why = "none stands out from what rings before" if len(begin_s) else "no contact"
        yield nothing(name, why, limit=f"{limit_ms:.3g} ms", where=where)
        return
    yield within(
        name,
        max(onsets, key=abs),
        limit_ms,
        unit="ms",
        where=where,
        fix=_DEFECT,
        note=f" at worst over {len(onsets)} of {len(begin_s) * samples.shape[1]}",
    )


def _first_finding(
    wave: Array, expected_s: Array, mic: str, *, rate: int, floor: float, limit_ms: float, where: str
) -> Finding:
    name = f"first sound at {mic} against the contacts"
    heard = first_sound(wave, rate_hz=rate, floor=floor)
    if heard is None:
        return nothing(name, "silent throughout", limit=f"{limit_ms:.3g} ms", where=where)
    # Sound without any contact is off by more than anything.
    late = heard - expected_s[np.argmin(np.abs(heard - expected_s))] if len(expected_s) else np.inf
    return within(name, 1e3 * float(late), limit_ms, unit="ms", where=where, fix=_DEFECT)


def run_findings(samples: Array, promised: Json, rate: int, where: str) -> Iterator[Finding]:
    """Compare with the pieces of pressure that the run left in the manifest: place in time, then every sample."""
    step = STEPS[promised["format"]]
    for channel, mic in enumerate(promised["channels"]):
        wave = samples[:, channel]
        entries = [entry for entry in promised["excerpts"] if entry["channel"] == mic]
        pieces = [_Piece.of(entry, promised["full_scale_pa"]) for entry in entries]
        if not pieces:
            loudest = float(np.max(np.abs(wave), initial=0.0)) / step
            name = f"sound at {mic}, where the run has none"
            yield within(name, loudest, _ROUNDING, unit="steps", where=where, fix=_MOVED)
            continue
        yield _late_finding(wave, pieces, mic, rate=rate, step=step, where=where)
        yield within(
            f"samples at {mic} against the run, largest difference",
            max(piece.difference(wave, step) for piece in pieces),
            _ROUNDING,
            unit="steps",
            where=where,
            fix=_MOVED,
            note=f" over {sum(len(piece.wave) for piece in pieces)}",
        )


class _Piece:
    # One excerpt in units of full scale; ``rounding`` is what its own 16 bits leave.
    __slots__ = ("begin", "rounding", "wave")

    def __init__(self, begin: int, wave: Array, rounding: float) -> None:
        self.begin, self.wave, self.rounding = begin, wave, rounding

    @classmethod
    def of(cls, entry: Json, full_scale_pa: float) -> _Piece:
        unit = entry["unit_pa"] / full_scale_pa
        codes = np.frombuffer(base64.b64decode(entry["codes"], validate=True), "<i2")
        return cls(int(entry["sample"]), unit * codes.astype(np.float64), 0.5 * unit)

    @property
    def peak(self) -> float:
        return float(np.max(np.abs(self.wave)))

    def difference(self, wave: Array, step: float) -> float:
        # In steps, less what the excerpt's own rounding explains.
        part = wave[self.begin : self.begin + len(self.wave)]
        if len(part) != len(self.wave):
            return float("inf")
        apart = float(np.max(np.abs(part - self.wave))) - self.rounding - 1e-9 * self.peak
        return max(0.0, apart / step)


def _late_finding(
    wave: Array, pieces: list[_Piece], mic: str, *, rate: int, step: float, where: str
) -> Finding:
    name = f"sound at {mic} against the run"
    clear = [piece for piece in pieces if piece.peak > _FAINT * step]
    if not clear:
        return nothing(name, "too faint to be placed in time", limit=f"{SYNC_LIMIT_SAMPLES:g} samples", where=where)
    late: list[float] = []
    for piece in clear:
        fit = fit_piece(wave, piece.wave, begin=piece.begin, reach=round(_SEARCH_S * rate))
        late.append(fit.late if fit.likeness > _ALIKE else float("nan"))
    worst = next((value for value in late if np.isnan(value)), max(late, key=abs))
    lost = int(np.sum(np.isnan(late)))
    note = f" at worst over {len(late)} moments" + (f", {lost} of them not found" if lost else "")
    return within(name, worst, SYNC_LIMIT_SAMPLES, unit="samples", where=where, fix=_MOVED, note=note)
