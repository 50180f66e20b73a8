"""Finback: convection coefficient, conductivity and joint resistance from temperatures along a fin."""

__version__ = "0.1.0"
