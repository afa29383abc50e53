"""The bench file's section ``instrument``: where the instrument socket listens and whom it serves.

The socket is off where the section is missing.  SCPI-99 knows no password and no encryption, so it listens on this
machine only unless the file also names the addresses that may connect; everybody else is turned away unheard.
"""

import ipaddress
import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING, Annotated, Any

from pydantic import BeforeValidator, WithJsonSchema

from hvhost.bench.saying import NOTE, REFUSE, Say
from hvhost.words.fields import Block, fault
from hvhost.words.findings import Finding

if TYPE_CHECKING:
    from hvhost.bench.document import BenchFile

Network = ipaddress.IPv4Network | ipaddress.IPv6Network
Address = ipaddress.IPv4Address | ipaddress.IPv6Address

LISTEN = "127.0.0.1:5025"  # 5025/tcp is registered with IANA for SCPI over TCP
ALLOW_MAX = 32
WIDEST = {4: 16, 6: 48}  # prefix lengths: one site; a wider network is no list of who may connect
_PLACE = re.compile(r"(?:([0-9.]{7,15})|\[([0-9A-Fa-f:.]{2,45})\]):([1-9][0-9]{0,4})", re.ASCII)
_EXPECTED = "an address of this machine and a port such as '127.0.0.1:5025' or '[::1]:5025'"


@dataclass(frozen=True, slots=True, kw_only=True)
class Instrument:
    """Where the instrument socket listens; ``allow`` empty: whoever can reach it on this machine."""

    host: str
    port: int
    allow: tuple[Network, ...] = ()

    def admits(self, peer: str) -> bool:
        """Whether an address may connect; a text that is no address may not."""
        if not self.allow:
            return True
        try:
            address: Address = ipaddress.ip_address(peer.partition("%")[0])
        except ValueError:
            return False
        if isinstance(address, ipaddress.IPv6Address) and address.ipv4_mapped is not None:
            address = address.ipv4_mapped
        return address.is_loopback or any(address in network for network in self.allow)


def _listen(value: Any) -> str:
    match = _PLACE.fullmatch(value) if isinstance(value, str) else None
    if match is None:
        raise fault(_EXPECTED)
    try:
        ipaddress.ip_address(match[1] or match[2])
    except ValueError:
        raise fault(_EXPECTED) from None
    if int(match[3]) > 65_535:
        raise fault("a port from 1 to 65535", match[3])
    return str(value)


def _network(value: Any) -> str:
    expected = "an address or network such as '192.0.2.10' or '192.0.2.0/24'"
    if not isinstance(value, str) or len(value) > 50 or "%" in value:
        raise fault(expected)
    try:
        network = ipaddress.ip_network(value)
    except ValueError:
        raise fault(expected) from None
    if network.prefixlen < WIDEST[network.version]:
        raise fault(f"a network no wider than /{WIDEST[network.version]}", f"'{value}'")
    return value


class InstrumentBlock(Block):
    """The instrument socket (SCPI over TCP): where it listens; beyond this machine, who may connect."""

    listen: Annotated[str, BeforeValidator(_listen),
                      WithJsonSchema({"type": "string", "pattern": rf"^{_PLACE.pattern}$"})] = LISTEN
    allow: tuple[Annotated[str, BeforeValidator(_network), WithJsonSchema({"type": "string", "maxLength": 50})],
                 ...] = ()


def place_of(listen: str) -> tuple[str, int]:
    """Host and port of a checked ``listen``."""
    match = _PLACE.fullmatch(listen)
    assert match is not None
    return match[1] or match[2], int(match[3])


def instrument_of(block: InstrumentBlock | None) -> Instrument | None:
    """The frozen section, None where the file has none."""
    if block is None:
        return None
    host, port = place_of(block.listen)
    return Instrument(host=host, port=port, allow=tuple(ipaddress.ip_network(item) for item in block.allow))


def check_instrument(b: "BenchFile", say: Say) -> Iterator[Finding]:
    """Beyond loopback the file must say who may connect; and whoever reads it must know that nothing is encrypted."""
    block = b.instrument
    if block is None:
        return
    if len(block.allow) > ALLOW_MAX:
        yield say(REFUSE, "instrument.allow", f"at most {ALLOW_MAX} addresses", f"{len(block.allow)}")
    host = place_of(block.listen)[0]
    if ipaddress.ip_address(host).is_loopback:
        return
    if not block.allow:
        yield say(REFUSE, "instrument.listen", "an address of this machine alone, or the key 'allow' beside it",
                  f"'{block.listen}'", "the instrument socket has no password: list in 'allow' who may connect")
    else:
        yield say(NOTE, "instrument.listen", "", f"'{block.listen}', open to {', '.join(block.allow)[:120]}",
                  "nothing on it is encrypted and addresses can be forged: prefer 127.0.0.1 and a tunnel")
