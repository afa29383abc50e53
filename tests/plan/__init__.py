"""Tests of the plan floor."""
