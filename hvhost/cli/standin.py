"""``hvhost standin``: MCU and plant in software, answering on a port as a board would."""

import argparse

from hvhost.cli import exits
from hvhost.standin.launch import add_arguments, run_standin

ABOUT = """A bench in software: an MCU that implements the whole protocol, and a plant with supply, cable, specimen and
measuring chain.  Deterministic from its seed, which it prints first; then it prints the port on which it answers."""


def run(argv: list[str]) -> int:
    """Serve stand-ins until told to quit."""
    parser = argparse.ArgumentParser(prog="hvhost standin", description=ABOUT, epilog=exits.EPILOG)
    add_arguments(parser)
    return run_standin(parser.parse_args(argv))
