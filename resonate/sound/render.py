"""From a record to pressure at the microphones."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from math import ceil
from typing import TYPE_CHECKING

import numpy as np

from resonate.errors import ResonateError
from resonate.sound.filter import BandLimit, Grid, band_limit, deliver
from resonate.sound.hearing import Hearing, hearings
from resonate.sound.ring import exponents, ring
from resonate.sound.timeline import Stretch, batches, ended, nodes_of, only, stretches

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from numpy.typing import NDArray

    from resonate.field.transfer import Transfer
    from resonate.run.record import Record, Segment
    from resonate.run.track import BodyTrack
    from resonate.scene.clock import Clock
    from resonate.scene.model import Scene

    Array = NDArray[np.float64]
    ComplexArray = NDArray[np.complex128]

# Modes are dropped from a ring once together they are 180 dB below the peak of their body.
TOLERANCE = 1e-9
# Samples rendered at once.
BLOCK = 1 << 18


@dataclass(frozen=True, slots=True)
class Sound:
    """Pressure at the microphones.

    ``pressure_pa`` (samples, channels), read-only; ``rate_hz``; ``channel_names``, one a channel.
    """

    pressure_pa: Array
    rate_hz: int
    channel_names: tuple[str, ...]

    def __post_init__(self) -> None:
        """Check and freeze."""
        pressure = np.asarray(self.pressure_pa, dtype=np.float64).view()
        if pressure.ndim != 2 or pressure.shape[1] != len(self.channel_names):  # noqa: PLR2004
            raise ResonateError(
                what=f"an array of shape {pressure.shape} for {len(self.channel_names)} channels",
                where="sound",
                fix="give samples by channels",
            )
        pressure.setflags(write=False)
        object.__setattr__(self, "pressure_pa", pressure)


def render(record: Record, transfers: Sequence[Transfer], scene: Scene) -> Sound:
    """Render every body at every microphone.

    Parameters
    ----------
    record : Record
        What the run left behind.
    transfers : Sequence[Transfer]
        One radiation model a body, in the order of ``record.bodies``.
    scene : Scene
        Microphones, clock, air and delivery.

    Returns
    -------
    Sound
        Pressure, Pa, not normalised. Sample n is at scene time ``clock.begin + n / rate``. With
        ``delay = false`` the smallest distance from a body's centre to a microphone, over all pairs, takes no
        time; what is left are true differences in arrival.

    Notes
    -----
    The pressure is known in continuous time: each mode rings freely, or under a force that is constant
    over a contact step. Its convolution with the band-limiting kernel is in closed form
    where the kernel touches no contact (one complex gain a mode) and Gauss-Legendre quadrature over
    the contact steps elsewhere; both are exact to rounding, so that they meet without a step and
    nothing above the stop edge folds back.

    A moving body is heard from its direction and distance at each moment, interpolated between
    poses; its arrival time stays that of scene time 0 (no Doppler shift).
    """
    from threadpoolctl import threadpool_limits

    if len(transfers) != len(record.bodies):
        raise ResonateError(
            what=f"{len(transfers)} radiation models for {len(record.bodies)} bodies",
            where="sound",
            fix="give one a body, in the order of the scene",
        )
    clock = scene.clock
    heard_hz = max((track.modes.heard_hz for track in record.bodies), default=0.0)
    limit = band_limit(clock.sample_rate, heard_hz=heard_hz)
    pressure = np.zeros((clock.sample_count, len(scene.mics)))
    with threadpool_limits(1):
        pairs = hearings(record.bodies, transfers, scene)
        for track, of_body in zip(record.bodies, pairs, strict=True):
            if track.modes.heard <= track.modes.swing or not _moves(track):
                continue
            voice = _Voice.of(track, limit, clock)
            for channel, heard in enumerate(of_body):
                voice.add_to(pressure[:, channel], heard)
    return Sound(pressure, clock.sample_rate, tuple(mic.name for mic in scene.mics))


def _moves(track: BodyTrack) -> bool:
    return any(segment.is_contact or np.any(segment.z) for segment in track.segments)


@dataclass(frozen=True, slots=True)
class _Voice:
    # One body, ready to be rendered at any microphone. Vectors run over its sounding modes.
    sounding: slice
    segments: tuple[Segment, ...]
    limit: BandLimit
    clock: Clock
    omega: Array
    decay: Array
    exponent: ComplexArray
    speed: ComplexArray
    gain: ComplexArray
    stretches: tuple[Stretch, ...]

    @classmethod
    def of(cls, track: BodyTrack, limit: BandLimit, clock: Clock) -> _Voice:
        sounding = slice(track.modes.swing, track.modes.heard)
        omega, decay = track.modes.omega[sounding], track.modes.decay.total[sounding]
        exponent = exponents(omega, decay)
        return cls(
            sounding=sounding,
            segments=only(track.segments, sounding),
            limit=limit,
            clock=clock,
            omega=omega,
            decay=decay,
            exponent=exponent,
            # q' = Re[(1 + j a / wd) z], hence q'' = Re[(1 + j a / wd) z'].
            speed=np.asarray(1.0 - 1j * exponent.real / exponent.imag, dtype=np.complex128),
            gain=limit.gain(exponent),
            stretches=stretches(track.segments, limit.half_s),
        )

    def add_to(self, out: Array, heard: Hearing) -> None:
        # In order of time, so that the loudest sample so far bounds what a ring may leave out.
        peak = 0.0
        for stretch, begin, end in self._blocks(heard):
            for first, last, knot in heard.spans(begin, end, self.clock):
                columns = heard.columns(knot)[self.sounding] * self.speed[:, None]
                signal = self._window if stretch.window else self._ringing
                part = signal(stretch, columns, _Samples(first, last - first, heard.shift), peak)
                mixed = heard.mix(part, knot=knot, first=first, clock=self.clock)
                out[first:last] += mixed
                peak = max(peak, float(np.max(np.abs(mixed), initial=0.0)))

    def _blocks(self, heard: Hearing) -> Iterator[tuple[Stretch, int, int]]:
        for stretch in self.stretches:
            begin = self._sample(stretch.begin_s, heard)
            end = self._sample(stretch.end_s, heard)
            for first in range(begin, end, BLOCK):
                yield stretch, first, min(first + BLOCK, end)

    def _sample(self, time_s: float, heard: Hearing) -> int:
        # First sample emitted at or after a time; exact, so that every sample has one stretch.
        if not np.isfinite(time_s):
            return 0 if time_s < 0.0 else self.clock.sample_count
        place = (Fraction(time_s) + heard.shift - self.clock.begin) * self.clock.sample_rate
        return min(max(ceil(place), 0), self.clock.sample_count)

    def _since(self, samples: _Samples, origin_s: float) -> float:
        # Emission time of the first sample counted from an origin, rounded once.
        return float(self.clock.sample_time(samples.first) - samples.shift - Fraction(origin_s))

    def _ringing(self, stretch: Stretch, columns: ComplexArray, samples: _Samples, peak: float) -> Array:
        # (count, c) filtered ringing for constant columns (m, c).
        at_end = stretch.first == len(self.segments)
        segment = ended(self.segments[-1], self.exponent) if at_end else self.segments[stretch.first]
        state = segment.z * np.exp(self.exponent * self._since(samples, segment.begin_s))
        return ring(
            self.exponent * state,
            columns * self.gain[:, None],
            omega=self.omega,
            decay=self.decay,
            rate_hz=float(self.clock.sample_rate),
            count=samples.count,
            tolerance=TOLERANCE,
            peak=np.full(columns.shape[1], peak) if peak > 0.0 else None,
        )

    def _window(self, stretch: Stretch, columns: ComplexArray, samples: _Samples, _peak: float) -> Array:
        # The same in a window, where forces act within reach of the kernel.
        origin_s = self.segments[stretch.first].begin_s
        since, rate_hz = self._since(samples, origin_s), float(self.clock.sample_rate)
        half_s, count = self.limit.half_s, samples.count
        top_hz = float(self.limit.stop_hz + self.omega[-1] / (2.0 * np.pi))
        span = (since - half_s, since + (count - 1) / rate_hz + half_s)
        out = np.zeros((count, columns.shape[1]))
        for batch in batches(self.segments, stretch, self.exponent, origin_s=origin_s, span_s=span):
            nodes, values = nodes_of(batch, columns, self.exponent, top_hz=top_hz)
            # The samples that this batch reaches.
            low = max(0, int((nodes[0] - half_s - since) * rate_hz) - 1)
            high = min(count, int((nodes[-1] + half_s - since) * rate_hz) + 2)
            if high > low:
                grid = Grid(first_s=since + low / rate_hz, rate_hz=rate_hz, count=high - low)
                out[low:high] += deliver(self.limit, values, nodes_s=nodes, grid=grid)
        return out


@dataclass(frozen=True, slots=True)
class _Samples:
    # A run of delivery samples, and how much later than emitted they arrive.
    first: int
    count: int
    shift: Fraction
