"""Draws in, prior and likelihood terms, and the record that holds them."""

from steelyard.base.draws import Draws
from steelyard.base.record import Base, read_base

__all__ = ["Base", "Draws", "read_base"]
