"""The instrument socket: SCPI-99 and IEEE 488.2 over TCP, where the bench file asks for it.

From the outside in: `server` (TCP), `session` (one connection), `commands` (the tree, made of `basics` and `supply`),
`device` (the one instrument behind all connections), and under them the pure parts `syntax`, `tree`, `values`,
`status`, `conditions` and `errors`.  Only `server` knows a loop; nothing here decides about the bench.
"""

from hvhost.bench.model import Bench
from hvhost.publish.outlet import Host


def attach(bench: Bench, host: Host) -> None:
    """Make the instrument socket of a bench whose file has the section ``instrument``."""
    if bench.instrument is None:
        return
    from hvhost.publish.instrument.server import InstrumentServer

    server = InstrumentServer(bench, bench.instrument, host)
    host.add_outlet(server)
    host.add_service("instrument", server.serve)
