"""Floor 7: the commands. Each parses, calls, prints and sets the exit code; the work is done below."""

from passplan.cli.app import app, main

__all__ = ["app", "main"]
