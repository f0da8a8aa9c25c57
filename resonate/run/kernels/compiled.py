"""One typed way to compile a loop."""

from __future__ import annotations

from typing import TYPE_CHECKING, TypeVar, cast

import numba

if TYPE_CHECKING:
    from collections.abc import Callable

    Loop = TypeVar("Loop", bound=Callable[..., object])
else:
    Loop = TypeVar("Loop")


def compiled(loop: Loop) -> Loop:
    """Compile a loop once and keep it on disk.

    No fast math and no threads: the order of operations is fixed, so that a run repeats bit by bit.
    """
    return cast("Loop", numba.njit(cache=True)(loop))
