"""hvhost runs scripted high-voltage tests from outside the danger zone, stops them when they arc, and records them."""

__version__ = "0.1.0"
