"""Errors a person can act on: what is wrong, where, and how to fix it.

This module imports nothing from the package.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing that is wrong.

    Parameters
    ----------
    what : str
        The value given and the values allowed.
    where : str
        File, line and key path (``galley.toml:12: body[2].material``), or the body's name.
    fix : str
        What to change so that it works.
    """

    what: str
    where: str
    fix: str

    def __str__(self) -> str:
        """Three readable lines."""
        return f"{self.where}\n  what: {self.what}\n  fix:  {self.fix}"


class ResonateError(Exception):
    """Root of every error this package raises on purpose.

    Carries one or more faults, so that all errors of a file can be reported at once.
    ``exit_code`` is what the command line returns: 1 a fault was found, 2 bad input.
    """

    exit_code = 2

    def __init__(
        self,
        *,
        what: str = "",
        where: str = "",
        fix: str = "",
        faults: tuple[Fault, ...] = (),
    ) -> None:
        self.faults = faults or (Fault(what=what, where=where, fix=fix),)
        super().__init__("\n".join(str(fault) for fault in self.faults))

    def __reduce__(self) -> tuple[object, ...]:
        """Survive the trip between processes."""
        return (_rebuild, (type(self), self.faults))


def _rebuild(kind: type[ResonateError], faults: tuple[Fault, ...]) -> ResonateError:
    return kind(faults=faults)


class SceneError(ResonateError):
    """The scene file, a preset or a value in it is not usable."""


class BodyError(ResonateError):
    """A body cannot be built from what was asked."""


class ModesError(ResonateError):
    """The modes of a body could not be found or do not hold."""


class RunError(ResonateError):
    """The run cannot start, or its energy ledger does not close."""


class TakeError(ResonateError):
    """A take cannot be written or read."""


class CheckFault(ResonateError):  # noqa: N818 (a fault found, not an error made)
    """A written take does not hold what it promises."""

    exit_code = 1
