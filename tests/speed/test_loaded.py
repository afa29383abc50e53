"""What a loaded daemon is put beside: the example bench at ten times its rate, checked as any bench file is."""

import socket
from pathlib import Path

import pytest

from hvhost.bench.file import load_bench
from hvhost.speed import loaded
from hvhost.speed.setting import Setting
from hvhost.words.errors import CannotConnect


def test_the_bench_is_the_example_at_ten_times_its_rate(setting: Setting) -> None:
    """Accepted without a word that refuses, with the outlets named."""
    path = loaded._bench(setting, 1883, 5025)
    bench = load_bench(path)
    assert bench.rate_hz == 10_000.0
    assert bench.broker is not None
    assert bench.broker.commands
    assert bench.instrument is not None
    assert load_bench(loaded._bench(setting, 0, 5025)).broker is None


def test_an_example_that_changed_is_told(setting: Setting, tmp_path: Path) -> None:
    """A rate that is no longer there would be measured at the old one in silence."""
    path = tmp_path / "other.yaml"
    path.write_text("bench: other\n")
    other = Setting(bench=path, folder=tmp_path, minutes=0.1)
    with pytest.raises(CannotConnect, match="in the example bench"):
        loaded._bench(other, 0, 5025)


def test_a_free_port_can_be_bound() -> None:
    """Nobody listens there."""
    port = loaded.free_port()
    with socket.create_server(("127.0.0.1", port)) as server:
        assert server.getsockname()[1] == port
