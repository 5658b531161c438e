"""The one place that states the version; pyproject.toml reads it from here."""

__version__ = "0.1.0"
