"""Runs a scenario of the vectors against the stand-in's MCU on a scripted bench (PROTOCOL.md section 17).

The runner knows the line by its twin in `write_vectors` and the file's own rules; it uses nothing of the codec but
what the MCU itself uses, so a port of it to another language needs this file and the JSON only.
"""

import base64
import struct
from typing import Any

from hvhost.standin.board import McuConfig
from hvhost.standin.eeprom import Eeprom
from hvhost.standin.mcu import Mcu
from hvhost.wire.settings import Settings
from hvhost.wire.vocabulary import ResetCause
from tests.wire.write_vectors import bitwise_crc32, line

LOOK_TICKS = 50  # the host looks at the line this often
INPUT_BITS = ("interlock", "emergency", "ground_open", "danger", "auxiliary", "arm_input", "inhibit_back",
              "relay_back", "polarity")
HEAD = ("index", "tick", "v_word", "i_word", "state", "latched", "inputs", "missed", "event", "arc", "pairs")


class ScriptBench:
    """The scripted bench: voltage by a rule in integers, contacts by hand, read-backs by the outputs."""

    def __init__(self, settings: dict[str, int] | None, bench: dict[str, Any], config: McuConfig) -> None:
        values = settings or {"vmap": 65536, "vzero": 0, "imap": 65536, "izero": 0}
        self.vmap, self.vzero, self.imap, self.izero = (values[k] for k in ("vmap", "vzero", "imap", "izero"))
        self.fall = int(bench.get("fall", 20))
        self.per_code = config.v_volts_per_code
        self.power = True
        self.contacts: dict[str, bool | None] = dict.fromkeys(INPUT_BITS, True)
        self.contacts |= {"danger": None, "inhibit_back": None, "relay_back": None, "arm_input": False}
        self.codes: dict[str, int | None] = {"v": None, "i": None}
        self.v = 0
        self.word = 0
        self.inhibit, self.clear, self.relay = True, True, False

    def advance(self, dt_s: float, v_cmd: float, i_cmd: float) -> None:
        """Note the word that stands at the programming input."""
        self.word = round(v_cmd / self.per_code)

    def drive(self, *, inhibit: bool, clear: bool, relay: bool) -> None:
        """Note the outputs."""
        self.inhibit, self.clear, self.relay = inhibit, clear, relay

    def inputs(self) -> int:
        """Return the contacts, read-backs and danger signal as they stand."""
        auto = {"danger": self.relay and self.power, "inhibit_back": self.inhibit, "relay_back": self.relay}
        mask = 0
        for bit, name in enumerate(INPUT_BITS):
            forced = self.contacts[name]
            mask |= (auto[name] if forced is None else forced) << bit
        return mask

    def sample(self) -> tuple[int, int]:
        """Move the voltage by one sample and return the raw codes."""
        on = self.relay and self.power and not self.inhibit and not self.clear
        target = abs(self.vmap) * self.word >> 16 if on else 0
        self.v = target if target >= self.v else max(target, self.v - -(-self.v // self.fall))
        v_raw, i_raw = self.codes["v"], self.codes["i"]
        if v_raw is not None:
            self.v = (v_raw - self.vzero) * (1 if self.vmap > 0 else -1)
        else:
            v_raw = self.v * (1 if self.vmap > 0 else -1) + self.vzero
        return v_raw, self.izero if i_raw is None else i_raw


def fits(pattern: str, body: str) -> bool:
    """Whether a body fits a pattern (section 17)."""
    wanted, found = pattern.split(" "), body.split(" ")
    options = [part for part in wanted if _option(part)]
    fields = [part for part in wanted if not _option(part)]
    positional = [part for part in found if not _option(part)]
    if any(option not in found for option in options):
        return False
    if fields and fields[-1] == "...":
        fields.pop()
        positional = positional[: len(fields)]
    return len(fields) == len(positional) and all(f in ("*", p) for f, p in zip(fields, positional, strict=True))


def _option(part: str) -> bool:
    key, equals, value = part.partition("=")
    return bool(equals and value) and not value.startswith("=") and key.isalnum() and key.islower()


class Runner:
    """One MCU, one scripted bench, one host that sends what the scenario says."""

    def __init__(self, case: dict[str, Any]) -> None:
        self.case = case
        self.settings: dict[str, int] | None = case["settings"]
        keys = {"tick": "tick_hz", "sample": "sample_ticks", "block": "block_pairs", "queue": "queue",
                "before": "before", "after": "after", "signs": "signs", "first_tick": "first_tick",
                "first_index": "first_index"}
        self.config = McuConfig(**{keys[key]: value for key, value in case["config"].items()})
        self.bench = ScriptBench(self.settings, case["bench"], self.config)
        whole = None if self.settings is None else Settings.of(self.settings)
        self.checksum = 0 if whole is None else whole.checksum
        self.mcu = Mcu(self.bench, Eeprom(whole), self.config)
        self.rest = b""
        self.lines: list[str] = []
        self.block: dict[str, int] = {}
        self.codes: list[int] = []
        self.n, self.arms, self.event = 1, 0, 0
        self.lease_ticks, self.session = 0, "00000000"
        self.renewing, self.renewed = False, -(1 << 40)
        self.now = 0

    def run(self) -> None:
        """Carry out every step; an assertion names the step that fails."""
        for number, step in enumerate(self.case["steps"]):
            self.advance(step["t"])
            for key, value in step.items():
                if key == "t":
                    continue
                try:
                    getattr(self, f"do_{key}")(value)
                except AssertionError as failed:
                    where = f"{self.case['name']}: step {number} at {step['t']}: {key}"
                    raise AssertionError(f"{where}: {failed}") from None
            self.look()

    def advance(self, tick: int) -> None:
        """Let time pass, looking at the line every `LOOK_TICKS`."""
        while self.now < tick:
            self.now = min(tick, self.now + LOOK_TICKS)
            self.mcu.advance_to(self.now)
            self.look()

    def look(self) -> None:
        """Read what the MCU sent; renew after a block where the scenario says so."""
        self.rest += self.mcu.take_output()
        *whole, self.rest = self.rest.split(b"\n")
        for data in whole:
            body, trailer = data[:-12], data[-12:].decode()
            assert trailer == f"*{len(body):03X}{bitwise_crc32(body):08X}", data
            self._take(body.decode("ascii"))

    def _take(self, body: str) -> None:
        fields = body.split(" ")
        if fields[0] == "b":
            self.block = {name: int(text, 16 if name == "inputs" else 10)
                          for name, text in zip(HEAD, fields[1:12], strict=True)}
            kinds = {"s": "h", "u": "H"}
            pair = kinds[self.config.signs[0]] + kinds[self.config.signs[1]]
            self.codes = list(struct.unpack("<" + pair * self.block["pairs"], base64.b64decode(fields[12])))
            self._renew()
            return
        self.lines.append(body)
        if fields[0] == "ev":
            self.event = int(fields[1])
        elif fields[0] == "ok" and fields[2] == "arm":
            self.arms = int(fields[3])
        elif fields[0] == "ok" and fields[2] == "hello":
            self.n = 1

    def _renew(self) -> None:
        if self.renewing and self.now - self.renewed >= self.lease_ticks // 8:
            self.renewed = self.now
            self.mcu.feed(line(f"renew {self.session} {self.last_index}").encode(), self.now)

    @property
    def last_index(self) -> int:
        """The index of the last pair received."""
        return (self.block["index"] + self.block["pairs"] - 1) % (1 << 32)

    # ---------------------------------------------------------------- steps

    def do_send(self, body: str) -> None:
        """Send a line; placeholders are filled in."""
        filled = body.replace("{event}", str(self.event)).replace("{arm}", str(self.arms + 1))
        filled = filled.replace("{settings}", f"{self.checksum:08X}")
        if "{index}" in filled:
            filled = filled.replace("{index}", str(self.last_index))
        if "{n}" in filled:
            filled = filled.replace("{n}", str(self.n))
            self.n += 1
        if filled.startswith("hello "):
            _, _, self.session, _, lease_ms = filled.split(" ")
            self.lease_ticks = int(lease_ms) * self.config.tick_hz // 1000
        self.mcu.feed(line(filled).encode("latin-1"), self.now)
        self.look()

    def do_raw(self, text: str) -> None:
        """Send bytes."""
        self.mcu.feed(text.encode("latin-1"), self.now)

    def do_renew(self, on: bool) -> None:
        """Renew from now on, or no longer."""
        self.renewing = on

    def do_contacts(self, changes: dict[str, bool | None]) -> None:
        """Change contacts."""
        assert set(changes) <= set(INPUT_BITS), changes
        self.bench.contacts |= changes

    def do_codes(self, changes: dict[str, int | None]) -> None:
        """Force or free the raw codes."""
        self.bench.codes |= changes

    def do_power(self, on: bool) -> None:
        """Take away the supply's power, or give it back."""
        self.bench.power = on

    def do_reset(self, cause: int) -> None:
        """Reset the MCU."""
        self.mcu.reset(ResetCause(cause))
        self.arms = 0

    def _used_up(self) -> list[str]:
        self.look()
        lines, self.lines = self.lines, []
        return lines

    def do_has(self, patterns: list[str]) -> None:
        """These stand among the lines since the last look of this kind, events and answers each in this order."""
        lines = self._used_up()
        for events in (True, False):
            left = iter([body for body in lines if body.startswith("ev ") is events])
            for pattern in (p for p in patterns if p.startswith("ev ") is events):
                assert any(fits(pattern, body) for body in left), f"no {pattern!r} in order in {lines}"

    def do_lines(self, patterns: list[str]) -> None:
        """These and no others, events and answers each in this order; events `inputs` are passed over."""
        lines = [body for body in self._used_up() if not fits("ev * * inputs * *", body)]
        for events in (True, False):
            found = [body for body in lines if body.startswith("ev ") is events]
            wanted = [p for p in patterns if p.startswith("ev ") is events]
            same = len(wanted) == len(found) and all(fits(p, b) for p, b in zip(wanted, found, strict=True))
            assert same, f"{lines}"

    def do_none(self, patterns: list[str]) -> None:
        """None of these."""
        self.look()
        for pattern in patterns:
            assert not any(fits(pattern, body) for body in self.lines), f"{pattern!r} in {self.lines}"

    def do_at(self, wanted: dict[str, Any]) -> None:
        """What the MCU does now."""
        bench, mcu = self.bench, self.mcu
        found = {"state": int(mcu.state), "latched": bool(mcu.latched), "v": mcu.v_word, "i": mcu.i_word,
                 "inhibit": bench.inhibit, "clear": bench.clear, "relay": bench.relay}
        assert {key: found[key] for key in wanted} == wanted, f"{found}"

    def do_block(self, wanted: dict[str, int]) -> None:
        """What the last block said."""
        assert {key: self.block[key] for key in wanted} == wanted, f"{self.block}"
