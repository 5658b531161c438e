"""Floor 6: the unattended run."""
