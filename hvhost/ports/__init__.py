"""Ports move bytes and decide nothing: a serial line, a TCP serial server, memory; and the system's clocks."""
