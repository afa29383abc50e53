"""Commands from a broker: exactly a stop, of this session, in time, once; anything else is refused and counted."""

import contextlib
import json
import time
from typing import Any

import jsonschema
import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish.mqtt.orders import BURST, LONGEST, SENDERS_KEPT, VALID_S, Orders, parse
from hvhost.publish.mqtt.topics import CUT
from hvhost.words.errors import CommandRefused

UTC = 1_764_594_202_000_000_000
SESSION = "0123456789abcdef-3"


def command(**changes: Any) -> bytes:
    """A good command, with changes."""
    data = {"session": SESSION, "counter": 1, "expires": UTC + 2_000_000_000, "from": "desk", **changes}
    return json.dumps({key: value for key, value in data.items() if value is not ...}).encode()


def take(orders: Orders, payload: bytes, name: str = "cut", retained: bool = False, now_s: float = 0.0,
         utc_ns: int = UTC) -> Any:
    """Judge one."""
    return orders.take(name, payload, retained=retained, session=SESSION, now_s=now_s, utc_ns=utc_ns)


def test_a_good_command_is_taken_once() -> None:
    """The same bytes again are refused: a counter must rise for each sender, and each sender has its own."""
    orders = Orders()
    assert take(orders, command()).sender == "desk"
    with pytest.raises(CommandRefused, match="a counter above 1"):
        take(orders, command())
    with pytest.raises(CommandRefused, match="a counter above 1"):
        take(orders, command(counter=0))
    assert take(orders, command(counter=2), "lower").counter == 2
    assert take(orders, command(**{"from": "gate"})).sender == "gate"
    assert (orders.accepted, orders.refused) == (3, 2)


@pytest.mark.parametrize(("left_s", "words"), [
    (-0.001, "expired"), (0.0, "expired"), (-3600.0, "expired 3600.0 s ago"), (VALID_S + 0.1, "10.1 s ahead"),
    (1e6, "ahead")])
def test_an_expiry_out_of_its_window_is_refused(left_s: float, words: str) -> None:
    """Past, or so far ahead that a replay could not be told: refused, with the clocks named as a cause."""
    with pytest.raises(CommandRefused, match=words) as caught:
        take(Orders(), command(expires=UTC + round(left_s * 1e9)))
    assert "clocks" in str(caught.value)


def test_a_replay_is_refused_for_as_long_as_it_could_pass() -> None:
    """The counter is known until its command has expired, although memory of it is dropped later."""
    orders = Orders()
    payload = command(expires=UTC + 10_000_000_000)
    take(orders, payload)
    for after_ns in range(0, 40_000_000_000, 500_000_000):
        with pytest.raises(CommandRefused):
            take(orders, payload, now_s=after_ns / 1e9, utc_ns=UTC + after_ns)
    assert take(orders, command(counter=1, expires=UTC + 61_000_000_000), now_s=60.0, utc_ns=UTC + 60_000_000_000)


@pytest.mark.parametrize("payload", [
    b"", b"{}", b"null", b"cut", b"[]", b'"cut"', b"1", b"NaN", b"\xff\xfe", b"{" * 400, b"[" * 400,
    command(counter=True), command(counter=1.0), command(counter=-1), command(counter="1"), command(counter=2**63),
    command(counter=None), command(expires=1e19), command(session=5), command(session=""), command(extra=1),
    command(counter=...), command(**{"from": "de sk"}), command(**{"from": "x" * 65}), command(**{"from": "d\n"}),
    command(**{"from": "d\u00e4sk"}), command() + b" " * LONGEST, command().replace(b"1", b"01", 1),
    command()[:-1] + b',"counter":9}', b'{"session":"a","counter":Infinity,"expires":1,"from":"x"}',
    b"\xef\xbb\xbf" + command()], ids=repr)
def test_what_is_not_exactly_a_command_is_refused(payload: bytes) -> None:
    """Every other payload is refused in one sentence that repeats little of it."""
    orders = Orders()
    with pytest.raises(CommandRefused) as caught:
        take(orders, payload)
    assert len(str(caught.value)) < 300
    assert "\n" not in str(caught.value)
    assert (orders.accepted, orders.refused) == (0, 1)


def test_retained_foreign_and_unknown_commands_are_refused() -> None:
    """A retained one, one of another session, and any command but `lower` and `cut`."""
    with pytest.raises(CommandRefused, match="retained"):
        take(Orders(), command(), retained=True)
    with pytest.raises(CommandRefused, match="read the state topic"):
        take(Orders(), command(session="0123456789abcdef-2"))
    for name in ("arm", "set", "reset", "", "CUT"):
        with pytest.raises(CommandRefused, match="lower or cut"):
            take(Orders(), command(), name)


def test_a_flood_is_bounded_and_a_flood_of_lowers_delays_no_cut() -> None:
    """Beyond the rate commands are refused; each command has a rate of its own; memory of senders is bounded."""
    orders = Orders()
    taken = 0
    for n in range(1000):
        with contextlib.suppress(CommandRefused):
            take(orders, command(counter=n, **{"from": f"s{n}"}), "lower")
            taken += 1
    with pytest.raises(CommandRefused, match="a second"):
        take(orders, command(**{"from": "late"}), "lower")
    assert taken == BURST
    assert take(orders, command(counter=1, **{"from": "desk"}), "cut").command == "cut"
    for n in range(2000):
        take(orders, command(**{"from": f"t{n}"}), "lower", now_s=1.0 + n * 0.05)
    assert len(orders._counters) <= SENDERS_KEPT


@given(st.binary(max_size=600))
def test_any_bytes_are_refused_or_a_command(payload: bytes) -> None:
    """Whatever comes, it is four checked values or a refusal; nothing else comes out."""
    try:
        data = parse(payload)
    except CommandRefused:
        return
    jsonschema.validate(data, CUT.schema())


@given(st.recursive(st.none() | st.booleans() | st.floats() | st.integers() | st.text(max_size=20),
                    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(
                        st.sampled_from(["session", "counter", "expires", "from", "x"]), inner, max_size=5)))
def test_any_json_is_refused_or_fits_the_schema(value: Any) -> None:
    """The same for well-formed JSON of any shape, near misses included."""
    try:
        data = parse(json.dumps(value).encode())
    except CommandRefused:
        return
    jsonschema.validate({**data, "session": SESSION}, CUT.schema())


def test_the_schema_takes_what_the_parser_takes() -> None:
    """The printed schema and the parser agree on a good command."""
    good = json.loads(command(expires=time.time_ns()))
    jsonschema.validate(good, CUT.schema())
    assert parse(json.dumps(good).encode()) == good
    for name in good:
        less = {key: value for key, value in good.items() if key != name}
        refused_by_schema = not jsonschema.Draft202012Validator(CUT.schema()).is_valid(less)
        try:
            parse(json.dumps(less).encode())
        except CommandRefused:
            assert refused_by_schema, name
        else:
            assert not refused_by_schema, name
