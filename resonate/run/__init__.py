"""The run room."""
