"""The compiled loops of the run, each behind a checked and typed function."""
