"""The section ``daemon:`` of a bench file: what the daemon asks of the machine under it."""

from dataclasses import dataclass
from typing import Annotated

from hvhost.words.fields import Block, quantity, schema_of
from hvhost.words.quantities import Dimension

# Less is filled by the close of one long run: its export, and the copy at rest that is proven equal before the
# original goes, stand beside the block file for a while.
DISK_FLOOR_B = 500e6
STALLS_IN_A_LEASE = 10  # a lease shorter than so many of the machine's worst stalls may lapse for no reason


class DaemonBlock(Block):
    """``disk_floor``: with less room in the runs folder no run is opened, and one in progress is lowered."""

    disk_floor: Annotated[float, quantity(Dimension.BYTE, low=1e6, high=1e15),
                          schema_of(Dimension.BYTE)] = DISK_FLOOR_B


@dataclass(frozen=True, slots=True, kw_only=True)
class Service:
    """What the daemon asks of the machine under it: room in the runs folder, in bytes."""

    disk_floor_b: float = DISK_FLOOR_B


DEFAULT = Service()


def service_of(block: DaemonBlock | None) -> Service:
    """The section as the program works with it; a file without it gets the defaults."""
    return DEFAULT if block is None else Service(disk_floor_b=block.disk_floor)
