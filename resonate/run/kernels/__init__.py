"""Compiled loops: plain arrays in and out, no checks, a fixed order of operations (no fast-math)."""
