"""From two energies to modes: frequencies, shapes, decay by cause, and the store on disk."""
