"""The one door to the compiler, typed."""

from __future__ import annotations

from typing import TYPE_CHECKING, TypeVar, cast

import numba

if TYPE_CHECKING:
    from collections.abc import Callable
    from typing import Any

    Kernel = TypeVar("Kernel", bound=Callable[..., Any])
else:
    Kernel = TypeVar("Kernel")


def compiled(kernel: Kernel) -> Kernel:
    """Compile a loop on first use and keep the machine code on disk."""
    fast = numba.njit(cache=True, error_model="numpy")(kernel)
    return cast("Kernel", fast)
