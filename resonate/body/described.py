"""What every body knows from its description alone."""

from __future__ import annotations

from typing import TYPE_CHECKING, Protocol

if TYPE_CHECKING:
    from resonate.scene.model import BandSpec, BodySpec


class _Warned(Protocol):
    @property
    def warnings(self) -> tuple[str, ...]:
        """What a person should know."""


class Described:
    """Base of all bodies: answers that are in the scene, or that mesh and supports give."""

    if TYPE_CHECKING:
        spec: BodySpec

        @property
        def layout(self) -> _Warned:
            """The mesh."""

        @property
        def supports(self) -> _Warned:
            """What holds it."""

    @property
    def name(self) -> str:
        """The name given in the scene."""
        return self.spec.name

    @property
    def free(self) -> bool:
        """True when nothing supports it."""
        return not self.spec.support and not self.spec.held

    @property
    def held(self) -> bool:
        """True when it must not move as a whole."""
        return self.spec.held

    @property
    def bands(self) -> BandSpec:
        """The bands asked for."""
        return self.spec.modes

    @property
    def loss(self) -> tuple[tuple[float, float], ...]:
        """Material loss factor."""
        return self.spec.material.loss

    @property
    def warnings(self) -> tuple[str, ...]:
        """What a person should know."""
        return self.layout.warnings + self.supports.warnings
