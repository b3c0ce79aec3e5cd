"""Owlight measures how little light a coherent receiver needs, and keeps every reason to believe the number."""

__version__ = "0.1.0"
