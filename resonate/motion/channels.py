"""The curves of a take as values: what each number is, and at which times it holds."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Literal

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from resonate.body.body import Surface
    from resonate.motion.visible import Kind

    Array = NDArray[np.float64]
    Indices = NDArray[np.int64]


def _freeze(value: object) -> None:
    for field in fields(value):  # type: ignore[arg-type]  # every caller is a dataclass
        held = getattr(value, field.name)
        if isinstance(held, np.ndarray):
            copy = np.array(held, order="C")
            copy.setflags(write=False)
            object.__setattr__(value, field.name, copy)


@dataclass(frozen=True, slots=True)
class BodyCurves:
    """The motion of one body, at T frames and at N keys (the frames and the begins of contacts).

    Parameters
    ----------
    name : str
        The body's name.
    place_m, turn : Array
        (T, 3) mass centre in the world, m, and (T, 4) quaternion xyzw, body to world, at the frames:
        instantaneous, consecutive quaternions in one hemisphere.
    weights : Array
        (T, K) how much of each shown shape is present, between -1 and 1.
    mode_numbers : Indices
        (K,) number of the mode in the listing of modes, from 1.
    labels : tuple[str, ...]
        Names of the shapes: ``mode_3``.
    kinds : tuple[Kind, ...]
        ``ring``: vibration, shown as ``ring`` below says. ``swing``: a hung body carried about as
        a whole, true and instantaneous.
    ring : Literal["off", "true", "readable"]
        How the ring is shown: not at all, averaged over the shutter, or enlarged and slowed down.
    gain : float
        How many times the ring is enlarged.
    true_hz, shown_hz : Array
        (K,) frequency of each shape and the frequency at which it is shown, Hz.
    unresolved_m : Array
        (T,) root-mean-square displacement, true size, of all modes above half the frame rate,
        at the surface point where it is largest, m.
    force_peak_n : Array
        (T,) largest contact force from this frame to the next, N.
    mesh : Surface
        Rest mesh in body axes with the mass centre as origin.
    targets : Array
        (K, n, 3) displacement of the mesh points at weight 1, m, body axes, enlargement included.
    key_place_m, key_turn, key_weights : Array
        (N, 3), (N, 4), (N, K) the same channels at the keys.
    """

    name: str
    place_m: Array
    turn: Array
    weights: Array
    mode_numbers: Indices
    labels: tuple[str, ...]
    kinds: tuple[Kind, ...]
    ring: Literal["off", "true", "readable"]
    gain: float
    true_hz: Array
    shown_hz: Array
    unresolved_m: Array
    force_peak_n: Array
    mesh: Surface
    targets: Array
    key_place_m: Array
    key_turn: Array
    key_weights: Array

    def __post_init__(self) -> None:
        """Copy and freeze the arrays."""
        _freeze(self)

    @property
    def scale_m(self) -> Array:
        """Largest displacement of a mesh point at weight 1 (K,), m, enlargement included."""
        if not len(self.targets):
            return np.zeros(0)
        return np.asarray(np.sqrt(np.max(np.sum(self.targets**2, axis=2), axis=1)))

    @property
    def gains(self) -> Array:
        """Enlargement of each shape (K,): ``gain`` for the ring, 1 for true motion."""
        return np.array([self.gain if kind == "ring" else 1.0 for kind in self.kinds])

    @property
    def amplitude_m(self) -> Array:
        """Signed displacement (T, K), m, of the surface point that each shape moves most.

        It is what the frames show, enlargement included: ``weights * scale_m``. Divided by ``gains`` it
        is the true size.
        """
        return np.asarray(self.weights * self.scale_m)

    @property
    def exaggerated(self) -> bool:
        """Whether any shape is shown larger, smaller or slower than it is."""
        ringing = "ring" in self.kinds
        return ringing and (self.gain != 1.0 or self.ring == "readable")

    @property
    def note(self) -> str:
        """One sentence on what is shown, for every file that carries it."""
        if "ring" not in self.kinds:
            return "no vibration is shown"
        if not self.exaggerated:
            return "vibration at true size and speed, averaged over the open shutter"
        size = f"EXAGGERATED: vibration enlarged {self.gain:.6g} times"
        if self.ring == "readable":
            return f"{size} and slowed down so that it can be seen; onset, sign and envelope are true"
        return f"{size}, at true speed, averaged over the open shutter"


@dataclass(frozen=True, slots=True)
class Curves:
    """The motion of every body of a take.

    Parameters
    ----------
    times_s : Array
        (T,) frame times, s after the first delivered frame (file time): ``k / rate``.
    key_times_s : Array
        (N,) frame times and the exact begins of contacts, file time, strictly increasing.
    frame_keys : Indices
        (T,) position of each frame among the keys.
    bodies : tuple[BodyCurves, ...]
        One a body, in the order of the scene.
    """

    times_s: Array
    key_times_s: Array
    frame_keys: Indices
    bodies: tuple[BodyCurves, ...]

    def __post_init__(self) -> None:
        """Copy and freeze the arrays."""
        _freeze(self)
