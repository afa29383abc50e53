"""Writes the small vectors of firmware_protocol/vectors (``python -m tests.wire.write_vectors``).

What a vector expects is made by slow twins (CRC bit by bit, interpolation by carried remainder) or written by hand
from the clauses; the codec under test makes none of it.
"""

import json
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from hvhost.wire.settings import KEYS, SETTINGS

FOLDER = Path(__file__).parents[2] / "firmware_protocol" / "vectors"


def bitwise_crc32(data: bytes) -> int:
    """CRC-32/ISO-HDLC worked bit by bit from its polynomial (0xEDB88320 is 0x04C11DB7 reflected)."""
    register = 0xFFFFFFFF
    for byte in data:
        register ^= byte
        for _ in range(8):
            register = (register >> 1) ^ (0xEDB88320 if register & 1 else 0)
    return register ^ 0xFFFFFFFF


def line(body: str) -> str:
    """Return the whole line of a body by the twin's CRC."""
    data = body.encode("latin-1")
    return f"{body}*{len(data):03X}{bitwise_crc32(data):08X}\n"


def incremental(start: int, target: int, ticks: int) -> Iterator[int]:
    """Add whole codes tick by tick and carry the remainder."""
    change, sign = abs(target - start), 1 if target >= start else -1
    whole, part = divmod(change, ticks)
    word, carried = start, 0
    yield word
    for _ in range(ticks):
        word, carried = word + sign * whole, carried + part
        if carried >= ticks:
            word, carried = word + sign, carried - ticks
        yield word


def _crc() -> dict[str, Any]:
    texts = ["123456789", "cut 1 0", "a", "ok 7 seg 1 1", "~" * 499]
    return {"title": "CRC-32 of a body", "source": "123456789 gives CBF43926: catalogue of parametrised CRC "
            "algorithms, CRC-32/ISO-HDLC, check; the others by bitwise division",
            "cases": [{"text": text, "crc": f"{bitwise_crc32(text.encode()):08X}"} for text in texts]}


def _lines() -> dict[str, Any]:
    cut, seg = line("cut 1 0"), line("seg 7 C0FFEE01 30000 6000 1000")
    wrong_crc = cut[:-2] + ("0" if cut[-2] != "0" else "1") + "\n"
    cases: list[tuple[str, str, list[str], int]] = [
        ("one line", cut, ["cut 1 0"], 0),
        ("two lines", cut + seg, ["cut 1 0", "seg 7 C0FFEE01 30000 6000 1000"], 0),
        ("an empty line is nothing", "\n\n" + cut, ["cut 1 0"], 0),
        ("a torn line in front of a stop that begins with LF", seg[:20] + "\n" + cut, ["cut 1 0"], 1),
        ("a torn line swallows what does not begin with LF", seg[:20] + cut, [], 1),
        ("a line without its LF is not yet one", cut[:-1], [], 0),
        ("wrong CRC", wrong_crc + cut, ["cut 1 0"], 1),
        ("lower-case hexadecimal", line("cut 2 0").lower().replace("CUT", "cut"), [], 1),
        ("length one too high", "cut 1 0*008" + cut[11:], [], 1),
        ("length one too low", "cut 1 0*006" + cut[11:], [], 1),
        ("one byte lost", cut[1:] + cut, ["cut 1 0"], 1),
        ("one byte doubled", "c" + cut + cut, ["cut 1 0"], 1),
        ("one bit flipped in the body", "cut 1 1" + cut[7:], [], 1),
        ("CR in front of LF", cut[:-1] + "\r\n" + cut, ["cut 1 0"], 1),
        ("a tab in the body", line("cut\t1 0"), [], 1),
        ("a byte above ASCII in the body", line("cut 1 \xb5"), [], 1),
        ("an asterisk in the body", line("x*y") + line("***"), ["x*y", "***"], 0),
        ("no body", "*00000000000\n" + cut, ["cut 1 0"], 1),
        ("the longest body", line("y" * 499), ["y" * 499], 0),
        ("one byte too long", line("y" * 500) + cut, ["cut 1 0"], 1),
        ("far too long counts once", "z" * 3000 + "\n" + cut, ["cut 1 0"], 1),
        ("only noise", "\x00\xff\x1b[2J\n" + "AT\n", [], 2),
    ]
    return {"title": "lines and what is read from them", "source": "",
            "cases": [{"name": n, "bytes": b, "bodies": o, "dropped": d} for n, b, o, d in cases]}


