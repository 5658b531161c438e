"""Floor 1: what the user writes, read and checked."""
