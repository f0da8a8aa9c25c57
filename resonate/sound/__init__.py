"""From a record and the air to pressure at microphones, and its levels."""
