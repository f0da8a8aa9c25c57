"""What a check found: one line a measurement."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Final

from resonate.errors import CheckFault, Fault

if TYPE_CHECKING:
    from pathlib import Path

_SHOWN_DIGITS: Final = 12


@dataclass(frozen=True, slots=True)
class Finding:
    """One measurement.

    ``name`` what was measured; ``measured`` and ``limit`` with their units; ``ok`` whether it holds, None
    where there was nothing to measure; ``where`` the file; ``fix`` what to do when it does not.
    """

    name: str
    measured: str
    limit: str
    ok: bool | None
    where: str
    fix: str

    def __str__(self) -> str:
        """One line: ok, FAULT or none (nothing to measure), name, measured, limit, file."""
        verdict = {True: "ok   ", False: "FAULT", None: "none "}[self.ok]
        return f"{verdict} {self.name}: {self.measured} (limit: {self.limit}) [{self.where}]"


@dataclass(frozen=True, slots=True)
class Report:
    """All findings on the take in ``path``."""

    path: Path
    findings: tuple[Finding, ...]

    @property
    def ok(self) -> bool:
        """Whether everything that could be measured holds."""
        return all(finding.ok is not False for finding in self.findings)

    @property
    def faults(self) -> tuple[Fault, ...]:
        """What does not hold, as faults."""
        return tuple(
            Fault(
                what=f"{finding.name}: {finding.measured}, but the limit is {finding.limit}",
                where=finding.where,
                fix=finding.fix,
            )
            for finding in self.findings
            if finding.ok is False
        )

    def raise_faults(self) -> None:
        """Raise what does not hold, all at once; nothing if the take is sound.

        Raises
        ------
        CheckFault
            With one fault for each finding that is not ok.
        """
        if not self.ok:
            raise CheckFault(faults=self.faults)

    def as_json(self) -> dict[str, object]:
        """Give the report as JSON values, without the path of the folder."""
        return {
            "take": self.path.name,
            "ok": self.ok,
            "findings": [
                {
                    "name": finding.name,
                    "measured": finding.measured,
                    "limit": finding.limit,
                    "ok": finding.ok,
                    "where": finding.where,
                    "fix": finding.fix,
                }
                for finding in self.findings
            ],
        }


def within(
    name: str, value: float, limit: float, *, unit: str, where: str, fix: str, note: str = ""
) -> Finding:
    """Judge a measured deviation against its limit; not a number never holds."""
    spaced = f" {unit}" if unit else ""
    return Finding(
        name=name,
        measured=f"{value:.6g}{spaced}{note}",
        limit=f"{limit:.6g}{spaced}",
        ok=bool(abs(value) <= limit),
        where=where,
        fix=fix,
    )


def nothing(name: str, why: str, *, limit: str, where: str) -> Finding:
    """Own up to a measurement that could not be made."""
    return Finding(name=name, measured=why, limit=limit, ok=None, where=where, fix="")


def equal(name: str, value: object, expected: object, *, where: str, fix: str) -> Finding:
    """Judge whether a value is the expected one."""
    return Finding(
        name=name, measured=str(value), limit=str(expected), ok=value == expected, where=where, fix=fix
    )


def same_hash(name: str, found: str, expected: str, *, where: str, fix: str) -> Finding:
    """Judge whether two hashes are one; all digits count, the first twelve are shown."""
    short = f"{found[:_SHOWN_DIGITS]}..." if len(found) == len(expected) else found
    return Finding(
        name=name, measured=short, limit=f"{expected[:_SHOWN_DIGITS]}...", ok=found == expected, where=where, fix=fix
    )
