"""Bodies and happenings advanced together in one run."""
