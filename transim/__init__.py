"""Switching transients of solid-state RF switches and their drivers, on ngspice."""

__all__ = ["__version__"]

__version__ = "0.1.0"
