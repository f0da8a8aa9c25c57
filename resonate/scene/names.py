"""Names that are nearly right: suggestions for misspelt keys and presets."""

from __future__ import annotations

import difflib
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable


def nearest(name: str, allowed: Iterable[str]) -> str | None:
    """Return the allowed name closest to ``name``, or None when none is close.

    >>> nearest("matrial", ["name", "material", "support"])
    'material'
    """
    known = list(allowed)
    # A general word for a particular thing: "glass" for "soda-lime glass".
    holding = [item for item in known if name.casefold() in item.casefold().split()]
    if holding:
        return holding[0]
    folded = {item.casefold(): item for item in known}
    found = difflib.get_close_matches(name.casefold(), list(folded), n=1, cutoff=0.6)
    return folded[found[0]] if found else None


def listing(allowed: Iterable[str], *, most: int = 24) -> str:
    """Join names into one readable list, cut after ``most`` names.

    >>> listing(["left", "right"])
    'left, right'
    """
    known = list(allowed)
    text = ", ".join(known[:most])
    return text if len(known) <= most else f"{text}, ... ({len(known)} in all)"


def choose(name: str, allowed: Iterable[str]) -> str:
    """Say how to fix a wrong name: the nearest one if there is one, and what is allowed.

    >>> choose("clmaped", ["clamped", "pinned"])
    "did you mean 'clamped'? Allowed: clamped, pinned"
    """
    known = list(allowed)
    close = nearest(name, known)
    rest = f"Allowed: {listing(known)}"
    return f"did you mean {close!r}? {rest}" if close else rest
