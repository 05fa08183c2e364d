"""Standby current of power-gated CMOS blocks."""

from hushrail._core import __version__

__all__ = ["__version__"]
