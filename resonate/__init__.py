"""One physical simulation, turned into sound and motion."""

__version__ = "0.1.0"
