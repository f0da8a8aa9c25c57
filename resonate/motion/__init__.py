"""Record to curves at frame times: shutter, visible ring, unresolved amplitude."""
