"""The storm in small: five random moments, one of each kind that hurts most; a hundred by the command."""

import asyncio
from pathlib import Path

from tests.publish.mqtt.mosquitto import need_broker
from tests.publish.mqtt.storm import Storm


def test_every_event_arrives_in_order_through_a_storm(tmp_path: Path) -> None:
    """Killed, restarted, frozen and cut off: each event id arrives, in the order in which things happened."""
    need_broker()
    storm = Storm(tmp_path, seed=5)
    assert asyncio.run(storm.run(5)) == []
    assert storm.offered > 20
