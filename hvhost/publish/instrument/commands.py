"""The whole command tree in one table; ``hvhost schema instrument`` prints it."""

from hvhost.publish.instrument.basics import COMMON, STATUS, SYSTEM
from hvhost.publish.instrument.supply import MEASURE, OUTPUT, SOURCE
from hvhost.publish.instrument.tree import Tree, listing

TREE = Tree((*COMMON, *SYSTEM, *STATUS, *SOURCE, *OUTPUT, *MEASURE))


def command_table() -> str:
    """The tree as a Markdown table."""
    return listing(TREE)
