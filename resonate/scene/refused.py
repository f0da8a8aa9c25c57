"""The refusal of one value: raised by parsers, gathered into faults when a scene is read."""

from __future__ import annotations

import json

_MOST = 12  # elements shown of a list

Key = str | int
Path = tuple[Key, ...]


class RefusedError(ValueError):
    """A value that cannot be used."""

    def __init__(self, what: str, fix: str, *, at: Path = ()) -> None:
        """Say what is wrong, how to fix it, and which keys below the value lead to the culprit.

        Parameters
        ----------
        what : str
            The value given and what is allowed.
        fix : str
            What to write instead.
        at : tuple of str or int
            ``("wall",)`` for instance.
        """
        self.what = what
        self.fix = fix
        self.at = at
        super().__init__(f"{what}; {fix}")


def shown(value: object, *, limit: int = 60) -> str:
    """Write a value the way a scene file spells it, shortened to ``limit`` characters.

    >>> shown(True), shown("3 mm"), shown([1, 2.5])
    ('true', '"3 mm"', '[1, 2.5]')
    """
    if isinstance(value, bool):
        text = "true" if value else "false"
    elif isinstance(value, str):
        text = json.dumps(value, ensure_ascii=False)
    elif isinstance(value, list | tuple):
        text = (
            "["
            + ", ".join(shown(item) for item in value[:_MOST])
            + ("]" if len(value) <= _MOST else ", ...]")
        )
    elif isinstance(value, dict):
        text = "{" + ", ".join(f"{key} = {shown(item)}" for key, item in list(value.items())[:8]) + "}"
    else:
        text = str(value)
    return text if len(text) <= limit else text[: limit - 3] + "..."
