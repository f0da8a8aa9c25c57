"""The body room."""
