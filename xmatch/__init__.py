"""Blankfield: what every archive already holds at one position, and what that rules out."""

__version__ = "0.1.0"
