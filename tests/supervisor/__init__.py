"""Tests of the supervisor."""
