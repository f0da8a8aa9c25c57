"""The delivered folder: wave, tables, motion, manifest, and the check that measures them again."""
