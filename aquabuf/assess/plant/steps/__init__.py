"""One step of the works per module; a step takes a stream and returns what leaves it."""
