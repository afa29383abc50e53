"""Real-time scenarios run side by side: each is a plain test function, several at once in threads.

A scenario waits most of its time for a bench; one after the other they would take many minutes.  The first test of
this folder to be run hands all the collected ones to a pool; each test then only waits for its own result.  The
figures that scenarios measure are printed with ``-v`` and judge nothing.
"""

import os
from collections.abc import Iterator
from concurrent.futures import Future, ThreadPoolExecutor

import pytest

from tests.process.figures import FIGURES

AT_ONCE = 7  # each costs about a tenth of a core; more would make a loaded machine judge itself

HELD = 16  # pseudo-terminals kept open: see `_hold`

_held: list[int] = []
_pools: list[ThreadPoolExecutor] = []
_results: dict[str, Future[None]] = {}


def pytest_configure(config: pytest.Config) -> None:
    """Tell pytest of this folder's mark."""
    config.addinivalue_line("markers", "long: a scenario of half a minute or more; it is begun before the others")


def _begin(items: list[pytest.Item]) -> None:
    _hold()
    pool = ThreadPoolExecutor(AT_ONCE, thread_name_prefix="scenario")
    _pools.append(pool)
    mine = [item for item in items if isinstance(item, pytest.Function) and "process" in item.path.parts]
    mine.sort(key=lambda item: item.get_closest_marker("long") is None)  # the longest first
    for item in mine:
        params = item.callspec.params if hasattr(item, "callspec") else {}
        _results[item.nodeid] = pool.submit(item.obj, **params)


def _hold() -> None:
    """Take the lowest free pseudo-terminals: a daemon elsewhere on this machine whose stand-in has gone may be waiting
    for its number to come back, and would take the board of a scenario for its own."""
    for _ in range(HELD):
        _held.extend(os.openpty())


@pytest.hookimpl(tryfirst=True)
def pytest_pyfunc_call(pyfuncitem: pytest.Function) -> bool:
    """Wait for the scenario's end instead of calling it here."""
    if not _pools:
        _begin(pyfuncitem.session.items)
    _results[pyfuncitem.nodeid].result()
    return True


def pytest_sessionfinish() -> None:
    """An interrupted session waits for the scenarios that run, and begins no other."""
    for pool in _pools:
        pool.shutdown(cancel_futures=True)
    while _held:
        os.close(_held.pop())


@pytest.hookimpl(wrapper=True)
def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> Iterator[None]:
    """Print what the scenarios measured, where asked for."""
    yield
    if FIGURES and terminalreporter.verbosity > 0:
        terminalreporter.section("figures of the scenarios (not judged)")
        for line in sorted(FIGURES):
            terminalreporter.write_line(line)
