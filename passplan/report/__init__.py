"""Floor 5: what the plan looks like in the terminal and in files."""
