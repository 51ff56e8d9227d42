"""Kinds of object as declarative files, and the engine that holds them against what was found."""
