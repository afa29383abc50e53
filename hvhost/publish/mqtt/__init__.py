"""The outlet to an MQTT broker; nothing of it is loaded where the bench file names none."""

import os

from hvhost.bench.model import Bench
from hvhost.publish.outlet import Host


def attach(bench: Bench, host: Host) -> None:
    """Attach the outlet where the bench file names a broker."""
    if bench.broker is not None:
        from hvhost.publish.mqtt import outlet

        outlet.attach(bench, host, os.environ)
