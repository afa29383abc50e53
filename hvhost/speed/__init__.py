"""Measures the budgets on the machine at hand: each beside the thing that it is compared with, in one run.

A machine shared with others may do the same work at a half or at twice the speed a minute later, so nothing here is
judged by absolute figures where a ratio can be had: both sides are run in turn, in blocks, and medians are compared.
"""
