"""What a check found: one line a measurement."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

from resonate.errors import CheckFault, Fault

if TYPE_CHECKING:
    from pathlib import Path


@dataclass(frozen=True, slots=True)
class Finding:
    """One measurement.

    ``name`` what was measured; ``measured`` and ``limit`` with their units; ``ok`` whether it holds;
    ``where`` the file; ``fix`` what to do when it does not.
    """

    name: str
    measured: str
    limit: str
    ok: bool
    where: str
    fix: str

    def __str__(self) -> str:
        """One line: ok or FAULT, name, measured, limit, file."""
        verdict = "ok   " if self.ok else "FAULT"
        return f"{verdict} {self.name}: {self.measured} (limit: {self.limit}) [{self.where}]"


@dataclass(frozen=True, slots=True)
class Report:
    """All findings on the take in ``path``."""

    path: Path
    findings: tuple[Finding, ...]

    @property
    def ok(self) -> bool:
        """Whether everything holds."""
        return all(finding.ok for finding in self.findings)

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
            if not finding.ok
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


def equal(name: str, value: object, expected: object, *, where: str, fix: str) -> Finding:
    """Judge whether a value is the expected one."""
    return Finding(
        name=name, measured=str(value), limit=str(expected), ok=value == expected, where=where, fix=fix
    )
