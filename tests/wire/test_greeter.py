"""The greeting as a sequence."""

import pytest

from hvhost.wire.events import Ended, EndWhy
from hvhost.wire.frames import Get, Info, Ok, Refusal, decode_received
from hvhost.wire.greeter import Greeter
from hvhost.wire.greeting import Greeting
from hvhost.wire.settings import PAGES
from tests.wire.device import SETTLED, Device

HELLO_OK = Ok(n=1, verb="hello", words=("1", "500"))


def run(device: Device) -> Greeting | Ended:
    """Greet against a device by hand until the greeter has a result."""
    greeter = Greeter(7, 500)
    step = greeter.take(greeter.hello(), HELLO_OK)
    assert step == tuple(Info(page=page) for page in range(4))
    for page in range(4):
        answer = decode_received(f"ok 1 info {page} {device.page(page)}".encode(), "ss")
        assert isinstance(answer, Ok)
        step = greeter.take(Info(page=page), answer)
        if isinstance(step, Greeting | Ended):
            return step
    assert step == tuple(Get(page=page) for page in range(PAGES))
    assert device.settings is not None
    for page in range(PAGES):
        values = " ".join(map(str, device.settings.values[page * 8 : page * 8 + 8]))
        answer = decode_received(f"ok 1 get {page} {values}".encode(), "ss")
        assert isinstance(answer, Ok)
        step = greeter.take(Get(page=page), answer)
    assert isinstance(step, Greeting | Ended)
    return step


def test_a_greeting_by_the_book() -> None:
    """Pages and settings come together in one value."""
    greeting = run(Device())
    assert isinstance(greeting, Greeting)
    assert greeting.settings == SETTLED
    assert greeting.fitted == SETTLED["fitted"]
    assert greeting.lease_s == 0.5
    assert greeting.why_none == ""


def test_blank_settings_still_greet() -> None:
    """An MCU with blank settings is greeted without settings, and says why."""
    greeting = run(Device(settings=None))
    assert isinstance(greeting, Greeting)
    assert greeting.settings is None
    assert greeting.fitted is None
    assert "blank" in greeting.why_none


def test_settings_with_another_checksum_are_not_trusted() -> None:
    """Settings that do not have the told checksum are none, with both checksums named."""
    greeting = run(Device(fields={"settings": "DEADBEEF"}))
    assert isinstance(greeting, Greeting)
    assert greeting.settings is None
    assert "DEADBEEF" in greeting.why_none
    assert f"{SETTLED.checksum:08X}" in greeting.why_none


@pytest.mark.parametrize(("answer", "why"), [
    (Refusal(n=1, verb="hello", code="version"), EndWhy.VERSION),
    (Refusal(n=1, verb="hello", code="range"), EndWhy.REFUSED),
    (Refusal(n=1, verb="hello", code="session"), EndWhy.SESSION),
    (Refusal(n=1, verb="hello", code="anythingnew"), EndWhy.REFUSED),
    (Ok(n=1, verb="hello", words=("2", "500")), EndWhy.VERSION),
    (Ok(n=1, verb="hello", words=()), EndWhy.VERSION),
    (Ok(n=1, verb="hello", words=("1", "400")), EndWhy.MALFORMED),
])
def test_a_bad_answer_to_hello_ends_the_greeting(answer: Ok | Refusal, why: EndWhy) -> None:
    """Version, refusal and a lease that was not asked for each end it with their reason."""
    greeter = Greeter(7, 500)
    step = greeter.take(greeter.hello(), answer)
    assert isinstance(step, Ended)
    assert step.why is why


@pytest.mark.parametrize("changes", [{"proto": "2"}, {"signs": "xy"}, {"tick": "5"}, {"boot": "-1"}])
def test_a_bad_page_ends_the_greeting(changes: dict[str, str]) -> None:
    """A page that says the impossible, or another version, ends it."""
    assert isinstance(run(Device(fields=changes)), Ended)


def test_pages_out_of_turn_end_the_greeting() -> None:
    """An answer with another page's number is malformed."""
    greeter = Greeter(7, 500)
    greeter.take(greeter.hello(), HELLO_OK)
    answer = decode_received(f"ok 1 info 1 {Device().page(1)}".encode(), "ss")
    assert isinstance(answer, Ok)
    step = greeter.take(Info(page=0), answer)
    assert isinstance(step, Ended)
    assert step.why is EndWhy.MALFORMED
