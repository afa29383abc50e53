"""Strict JSON-RPC 2.0, a request a line."""

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from hvhost.publish import jsonrpc
from hvhost.publish.jsonrpc import RpcFault, parse_request
from hvhost.words.errors import CommandRefused, FileFault
from hvhost.words.findings import Finding, Grade


def line(**parts: object) -> bytes:
    """Return a request line with these members beside the version."""
    return json.dumps({"jsonrpc": "2.0", **parts}).encode()


def test_a_good_request_is_read() -> None:
    """Method, parameters by name and id come out as sent."""
    request = parse_request(line(id=3, method="set", params={"volts": "5 kV"}))
    assert (request.method, request.params, request.request_id) == ("set", {"volts": "5 kV"}, 3)


def test_a_notification_has_no_id() -> None:
    """JSON-RPC 2.0, section 4.1: a request without an id is not answered."""
    assert parse_request(line(method="cut")).request_id is None


# Codes from the JSON-RPC 2.0 specification, section 5.1.
@pytest.mark.parametrize(("text", "code"), [
    (b"{", -32700), (b"\xff\xfe", -32700), (b'{"jsonrpc":"2.0","method":"a","params":{"v":NaN}}', -32700),
    (b'{"jsonrpc":"2.0","method":"a","params":{"v":Infinity}}', -32700),
    (b'{"jsonrpc":"2.0","method":"a","params":{"v":1e999}}', -32700),
    (b'{"jsonrpc":"2.0","method":"a","params":{"v":99999999999999999999}}', -32700),
    (b'{"jsonrpc":"2.0","method":"a","method":"b"}', -32700),
    (b'{"jsonrpc":"2.0","method":"a","params":{"v":1,"v":2}}', -32700),
    (b"[" * 600, -32700), (b"[" * 500, -32700), (b'"' + b"a" * 70_000 + b'"', -32700),
    (b"7", -32600), (b"[]", -32600), (b'[{"jsonrpc":"2.0","method":"cut"}]', -32600), (b"{}", -32600),
    (b'{"jsonrpc":"1.0","method":"a"}', -32600), (b'{"jsonrpc":"2.0"}', -32600),
    (b'{"jsonrpc":"2.0","method":7}', -32600), (b'{"jsonrpc":"2.0","method":"a","id":1.5}', -32600),
    (b'{"jsonrpc":"2.0","method":"a","id":true}', -32600), (b'{"jsonrpc":"2.0","method":"a","id":null}', -32600),
    (b'{"jsonrpc":"2.0","method":"a","extra":1}', -32600), (b'{"jsonrpc":"2.0","method":"a\\n"}', -32600),
    (b'{"jsonrpc":"2.0","method":"a","params":[1]}', -32602), (b'{"jsonrpc":"2.0","method":"a","params":"x"}', -32602),
    (b'{"jsonrpc":"2.0","method":"a","params":{"t":"two\\nlines"}}', -32602),
    (b'{"jsonrpc":"2.0","method":"a","params":{"t":"\\ud800"}}', -32602),
    (b'{"jsonrpc":"2.0","method":"a","params":{"t\\u202e":1}}', -32602),
    (b'{"jsonrpc":"2.0","method":"a","params":{"a":[[[[[[[[[1]]]]]]]]]}}', -32602),
])
def test_faulty_requests_are_refused_by_code(text: bytes, code: int) -> None:
    """Everything outside the strict subset is refused with the code of its kind."""
    with pytest.raises(RpcFault) as caught:
        parse_request(text)
    assert caught.value.code == code


def test_a_refusal_carries_the_id_where_there_was_one() -> None:
    """The asker learns which of its requests was refused."""
    with pytest.raises(RpcFault) as caught:
        parse_request(line(id="x1", method="a", params=[1]))
    assert caught.value.request_id == "x1"


@given(st.binary(max_size=200))
def test_any_bytes_are_a_request_or_a_refusal(data: bytes) -> None:
    """No bytes raise anything but a refusal."""
    codes = []
    try:
        parse_request(data)
    except RpcFault as fault:
        codes.append(fault.code)
    assert set(codes) <= {-32700, -32600, -32602}


@given(st.dictionaries(st.text("abc", min_size=1), st.integers(-9, 9) | st.text("xyz é") | st.booleans() | st.none()))
def test_what_is_written_can_be_read(params: dict[str, object]) -> None:
    """Plain printable parameters come through unchanged."""
    assert parse_request(line(id=1, method="m", params=params)).params == params


def test_answers_are_single_ascii_lines() -> None:
    """An answer never holds a line feed inside, whatever its text."""
    answer = jsonrpc.result_line(4, {"text": "two\nlines, Ω"})
    assert answer.count(b"\n") == 1
    assert answer.endswith(b"\n")
    assert json.loads(answer) == {"jsonrpc": "2.0", "id": 4, "result": {"text": "two\nlines, Ω"}}
    with pytest.raises(ValueError, match="Out of range"):
        jsonrpc.result_line(4, float("nan"))


def test_an_error_of_ours_keeps_its_four_parts() -> None:
    """Expected, found, where and remedy reach the asker, with the exit code."""
    fault = jsonrpc.fault_of(CommandRefused("interlock closed", "open", "bench", "close it"))
    error = json.loads(jsonrpc.error_line(fault))["error"]
    assert error["code"] == jsonrpc.REFUSED
    assert error["data"] == {"kind": "CommandRefused", "expected": "interlock closed", "found": "open",
                             "where": "bench", "remedy": "close it", "exit_code": 5}


def test_findings_travel_as_lines() -> None:
    """A refused file answers with every finding."""
    finding = Finding(grade=Grade.REFUSE, file="p.yaml", line=4, what="hold", expected="a duration", found="'x'")
    fault = jsonrpc.fault_of(FileFault("a plan", findings=(finding,)))
    assert fault.data is not None
    assert fault.data["findings"] == [finding.text]
