"""Exchanges two folders in one step, where the system can."""

from __future__ import annotations

import ctypes
import os
import sys
from typing import TYPE_CHECKING, Final

if TYPE_CHECKING:
    from pathlib import Path

# Linux renameat2(2): directory descriptor for "relative to here", and RENAME_EXCHANGE.
_AT_FDCWD: Final = -100
_EXCHANGE: Final = 2
# macOS renamex_np(2): RENAME_SWAP.
_SWAP: Final = 2


def exchange(first: Path, second: Path) -> bool:
    """Let two folders change places at once; False if this system or file system cannot.

    At every moment each path names one whole folder. Nothing has happened when the answer is False.
    """
    one, two = os.fsencode(first), os.fsencode(second)
    try:
        if sys.platform == "linux":
            library = ctypes.CDLL(None, use_errno=True)
            return bool(library.renameat2(_AT_FDCWD, one, _AT_FDCWD, two, ctypes.c_uint(_EXCHANGE)) == 0)
        if sys.platform == "darwin":
            library = ctypes.CDLL(None, use_errno=True)
            return bool(library.renamex_np(one, two, ctypes.c_uint(_SWAP)) == 0)
    except (OSError, AttributeError):
        # A C library without the call.
        return False
    return False
