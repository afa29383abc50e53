"""Checks plan x run sheet x bench x calibration before anything is live."""

from hvhost.plan.passing import History, Preflight

__all__ = ["History", "Preflight"]
