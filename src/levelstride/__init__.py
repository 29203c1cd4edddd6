"""Levelstride: how long a step can this level set carry, and what bites first."""

__version__ = "0.1.0"
