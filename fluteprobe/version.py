"""The program's version."""

__version__ = "0.1.0"
