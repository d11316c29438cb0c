"""Wellposed: guaranteed enclosures of the constants on which well-posedness rests, over HTTP."""

__version__ = "0.2.0"
