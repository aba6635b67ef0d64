"""The version of the program; `pyproject.toml` carries the same, which a test checks."""

__version__ = "0.1.0"
