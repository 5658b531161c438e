"""Floor 2: where spacecraft are, and when antennas can follow them."""
