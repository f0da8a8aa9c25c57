"""What is asked: the scene file, its frozen models, quantities with units, presets."""
