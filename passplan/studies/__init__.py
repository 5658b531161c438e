"""Floor 6: comparing variants of the network."""
