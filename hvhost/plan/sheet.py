"""The run sheet's file."""

from hvhost.plan.plan import RunSheet

__all__ = ["RunSheet"]
