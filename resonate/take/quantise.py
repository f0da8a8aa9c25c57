"""From numbers to the bytes of samples: rounding, dither and the room that a format has."""

from __future__ import annotations

from typing import TYPE_CHECKING, Final, Literal

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

Format = Literal["16-bit", "24-bit", "float"]

#: Bits of one sample in the file.
BITS: Final = {"16-bit": 16, "24-bit": 24, "float": 32}


def room(sample_format: Format, *, dither: bool) -> float:
    """Find the largest magnitude that a format takes, as a share of full scale.

    Full scale is the largest negative code; the largest positive one lies one step below, and dither
    may add one step more. A float file has no such limit.

    >>> room("16-bit", dither=False) == 32767 / 32768
    True
    """
    if sample_format == "float":
        return float("inf")
    steps: int = 1 << (BITS[sample_format] - 1)
    return (steps - (2 if dither else 1)) / steps


def encode(samples: Array, sample_format: Format, *, rng: np.random.Generator | None = None) -> bytes:
    """Bytes of interleaved little-endian samples.

    Integers are rounded half to even. With a generator, triangular dither of two steps peak to peak is
    added first: the error then has no mean and no variance that follows the signal, and a root
    mean square of half a step.

    Parameters
    ----------
    samples : Array
        (n, channels) in shares of full scale, within ``room``.
    sample_format : Format
        ``16-bit``, ``24-bit`` or ``float`` (32-bit IEEE).
    rng : numpy.random.Generator, optional
        Source of the dither; the same numbers come out however the samples are cut into blocks.

    References
    ----------
    Lipshitz, Wannamaker & Vanderkooy, Quantization and dither: a theoretical survey, J. Audio Eng. Soc. 40,
    355-375 (1992).
    """
    if sample_format == "float":
        return samples.astype("<f4").tobytes()
    bits = BITS[sample_format]
    scaled = samples * 2.0 ** (bits - 1)
    if rng is not None:
        pair = rng.random((*samples.shape, 2))
        scaled += pair[..., 0] - pair[..., 1]
    codes = np.rint(scaled).astype("<i4")
    if bits == 16:  # noqa: PLR2004 (the format's name)
        return codes.astype("<i2").tobytes()
    # The low three bytes of each little-endian code.
    return np.ascontiguousarray(codes).view(np.uint8).reshape(-1, 4)[:, :3].tobytes()
