"""A broker for each test that asks for one, certificates made once for all."""

from collections.abc import Callable, Iterator
from pathlib import Path

import pytest

from tests.publish.mqtt.mosquitto import Certificates, Mosquitto, need_broker


@pytest.fixture
def broker(tmp_path: Path) -> Iterator[Mosquitto]:
    """A broker that lets everybody do everything."""
    need_broker()
    one = Mosquitto(tmp_path / "broker").start()
    yield one
    one.kill()


@pytest.fixture
def start(tmp_path: Path) -> Iterator[Callable[..., Mosquitto]]:
    """Starts brokers with configurations of their own."""
    need_broker()
    started: list[Mosquitto] = []

    def begin(extra: str, **more: str) -> Mosquitto:
        started.append(Mosquitto(tmp_path / f"broker{len(started)}", extra, **more))  # type: ignore[arg-type]
        return started[-1].start()
    yield begin
    for one in started:
        one.kill()


@pytest.fixture(scope="session")
def certificates(tmp_path_factory: pytest.TempPathFactory) -> Certificates:
    """An authority, its broker, a stranger's and a client's certificate."""
    need_broker()
    return Certificates(tmp_path_factory.mktemp("certificates"))
