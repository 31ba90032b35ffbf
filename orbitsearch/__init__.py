"""Periodic orbits of three equal masses in the plane: search, refine, verify, catalogue."""

__version__ = "0.1.0"
__all__ = ["__version__"]
