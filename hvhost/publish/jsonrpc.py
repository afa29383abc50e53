"""JSON-RPC 2.0, one request a line, read strictly: what a socket may carry, and how it is answered.

Nothing is opened here and no clock is read.  Stricter than the standard where a laboratory needs it: no NaN or
infinity, no name twice in an object, no text with control or invisible characters (they would end up in records and
on screens), parameters by name only, one request a line.  Sizes and depth are bounded before anything is built.
"""

import json
import math
from dataclasses import dataclass
from typing import Any, NoReturn

from hvhost.words.errors import FileFault, HvhostError

LINE_LIMIT = 65_536  # bytes of one request: a run sheet with every field filled takes a twentieth
DEPTH_LIMIT = 8
BRACKETS_LIMIT = 512  # opening brackets in one line, counted before it is parsed
INTEGER_LIMIT = 2**63
ID_LIMIT = 64

PARSE_ERROR, INVALID_REQUEST, NO_METHOD, INVALID_PARAMS, INTERNAL = -32700, -32600, -32601, -32602, -32603
REFUSED, TOO_FAST, OVERTAKEN, STOPS_ONLY = -32000, -32001, -32002, -32003


class RpcFault(HvhostError):
    """A request that is not carried out: code, message, data for the answer, and the id where it could be read."""

    def __init__(self, code: int, message: str, data: dict[str, Any] | None = None,
                 request_id: int | str | None = None) -> None:
        super().__init__(message)
        self.code, self.message, self.data, self.request_id = code, message, data, request_id


@dataclass(frozen=True, slots=True, kw_only=True)
class Request:
    """One request; ``request_id`` is None for a notification, which is carried out and not answered."""

    method: str
    params: dict[str, Any]
    request_id: int | str | None


def parse_request(line: bytes) -> Request:
    """Return the request on one line (without its LF); raises RpcFault."""
    if len(line) > LINE_LIMIT:
        raise RpcFault(PARSE_ERROR, f"expected at most {LINE_LIMIT} bytes a line, found {len(line)}")
    if line.count(b"{") + line.count(b"[") > BRACKETS_LIMIT:
        raise RpcFault(PARSE_ERROR, f"expected at most {BRACKETS_LIMIT} opening brackets in a request")
    try:
        data = _DECODER.decode(line.decode("utf-8"))
    except (ValueError, RecursionError) as fault:
        raise RpcFault(PARSE_ERROR, f"expected strict JSON: {str(fault)[:120]}") from None
    if not isinstance(data, dict):
        raise RpcFault(INVALID_REQUEST, "expected one request object a line")
    request_id = _request_id(data)
    try:
        return _request(data, request_id)
    except RpcFault as fault:
        fault.request_id = request_id
        raise


def _request(data: dict[str, Any], request_id: int | str | None) -> Request:
    if data.get("jsonrpc") != "2.0":
        raise RpcFault(INVALID_REQUEST, "expected \"jsonrpc\": \"2.0\"")
    unknown = sorted(set(data) - {"jsonrpc", "id", "method", "params"})
    if unknown:
        raise RpcFault(INVALID_REQUEST, f"expected jsonrpc, id, method, params, found {unknown[0][:40]!r}")
    method, params = data.get("method"), data.get("params", {})
    if not isinstance(method, str) or not method.isprintable() or len(method) > ID_LIMIT:
        raise RpcFault(INVALID_REQUEST, "expected a method name")
    if not isinstance(params, dict):
        raise RpcFault(INVALID_PARAMS, "expected parameters by name")
    _check_depth(params, DEPTH_LIMIT)
    return Request(method=method, params=params, request_id=request_id)


def _request_id(data: dict[str, Any]) -> int | str | None:
    if "id" not in data:
        return None
    value = data["id"]
    if isinstance(value, bool) or not isinstance(value, int | str) or len(str(value)) > ID_LIMIT:
        raise RpcFault(INVALID_REQUEST, f"expected an id that is an integer or a text of at most {ID_LIMIT}")
    return value


def _check_depth(value: Any, left: int) -> None:
    """Refuse nesting below ``left`` floors and texts that hold more than printable characters."""
    if left < 0:
        raise RpcFault(INVALID_PARAMS, f"expected at most {DEPTH_LIMIT} floors of nesting")
    if isinstance(value, str) and not value.isprintable():
        raise RpcFault(INVALID_PARAMS, "expected printable text", {"found": ascii(value)[:80]})
    if isinstance(value, dict):
        for name, item in value.items():
            _check_depth(name, left)
            _check_depth(item, left - 1)
    elif isinstance(value, list):
        for item in value:
            _check_depth(item, left - 1)


def result_line(request_id: int | str | None, result: Any) -> bytes:
    """Return the answer with its LF; raises ValueError or TypeError where the result is not plain and finite."""
    return _line({"jsonrpc": "2.0", "id": request_id, "result": result})


def error_line(fault: RpcFault) -> bytes:
    """Return the error answer with its LF."""
    error: dict[str, Any] = {"code": fault.code, "message": fault.message}
    if fault.data is not None:
        error["data"] = fault.data
    return _line({"jsonrpc": "2.0", "id": fault.request_id, "error": error})


def fault_of(error: HvhostError) -> RpcFault:
    """Return the answer to an error of ours: its four parts, its exit code and, where it has them, its findings."""
    data: dict[str, Any] = {
        "kind": type(error).__name__, "expected": error.expected, "found": error.found, "where": error.where,
        "remedy": error.remedy, "exit_code": error.exit_code,
    }
    if isinstance(error, FileFault):
        data["findings"] = [str(getattr(finding, "text", finding)) for finding in error.findings]
    return RpcFault(REFUSED, str(error), data)


def _line(data: dict[str, Any]) -> bytes:
    return json.dumps(data, allow_nan=False, separators=(",", ":")).encode("ascii") + b"\n"


def _no_constant(text: str) -> NoReturn:
    raise ValueError(f"{text} is no number of JSON")


def _finite(text: str) -> float:
    value = float(text)
    if not math.isfinite(value):
        raise ValueError(f"{text[:20]} is beyond a double")
    return value


def _bounded_integer(text: str) -> int:
    if len(text) > 20 or not -INTEGER_LIMIT <= (value := int(text)) < INTEGER_LIMIT:
        raise ValueError("an integer is beyond 64 bits")
    return value


def _no_duplicates(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
    built = dict(pairs)
    if len(built) != len(pairs):
        seen: set[str] = set()
        twice = next(name for name, _ in pairs if name in seen or seen.add(name))  # type: ignore[func-returns-value]
        raise ValueError(f"name {twice[:40]!r} stands twice in one object")
    return built


_DECODER = json.JSONDecoder(parse_constant=_no_constant, parse_float=_finite, parse_int=_bounded_integer,
                            object_pairs_hook=_no_duplicates)