def _interpolation() -> dict[str, Any]:
    cases = []
    for start, target, ticks in ((0, 65535, 10_000), (65535, 0, 10_000), (0, 10, 7), (10, 0, 7), (5, 5, 3), (0, 1, 1),
                                 (100, 50_100, 333), (40_000, 39_990, 5_000), (0, 65535, 65536), (1, 0, 4)):
        words = list(incremental(start, target, ticks))
        step = max(1, ticks // 12)
        ks = sorted({*range(0, ticks + 1, step), 1, ticks - 1, ticks} & set(range(ticks + 1)))
        cases.append({"start": start, "target": target, "ticks": ticks, "words": [[k, words[k]] for k in ks]})
    ticks = 360_000_000  # ten codes in ten hours at 10 kHz: a step at each tenth
    for start, target, sign in ((100, 110, 1), (110, 100, -1)):
        words_at = [pair for n in range(1, 11) for pair in ([ticks // 10 * n - 1, start + sign * (n - 1)],
                                                            [ticks // 10 * n, start + sign * n])]
        cases.append({"start": start, "target": target, "ticks": ticks, "words": [[0, start], *words_at]})
    return {"title": "set-point words of a segment", "source": "by adding whole codes and carrying the remainder",
            "cases": cases}


def _requests() -> dict[str, Any]:
    s = 0xC0FFEE01
    good: list[tuple[str, dict[str, Any]]] = [
        ("hello 3237998081 C0FFEE01 1 500", {"verb": "hello", "n": 3237998081, "session": s, "version": 1,
                                             "lease_ms": 500}),
        ("info 1 C0FFEE01 0", {"verb": "info", "n": 1, "session": s, "page": 0}),
        ("get 2 C0FFEE01 4", {"verb": "get", "n": 2, "session": s, "page": 4}),
        ("put 3 C0FFEE01 vzero -12", {"verb": "put", "n": 3, "session": s, "key": "vzero", "value": -12}),
        ("save 4 C0FFEE01 0000002A", {"verb": "save", "n": 4, "session": s, "checksum": 42}),
        ("arm 5 C0FFEE01 1 0000ABCD 0000002A 17", {"verb": "arm", "n": 5, "session": s, "arm": 1, "tag": 0xABCD,
                                                   "settings": 42, "event": 17, "pause": None, "tighter": {}}),
        ("arm 5 C0FFEE01 1 0000ABCD 0000002A 17 oc=9000 later=x pause=3,1000,60000",
         {"verb": "arm", "n": 5, "session": s, "arm": 1, "tag": 0xABCD, "settings": 42, "event": 17,
          "pause": [3, 1000, 60000], "tighter": {"oc": 9000}}),
        ("seg 6 C0FFEE01 65535 0 4294967295", {"verb": "seg", "n": 6, "session": s, "v": 65535, "i": 0,
                                               "ticks": 4294967295, "arc": None}),
        ("seg 6 C0FFEE01 1 2 3 arc=4", {"verb": "seg", "n": 6, "session": s, "v": 1, "i": 2, "ticks": 3, "arc": 4}),
        ("renew C0FFEE01 4294967295", {"verb": "renew", "session": s, "index": 4294967295}),
        ("lower 1 C0FFEE01", {"verb": "lower", "n": 1, "session": s}),
        ("arc 2 C0FFEE01 123", {"verb": "arc", "n": 2, "session": s, "index": 123}),
        ("cut 3 0", {"verb": "cut", "n": 3, "rule": 0}),
        ("cut 3 16 why=later", {"verb": "cut", "n": 3, "rule": 16}),
        ("reset 7 C0FFEE01 00100004 1", {"verb": "reset", "n": 7, "session": s, "causes": 0x100004, "grounded": 1}),
        ("again 8 C0FFEE01 3", {"verb": "again", "n": 8, "session": s, "event": 3}),
        ("snap 9 C0FFEE01 40", {"verb": "snap", "n": 9, "session": s, "offset": 40}),
        ("stored 10 C0FFEE01 2", {"verb": "stored", "n": 10, "session": s, "snapshot": 2}),
    ]
    bad = ["fly 1 C0FFEE01", "cut", "cut 1", "cut 1 0 0", "cut 01 0", "cut +1 0", "cut -1 0", "cut 1 -0", "cut  1 0",
           "cut 1 0 ", " cut 1 0", "cut 1 4294967296", "cut 1 0x1", "CUT 1 0", "lower 1 c0ffee01", "lower 1 C0FFEE1",
           "seg 1 C0FFEE01 65536 0 1", "seg 1 C0FFEE01 1 0 1 arc=1 arc=2", "seg 1 C0FFEE01 arc=1 1 0 1",
           "seg 1 C0FFEE01 1 0 1 arc=", "reset 1 C0FFEE01 00000001 2", "arm 1 C0FFEE01 1 1 00000002 3",
           "arm 1 C0FFEE01 1 00000001 00000002 3 pause=1,2", "put 1 C0FFEE01 VMAX 3", "seg 1 C0FFEE01 1.5 0 1"]
    return {"title": "request bodies", "source": "",
            "cases": [{"body": b, "request": r} for b, r in good] + [{"body": b, "refused": True} for b in bad]}


def _received() -> dict[str, Any]:
    good: list[tuple[str, str, dict[str, Any]]] = [
        ("uu", "b 123 1230 500 600 4 0 7F 0 9 1 1 Zm9vYg==",
         {"index": 123, "tick": 1230, "v_word": 500, "i_word": 600, "state": 4, "latched": 0, "inputs": 0x7F,
          "missed": 0, "event": 9, "arc": 1, "codes": [0x6F66, 0x626F]}),
        ("ss", "b 4294967295 4294967295 0 0 0 1 0 4294967295 0 0 2 AID/f///AAA= later=1",
         {"index": 4294967295, "tick": 4294967295, "v_word": 0, "i_word": 0, "state": 0, "latched": 1, "inputs": 0,
          "missed": 4294967295, "event": 0, "arc": 0, "codes": [-32768, 32767, -1, 0]}),
        ("su", "b 0 0 0 0 0 0 0 0 0 0 1 /////w==", {
            "index": 0, "tick": 0, "v_word": 0, "i_word": 0, "state": 0, "latched": 0, "inputs": 0, "missed": 0,
            "event": 0, "arc": 0, "codes": [-1, 65535]}),
        ("uu", "ok 7 seg 1 3", {"n": 7, "verb": "seg", "words": ["1", "3"], "pairs": {}}),
        ("uu", "ok 7 cut", {"n": 7, "verb": "cut", "words": [], "pairs": {}}),
        ("uu", "ok 7 info 0 fw=a-1 proto=1", {"n": 7, "verb": "info", "words": ["0"],
                                              "pairs": {"fw": "a-1", "proto": "1"}}),
        ("uu", "ok 7 snap 1 arc 0000002A 0 1 0 55 0 1 Zm9vYg==", {
            "n": 7, "verb": "snap", "words": ["1", "arc", "0000002A", "0", "1", "0", "55", "0", "1", "Zm9vYg=="],
            "pairs": {}}),
        ("uu", "err 7 seg latched", {"n": 7, "verb": "seg", "code": "latched"}),
        ("uu", "ev 9 4294967295 cut 1 -1", {"number": 9, "tick": 4294967295, "kind": "cut", "a": 1, "b": -1}),
    ]
    bad = ["ok", "ok 1", "err 1 seg", "ev 1 2 cut 3", "ev 1 2 cut 3 2147483648", "b 1 2 3",
           "b 123 1230 500 600 7 0 7F 0 9 1 1 Zm9vYg==", "b 123 1230 500 600 4 0 7f 0 9 1 1 Zm9vYg==",
           "b 123 1230 65536 600 4 0 7F 0 9 1 1 Zm9vYg==", "b 123 1230 500 600 4 0 7F 0 9 1 2 Zm9vYg==",
           "b 123 1230 500 600 4 0 7F 0 9 1 0 ", "b 123 1230 500 600 4 0 7F 0 9 1 1 Zm9vYg=", "hm 1 2 3"]
    return {"title": "bodies from the MCU", "source": "base64 of 'foob' is Zm9vYg==: RFC 4648 section 10",
            "cases": [{"signs": s, "body": b, "frame": f} for s, b, f in good]
            + [{"signs": "uu", "body": b, "refused": True} for b in bad]}


def _settings() -> dict[str, Any]:
    low = {s.key: max(s.low, 1) if s.key in ("polarity", "vzero", "izero", "vmap", "imap") else s.low for s in SETTINGS}
    high = {s.key: s.high for s in SETTINGS}
    cases = []
    for values in (low, high):
        text = "".join(f"{key}={values[key]}\n" for key in KEYS)
        cases.append({"values": values, "checksum": f"{bitwise_crc32(text.encode()):08X}"})
    return {"title": "checksum of the settings", "source": "", "cases": cases}


def files() -> dict[str, str]:
    """Return each file's text by its name."""
    from tests.wire.scenarios import scenario_files

    made = {"crc.json": _crc(), "lines.json": _lines(), "interpolation.json": _interpolation(),
            "requests.json": _requests(), "received.json": _received(), "settings.json": _settings()} | scenario_files()
    return {name: json.dumps(data, indent=1, ensure_ascii=True) + "\n" for name, data in made.items()}


if __name__ == "__main__":
    FOLDER.mkdir(exist_ok=True)
    for name, text in files().items():
        (FOLDER / name).write_text(text, encoding="utf-8")
