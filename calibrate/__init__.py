"""Calibrate partial factors, or resistance and load factors, from records to a target reliability."""

from __future__ import annotations

__version__ = "0.1.0"
