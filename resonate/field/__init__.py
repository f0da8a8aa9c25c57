"""The air round a body: what each mode sounds like at a place."""
