"""Attaching: nothing at all unless the bench file names a broker."""

import subprocess
import sys
from pathlib import Path

from hvhost.publish import mqtt
from tests.publish.mqtt.scene import BROKER, NotingHost, bench_with

LAZY = """
import sys
from hvhost.publish import mqtt
from hvhost.bench.file import load_bench
from pathlib import Path
mqtt.attach(load_bench(Path(sys.argv[1])), None)
print(sorted(name for name in sys.modules if name.partition(".")[0] in ("aiomqtt", "paho", "asyncio")))
"""
CONFIGS = Path(__file__).parents[3] / "configs"


def test_a_bench_without_a_broker_loads_nothing() -> None:
    """No outlet, no task, no library: the daemon runs as if there were no such thing."""
    done = subprocess.run([sys.executable, "-c", LAZY, str(CONFIGS / "demo.bench.yaml")], capture_output=True,
                          text=True, check=True)
    assert "aiomqtt" not in done.stdout
    assert "paho" not in done.stdout


def test_a_bench_with_a_broker_gets_an_outlet_and_a_task() -> None:
    """One outlet and one service, both named."""
    host = NotingHost()
    mqtt.attach(bench_with(BROKER), host)
    assert [outlet.name for outlet in host.outlets] == ["mqtt"]
    assert [name for name, _ in host.services] == ["mqtt"]
