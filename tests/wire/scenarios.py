"""The scenarios of the vectors, written by hand from the clauses; `write_vectors` makes the JSON files of them."""

from typing import Any

from hvhost.wire.settings import KEYS

SESSION = "C0FFEE01"
FITTED = 0x1 | 0x2 | 0x4 | 0x8 | 0x10 | 0x20 | 0x40 | 0x80 | 0x200 | 0x400 | 0x1000 | 0x2000 | 0x4000
SETTINGS: dict[str, int] = {
    "vmax": 60000,
    "imax": 60000,
    "vslew": 60000,
    "islew": 600000,
    "vfull": 25000,
    "ifull": 4000,
    "polarity": 1,
    "vmap": 32768,
    "vzero": 0,
    "imap": 32768,
    "izero": 0,
    "downslew": 60000,
    "lowermax": 2000,
    "warn": 3000,
    "bleed": 20,
    "bleeds": 5,
    "zeroband": 50,
    "longest": 3600,
    "leasemin": 100,
    "leasemax": 2000,
    "oc": 20000,
    "ocl": 15000,
    "oclms": 100,
    "ov": 31000,
    "env": 1000,
    "drop": 3000,
    "span": 4,
    "delay": 2,
    "persist": 2,
    "missms": 60000,
    "arccount": 3,
    "arcrest": 500,
    "arcwindow": 10000,
    "arctotal": 5,
    "restrike": 20,
    "fitted": FITTED,
}
CONFIG = {"tick": 10000, "sample": 10, "block": 32, "queue": 4, "before": 16, "after": 16, "signs": "ss"}
RESTARTED, BREAKDOWN, OVERCURRENT = 1 << 20, 1 << 2, 1 << 0
Step = dict[str, Any]


def scenario(
    name: str,
    clauses: str,
    *parts: Step | list[Step],
    settings: dict[str, int] | None = None,
    blank: bool = False,
    config: dict[str, int] | None = None,
) -> dict[str, Any]:
    """Return one scenario; parts are steps or lists of steps."""
    steps: list[Step] = []
    for part in parts:
        steps += part if isinstance(part, list) else [part]
    assert [s["t"] for s in steps] == sorted(s["t"] for s in steps), name
    whole = None if blank else {**SETTINGS, **(settings or {})}
    assert whole is None or tuple(whole) == KEYS
    return {
        "name": name,
        "clauses": clauses,
        "config": {**CONFIG, **(config or {})},
        "settings": whole,
        "bench": {"fall": 20},
        "steps": steps,
    }


def at(t: int, **step: Any) -> Step:
    """Return one step."""
    return {"t": t, **step}


def send(t: int, body: str, *answers: str) -> Step:
    """Send a line and expect these lines and no others since the last look."""
    return {"t": t, "send": body, "lines": list(answers)} if answers else {"t": t, "send": body}


def ask(t: int, body: str, *answers: str) -> Step:
    """Send a line and expect these among what came."""
    return {"t": t, "send": body, "has": list(answers)}


HELLO = f"hello 3221225472 {SESSION} 1 500"
GREET = [
    at(10, lines=["ev 1 0 boot 1 1", "ev 2 0 cause 1048576 0"]),
    send(10, HELLO, "ok 3221225472 hello 1 500", "ev 3 10 session -1056969215 0"),
    at(10, renew=True),
]
CLEAN = [*GREET, ask(1100, f"reset {{n}} {SESSION} 00100000 0", "ok 1 reset 00100000", "ev * * reset 1048576 0")]
ARM = f"arm {{n}} {SESSION} {{arm}} 0000ABCD {{settings}} {{event}}"
SEG = f"seg {{n}} {SESSION} "


def press(t: int, ticks: int = 3000) -> list[Step]:
    """Press the arm input for so many ticks."""
    return [at(t, contacts={"arm_input": True}), at(t + ticks, contacts={"arm_input": False})]


def armed(options: str = "") -> list[Step]:
    """Greeted, reset, armed and pressed: the warning has begun at 5300."""
    return [
        *CLEAN,
        ask(2100, ARM + options, "ok 2 arm 1", "ev * * requested 1 0"),
        *press(2200),
        at(
            5300,
            has=["ev * * pressed 1 *", "ev * * proven 5 7", "ev * * warning 1 30000"],
            at={"state": 3, "inhibit": True, "clear": True, "relay": True, "v": 0},
        ),
    ]


def energised(options: str = "") -> list[Step]:
    """Armed, one segment to voltage word 20000 in the queue, and up there at 40000."""
    return [
        *armed(options),
        ask(10000, SEG + "20000 30000 4000", "ok 3 seg 1 1"),
        at(
            40000,
            has=["ev * * energised 1 0", "ev * * segment 1 0", "ev * * hold 1 0"],
            at={
                "state": 4,
                "inhibit": False,
                "clear": False,
                "relay": True,
                "v": 20000,
                "i": 30000,
                "latched": False,
            },
        ),
    ]


OFF = {"state": 0, "inhibit": True, "clear": True, "relay": False, "v": 0, "i": 0}
CUT_AND_LATCHED = {**OFF, "latched": True}
PAUSED = {"state": 5, "inhibit": True, "clear": True, "relay": True, "v": 0, "i": 0, "latched": False}
PAUSE = " pause=2,500,10000"
COLLAPSE = [at(41000, codes={"v": 1000}), at(41030, codes={"v": None})]


def _session() -> list[dict[str, Any]]:
    n = f"info 1 {SESSION} 0"
    return [
        scenario(
            "hello opens a session and is repeated, not executed twice",
            "4.1 4.3 4.7",
            GREET,
            send(20, HELLO, "ok 3221225472 hello 1 500"),
            send(30, n, "ok 1 info 0"),
            send(40, HELLO, "ok 3221225472 hello 1 500", "ev 4 40 session * 0"),
        ),
        scenario(
            "a repeat gets the same answer; other numbers are refused",
            "3.9 3.10 3.11",
            GREET,
            send(20, f"info 2 {SESSION} 0", "err 2 info number"),
            send(30, n, "ok 1 info 0"),
            send(40, n, "ok 1 info 0"),
            send(50, f"get 1 {SESSION} 0", "ok 1 info 0"),
            send(60, f"info 3 {SESSION} 0", "err 3 info number"),
            send(70, f"info 2 {SESSION} 1", "ok 2 info 1"),
            send(80, n, "err 1 info number"),
        ),
        scenario(
            "no session, another session",
            "3.8 7.16",
            at(10, has=["ev 1 0 boot 1 1"]),
            send(10, f"info 1 {SESSION} 0", "err 1 info session"),
            send(20, f"lower 1 {SESSION}", "err 1 lower session"),
            send(30, f"arc 2 {SESSION} 0", "err 2 arc session"),
            send(40, "cut 3 0", "ok 3 cut"),
            send(50, HELLO, "ok 3221225472 hello 1 500", "ev * * session * 0"),
            send(60, "info 1 00000002 0", "err 1 info session"),
            send(70, f"info 1 {SESSION} 0", "ok 1 info 0"),
        ),
        scenario(
            "what cannot be read is answered and takes no number",
            "3.6 3.7 3.12",
            GREET,
            send(20, f"fly 1 {SESSION}", "err 1 fly unknown"),
            send(30, f"info 1 {SESSION}", "err 1 info malformed"),
            send(40, f"info 1 {SESSION} 0 0", "err 1 info malformed"),
            send(50, f"info x {SESSION} 0", "err 0 info malformed"),
            send(60, "???", "err 0 unknown unknown"),
            send(70, f"info 1 {SESSION} 99", "err 1 info range"),
            send(80, f"info 2 {SESSION} 0 later=1", "ok 2 info 0"),
        ),
        scenario(
            "hello refused",
            "4.4",
            at(10, has=["ev 1 0 boot 1 1"]),
            send(10, f"hello 3221225472 {SESSION} 2 500", "err 3221225472 hello version"),
            send(20, f"hello 3221225472 {SESSION} 1 99", "err 3221225472 hello range"),
            send(30, f"hello 3221225472 {SESSION} 1 2001", "err 3221225472 hello range"),
            send(40, "hello 3221225472 00000000 1 500", "err 3221225472 hello range"),
            send(50, f"info 1 {SESSION} 0", "err 1 info session"),
        ),
        scenario(
            "a torn line does not swallow a cut; garbage changes nothing",
            "2.4 2.5 7.2",
            energised(),
            at(41000, raw="seg 4 C0FFEE01 300\ncut 9 0*007"),
            at(41001, at={"state": 4}),
            at(41002, raw="\n"),
            at(41003, at={"state": 4}),
            at(41010, raw="seg 4 C0FFEE01 30000"),
            at(41011, raw="\n"),
            ask(41011, "cut 10 0", "ev * 41011 cut 1 10", "ok 10 cut"),
            at(41011, at=OFF),
        ),
        scenario(
            "a new session lowers what is energised",
            "4.5 4.6",
            energised(),
            ask(
                41000,
                "hello 3221225473 C0FFEE02 1 500",
                "ev * 41000 lowering 3 0",
                "ev * 41000 void 1 3",
                "ok 3221225473 hello 1 500",
                "ev * * session * 0",
            ),
            at(41000, at={"state": 6, "v": 20000}),
            send(41100, f"info 4 {SESSION} 3", "err 4 info session"),
            at(45000, has=["ev * * cut 3 0"], at=OFF),
        ),
        scenario(
            "a new session cuts what is warning, and what is pausing",
            "4.6 11.7",
            armed(),
            ask(10000, "hello 3221225473 C0FFEE02 1 500", "ev * 10000 cut 10 0", "ev * * void 1 3"),
            at(10000, at=OFF),
        ),
        scenario(
            "a new session cuts what is pausing",
            "4.6",
            energised(PAUSE),
            COLLAPSE,
            at(41100, at=PAUSED),
            ask(41200, "hello 3221225473 C0FFEE02 1 500", "ev * 41200 cut 6 0"),
            at(41200, at=OFF),
        ),
        scenario(
            "blank settings greet and refuse to arm",
            "4.10 14.5",
            GREET,
            ask(20, f"info {{n}} {SESSION} 3", "ok 1 info 3 blank=1 settings=00000000 causes=00100000"),
            send(30, f"get {{n}} {SESSION} 0", "err 2 get blank"),
            ask(2000, ARM, "err 3 arm blank", "ev * * refused 1 10"),
            blank=True,
        ),
        scenario(
            "settings are written with the interlock open only, whole, and with their checksum",
            "14.3 14.4",
            GREET,
            send(100, f"put {{n}} {SESSION} vmax 50000", "ok 1 put"),
            send(110, f"put {{n}} {SESSION} vmax 65536", "err 2 put range"),
            send(120, f"put {{n}} {SESSION} colour 1", "err 3 put range"),
            send(130, f"save {{n}} {SESSION} 00000001", "err 4 save checksum"),
            send(140, f"save {{n}} {SESSION} {checksum(vmax=50000)}", "err 5 save closed"),
            at(200, contacts={"interlock": False}),
            at(300, has=["ev * * inputs * 1"]),
            ask(300, f"save {{n}} {SESSION} {checksum(vmax=50000)}", f"ok 6 save {checksum(vmax=50000)}"),
            ask(310, f"get {{n}} {SESSION} 0", "ok 7 get 0 50000 60000 60000 600000 25000 4000 1 32768"),
        ),
        scenario(
            "the last sixteen events can be asked for again",
            "8.8",
            GREET,
            send(
                20,
                f"again {{n}} {SESSION} 1",
                "ok 1 again 3",
                "ev 1 0 boot 1 1",
                "ev 2 0 cause 1048576 0",
                "ev 3 10 session * 0",
            ),
            send(30, f"again {{n}} {SESSION} 3", "ok 2 again 1", "ev 3 10 session * 0"),
            [
                step
                for k in range(14)
                for step in (
                    at(1000 + 400 * k, contacts={"auxiliary": False}),
                    at(1200 + 400 * k, contacts={"auxiliary": True}),
                )
            ],
            ask(9000, f"again {{n}} {SESSION} 3", "err 3 again gone"),
        ),
    ]


def checksum(**changes: int) -> str:
    """Return the checksum of the scenarios' settings with changes, by the twin's CRC."""
    from tests.wire.write_vectors import bitwise_crc32

    values = {**SETTINGS, **changes}
    return f"{bitwise_crc32(''.join(f'{key}={values[key]}{chr(10)}' for key in KEYS).encode()):08X}"


def _arming() -> list[dict[str, Any]]:
    def refused(
        name: str, clauses: str, number: int, word: str, *before: Step, body: str = ARM, **options: Any
    ) -> dict[str, Any]:
        return scenario(
            name,
            clauses,
            CLEAN,
            list(before),
            ask(3000, body, f"err * arm {word}", f"ev * 3000 refused * {number}"),
            at(3000, at=OFF),
            ask(3100, f"info {{n}} {SESSION} 3", "ok * info 3 arm=0"),
            **options,
        )

    return [
        scenario(
            "arm to energised",
            "5.3 5.10 5.12 5.14 5.15 5.16",
            energised(),
            at(40000, block={"state": 4, "v_word": 20000, "i_word": 30000, "latched": 0}),
        ),
        scenario(
            "an arm without a press never energises and runs out",
            "5.10",
            CLEAN,
            ask(2100, ARM, "ok 2 arm 1", "ev * * requested 1 0"),
            at(302000, at={"state": 1, "inhibit": True}),
            at(302200, has=["ev * * cut 9 0", "ev * * void 1 6"], at=OFF),
        ),
        scenario(
            "a press that began before the arm, a short one and a long one do not count",
            "5.4 5.10",
            CLEAN,
            ask(2100, ARM, "ok 2 arm 1"),
            press(2200, 1900),
            at(4200, at={"state": 1}),
            at(5000, contacts={"arm_input": True}),
            at(34900, at={"state": 1}),
            at(36000, has=["ev * * refused 1 23", "ev * * void 1 1"], at=OFF),
        ),
        refused("refused: arm input stuck", "5.4", 23, "input", at(2500, contacts={"arm_input": True})),
        refused("refused: interlock open", "5.4", 16, "interlock", at(2500, contacts={"interlock": False})),
        refused("refused: emergency contact", "5.4", 17, "emergency", at(2500, contacts={"emergency": False})),
        refused("refused: grounding device", "5.4", 18, "grounding", at(2500, contacts={"ground_open": False})),
        refused("refused: auxiliary supplies", "5.4", 20, "auxiliary", at(2500, contacts={"auxiliary": False})),
        refused("refused: readback outside the zero band", "5.4", 22, "zero", at(2500, codes={"v": 51})),
        refused(
            "refused: settings of another checksum",
            "5.3",
            11,
            "settings",
            body=f"arm {{n}} {SESSION} {{arm}} 0000ABCD 00000001 {{event}}",
        ),
        refused(
            "refused: an event has happened that the host has not seen",
            "5.3",
            12,
            "event",
            body=f"arm {{n}} {SESSION} {{arm}} 0000ABCD {{settings}} 1",
        ),
        refused(
            "refused: another arm number",
            "5.3",
            13,
            "arm",
            body=f"arm {{n}} {SESSION} 7 0000ABCD {{settings}} {{event}}",
        ),
        scenario(
            "refused: no lease",
            "5.4 9.10",
            CLEAN,
            at(1200, renew=False),
            ask(8000, ARM, "err * arm lease", "ev * 8000 refused 1 9"),
            at(8000, at={**OFF, "latched": False}),
        ),
        refused("refused: looser than the settings", "5.7", 24, "looser", body=ARM + " oc=20001"),
        refused("refused: arc reaction outside the bounds", "11.2", 29, "reaction", body=ARM + " pause=4,500,10000"),
        refused("refused: rest too short", "11.2", 29, "reaction", body=ARM + " pause=2,499,10000"),
        refused("refused: window too short", "11.2", 29, "reaction", body=ARM + " pause=2,500,9999"),
        refused(
            "refused: a pause without a read-back of the inhibit",
            "11.2 11.3",
            29,
            "reaction",
            body=ARM + PAUSE,
            settings={"fitted": FITTED & ~0x8},
        ),
        scenario(
            "refused: latched",
            "5.4 12.7",
            GREET,
            ask(2000, ARM, "err 1 arm latched", "ev * * refused 1 8"),
            at(2000, at=CUT_AND_LATCHED),
        ),
        scenario(
            "an arm repeated is answered again and not executed again",
            "3.10 5.6",
            CLEAN,
            ask(2100, f"arm 2 {SESSION} 1 0000ABCD {{settings}} {{event}}", "ok 2 arm 1", "ev * * requested 1 0"),
            send(2200, f"arm 2 {SESSION} 1 0000ABCD {{settings}} {{event}}", "ok 2 arm 1"),
        ),
        scenario(
            "a new arm voids the old one",
            "5.8",
            CLEAN,
            ask(2100, ARM, "ok 2 arm 1"),
            ask(2200, ARM, "ev * * void 1 5", "ev * * requested 2 0"),
            ask(2300, f"info {{n}} {SESSION} 3", "ok 4 info 3 arm=2"),
        ),
        scenario(
            "a bench without an arm input asks for no press",
            "5.11",
            CLEAN,
            ask(2100, ARM, "ok 2 arm 1", "ev * * requested 1 0"),
            at(3000, has=["ev * * warning 1 30000"]),
            settings={"fitted": FITTED & ~0x200},
        ),
        scenario(
            "an inhibit whose read-back does not follow latches cut path",
            "5.12 5.13",
            CLEAN,
            at(2000, contacts={"inhibit_back": True}),
            ask(2100, ARM, "ok 2 arm 1"),
            press(2200),
            at(20000, has=["ev * * cause 16384 *"], none=["ev * * warning ..."], at=CUT_AND_LATCHED),
        ),
        scenario(
            "a relay whose read-back does not follow latches cut path",
            "5.12 5.13",
            CLEAN,
            at(2000, contacts={"relay_back": False}),
            ask(2100, ARM, "ok 2 arm 1"),
            press(2200),
            at(30000, has=["ev * * cause 16384 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "a danger signal that does not light latches cut path",
            "5.12 5.13",
            CLEAN,
            at(2000, contacts={"danger": False}),
            ask(2100, ARM, "ok 2 arm 1"),
            press(2200),
            at(30000, has=["ev * * cause 16384 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "an interlock opened in the warning trips and voids",
            "5.18 10.10",
            armed(),
            at(10000, contacts={"interlock": False}),
            at(10020, has=["ev * * cause 32 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "an interlock opened while requested cuts without a latch",
            "5.18 5.19",
            CLEAN,
            ask(2100, ARM, "ok 2 arm 1"),
            at(2200, contacts={"interlock": False}),
            at(2230, has=["ev * * void 1 1"], at={**OFF, "latched": False}),
        ),
        scenario(
            "a lease that lapses in the warning voids the arm without a latch",
            "5.18 9.7",
            armed(),
            at(10000, renew=False),
            at(15500, has=["ev * * lapse 3 0", "ev * * cut 10 0", "ev * * void 1 4"], at={**OFF, "latched": False}),
        ),
    ]


def _setpoints() -> list[dict[str, Any]]:
    return [
        scenario(
            "words by the formula, both channels, to the tick",
            "6.4 6.6 6.7 6.8",
            energised(),
            ask(41000, SEG + "26007 29991 4001", "ok 4 seg 2 0", "ev * 41000 segment 2 0"),
            ask(41000, SEG + "26000 29991 7", "ok 5 seg 3 1"),
            at(41000, at={"v": 20000, "i": 30000}),
            at(41001, at={"v": 20001, "i": 30000}),
            at(41002, at={"v": 20003}),
            at(41003, at={"v": 20004}),
            at(41444, at={"v": 20666, "i": 30000}),
            at(41445, at={"v": 20668, "i": 29999}),
            at(45000, at={"v": 26005, "i": 29992}),
            at(45001, at={"v": 26007, "i": 29991}),
            at(45002, at={"v": 26006}),
            at(45005, at={"v": 26003}),
            at(45008, at={"v": 26000}),
            at(45009, has=["ev * 45001 segment 3 0", "ev * 45008 hold 3 0"], at={"v": 26000, "i": 29991}),
        ),
        scenario(
            "segments refused: above a ceiling, too steep, without ticks",
            "6.3",
            energised(),
            send(41000, SEG + "60001 30000 60000", "err 4 seg ceiling"),
            send(41010, SEG + "20000 60001 60000", "err 5 seg ceiling"),
            send(41020, SEG + "20001 30000 0", "err 6 seg range"),
            send(41030, SEG + "26001 30000 1000", "err 7 seg slew"),
            ask(41040, SEG + "26000 30000 1000", "ok 8 seg 2 0", "ev * 41040 segment 2 0"),
            at(41540, at={"v": 23000, "i": 30000}),
            at(42040, at={"v": 26000}),
            send(42041, SEG + "26000 30061 1", "ev * 42040 hold 2 0", "err 9 seg slew"),
        ),
        scenario(
            "the queue is full",
            "6.2 6.3",
            armed(),
            [ask(10000 + 10 * k, SEG + "100 100 1000", f"ok {3 + k} seg {1 + k} {1 + k}") for k in range(4)],
            send(10100, SEG + "100 100 1000", "err 7 seg queue"),
        ),
        scenario(
            "a segment queued in the warning waits for energised",
            "5.15 5.16 6.3",
            armed(),
            ask(10000, SEG + "20000 30000 4000", "ok 3 seg 1 1"),
            at(35000, at={"state": 3, "v": 0, "inhibit": True}),
            at(40000, has=["ev * * energised 1 0", "ev * * segment 1 0", "ev * * hold 1 0"], at={"v": 20000}),
        ),
        scenario(
            "a segment queued in the warning is gone with a cut",
            "5.18 6.5 7.8",
            armed(),
            ask(10000, SEG + "20000 30000 4000", "ok 3 seg 1 1"),
            ask(11000, "cut 1 0", "ok 1 cut"),
            at(45000, none=["ev * * energised ..."], at=OFF),
        ),
        scenario(
            "a segment needs a state and a session's lease",
            "6.3",
            CLEAN,
            send(2000, SEG + "100 100 100", "err 2 seg state"),
        ),
        scenario(
            "tighter limits of an arm hold for its segments",
            "5.7 5.9",
            armed(" vmax=10000 vslew=1000"),
            send(10000, SEG + "10001 0 60000", "err 3 seg ceiling"),
            send(10010, SEG + "1000 0 9999", "err 4 seg slew"),
            ask(10020, SEG + "1000 0 10000", "ok 5 seg 1 1"),
        ),
    ]


def _stops() -> list[dict[str, Any]]:
    return [
        scenario(
            "cut while energised",
            "7.6 7.7 7.9",
            energised(),
            ask(41000, "cut 5 0", "ev * 41000 cut 1 5", "ev * 41000 void 1 1", "ok 5 cut"),
            at(41000, at={**OFF, "latched": False}),
            send(41020, "cut 5 0", "ok 5 cut"),
            at(42000, block={"state": 0, "v_word": 0}),
        ),
        scenario(
            "a host's rule latches",
            "7.9",
            energised(),
            ask(41000, "cut 5 4", "ev * 41000 cut 1 5", "ev * 41000 cause 65536 4", "ok 5 cut"),
            ask(41100, f"info {{n}} {SESSION} 3", "ok 4 info 3 causes=00010000 rule=4 tag=0000ABCD"),
            at(41100, at=CUT_AND_LATCHED),
        ),
        scenario(
            "lower ramps down and cuts",
            "7.12 7.13",
            energised(),
            ask(41000, f"lower 5 {SESSION}", "ev * 41000 lowering 1 5", "ev * 41000 void 1 2", "ok 5 lower"),
            at(42000, at={"state": 6, "v": 14000, "i": 30000, "inhibit": False}),
            ask(42000, f"lower 5 {SESSION}", "ok 5 lower"),
            at(42001, at={"v": 13994}),
            at(44333, at={"v": 2}),
            at(44334, has=["ev * 44334 cut 3 0"], at={**OFF, "latched": False}),
        ),
        scenario(
            "a lower that takes too long cuts",
            "7.13",
            energised(),
            ask(41000, f"lower 5 {SESSION}", "ok 5 lower"),
            at(60999, at={"state": 6}),
            at(61001, has=["ev * * cut 4 0"], at=OFF),
            settings={"downslew": 1000},
        ),
        scenario(
            "lower while requested and while off",
            "7.15",
            CLEAN,
            ask(2100, ARM, "ok 2 arm 1"),
            ask(2200, f"lower 5 {SESSION}", "ev * 2200 cut 10 5", "ev * * void 1 2", "ok 5 lower"),
            at(2200, at=OFF),
            send(2300, f"lower 6 {SESSION}", "ok 6 lower"),
            at(2300, at={**OFF, "latched": False}),
        ),
        scenario(
            "an arm repeated behind a cut energises nothing",
            "3.10 5.3 5.18",
            CLEAN,
            ask(2100, f"arm 2 {SESSION} 1 0000ABCD {{settings}} {{event}}", "ok 2 arm 1"),
            ask(2200, "cut 1 0", "ok 1 cut"),
            send(2300, f"arm 2 {SESSION} 1 0000ABCD {{settings}} {{event}}", "ok 2 arm 1"),
            at(2300, at=OFF),
            press(2400),
            at(6000, at=OFF),
            ask(6000, f"arm 3 {SESSION} 1 0000ABCD {{settings}} {{event}}", "err 3 arm arm"),
            ask(6100, f"arm 4 {SESSION} 2 0000ABCD {{settings}} 4", "err 4 arm event"),
            at(6100, at=OFF),
        ),
        scenario(
            "a segment repeated behind a cut moves nothing",
            "3.10 6.5 7.8",
            energised(),
            ask(41000, f"seg 4 {SESSION} 26000 30000 4000", "ok 4 seg 2 0"),
            ask(41500, "cut 1 0", "ok 1 cut"),
            send(41600, f"seg 4 {SESSION} 26000 30000 4000", "ok 4 seg 2 0"),
            send(41700, f"seg 5 {SESSION} 26000 30000 4000", "err 5 seg state"),
            at(43000, at=OFF),
        ),
        scenario(
            "a segment after a lower is refused",
            "6.5 7.14",
            energised(),
            ask(41000, f"lower 5 {SESSION}", "ok 5 lower"),
            send(41100, SEG + "20000 30000 4000", "err 4 seg state"),
            at(45000, at=OFF),
        ),
    ]


def _lease() -> list[dict[str, Any]]:
    return [
        scenario(
            "a lapse while energised lowers and latches",
            "9.8 6.5",
            energised(),
            at(41000, renew=False),
            at(
                46100,
                has=["ev * * lapse 4 0", "ev * * lowering 2 0", "ev * * void 1 4", "ev * * cause 32768 *"],
                at={"state": 6, "latched": True},
            ),
            ask(46100, SEG + "20000 30000 4000", "err 4 seg *"),
            at(50000, has=["ev * * cut 3 0"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "a renewal does not stop a lower",
            "9.11 7.14",
            energised(),
            at(41000, renew=False),
            at(46100, at={"state": 6, "latched": True}, renew=True),
            at(48000, at={"state": 6}),
            at(50000, has=["ev * * cut 3 0"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "a host that judges a backlog loses the lease: only newer samples count",
            "9.3 9.4",
            energised(),
            at(41000, renew=False),
            [step for k in range(10) for step in (at(41500 + 500 * k, send=f"renew {SESSION} 4080"),)],
            at(46500, has=["ev * * lapse 4 0"], at={"state": 6}),
        ),
        scenario(
            "a renewal extends to its sample's tick, not its arrival's",
            "9.4",
            energised(),
            at(41000, renew=False),
            at(45000, send=f"renew {SESSION} 4199"),
            at(46990, at={"state": 4}),
            at(47010, has=["ev * * lapse 4 0"], at={"state": 6}),
        ),
        scenario(
            "a renewal of a sample not yet taken is not accepted",
            "9.3",
            energised(),
            at(41000, renew=False),
            at(42000, send=f"renew {SESSION} 4500"),
            at(46500, has=["ev * * lapse 4 0"]),
        ),
        scenario(
            "a renewal of another session counts for nothing",
            "3.8 9.3",
            energised(),
            at(41000, renew=False),
            at(44000, send="renew C0FFEE02 4390"),
            at(46500, has=["ev * * lapse 4 0"]),
        ),
        scenario(
            "off, a lapse is only a bit",
            "9.10",
            CLEAN,
            at(2000, renew=False),
            at(9000, lines=[]),
            at(9000, at={**OFF, "latched": False}),
            at(9000, block={"state": 0}),
        ),
        scenario(
            "a lapse while pausing cuts and latches",
            "9.9",
            energised(PAUSE),
            COLLAPSE,
            at(41100, at=PAUSED),
            at(41100, renew=False),
            at(46700, has=["ev * * lapse 5 0", "ev * * cut 5 0", "ev * * cause 32768 *"], at=CUT_AND_LATCHED),
        ),
    ]


def _arc() -> list[dict[str, Any]]:
    resume = f"seg {{n}} {SESSION} 1000 30000 1000 arc=1"
    return [
        scenario(
            "an arc latches where no pause was declared",
            "11.1",
            energised(),
            COLLAPSE,
            at(41100, has=["ev * * cut 8 0", "ev * * cause 4 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "an arc pauses: inhibit at once, relay stays closed",
            "11.3 11.13 11.14",
            energised(PAUSE),
            COLLAPSE,
            at(41030, has=["ev * * pausing 1 *"], at=PAUSED),
            at(41700, has=["ev * * snapshot * *"], block={"state": 5, "arc": 1}, at=PAUSED),
        ),
        scenario(
            "a pause ends by a segment with its arc's number after the rest and not before",
            "11.11 6.3",
            energised(PAUSE),
            COLLAPSE,
            at(41100, has=["ev * * pausing 1 *"]),
            send(45900, resume, "ev * * snapshot * *", "err 4 seg rest"),
            send(46100, f"seg {{n}} {SESSION} 1000 30000 1000", "err 5 seg arc"),
            send(46110, f"seg {{n}} {SESSION} 1000 30000 1000 arc=2", "err 6 seg arc"),
            at(46110, at=PAUSED),
            ask(46200, resume, "ev * 46200 resumed 1 0", "ev * 46200 segment 2 0", "ok 7 seg 2 0"),
            at(46200, at={"state": 4, "inhibit": False, "clear": False, "relay": True, "v": 0}),
            at(46700, at={"state": 4, "v": 500}),
            at(47300, has=["ev * * hold 2 0"], at={"v": 1000}),
        ),
        scenario(
            "a pause nobody ends is cut",
            "11.12",
            energised(PAUSE),
            COLLAPSE,
            at(345000, at=PAUSED),
            at(346500, has=["ev * * cut 9 0", "ev * * cause 524288 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "one arc more than the count in the window latches",
            "11.5",
            energised(" pause=1,500,10000"),
            COLLAPSE,
            at(41100, at=PAUSED),
            ask(46200, f"seg {{n}} {SESSION} 20000 30000 4000 arc=1", "ev * * resumed 1 0"),
            at(52000, codes={"v": 500}),
            at(52030, codes={"v": None}),
            at(52100, has=["ev * * cause 131072 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "collapses within the re-strike time belong to the arc; a later one in the rest latches",
            "11.10",
            energised(PAUSE),
            at(41000, codes={"v": 6000}),
            at(41030, codes={"v": None}),
            at(41100, codes={"v": 0}, at=PAUSED),
            at(41130, codes={"v": None}),
            at(41140, has=["ev * * pausing 1 *", "ev * * restrike 1 1"], at=PAUSED),
            at(41300, at=PAUSED),
        ),
        scenario(
            "a readback above the bleed envelope in the rest latches",
            "11.10",
            energised(PAUSE),
            COLLAPSE,
            at(42500, at=PAUSED),
            at(42500, codes={"v": 5000}),
            at(42530, codes={"v": None}),
            at(42560, has=["ev * * cause 262144 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "one arc seen by MCU and host at different samples counts once",
            "11.8",
            energised(PAUSE),
            COLLAPSE,
            at(41100, has=["ev * * pausing 1 *"]),
            ask(41110, f"arc 7 {SESSION} 4100", "ev * * merged 1 4100", "ok 7 arc 1"),
            send(41120, f"arc 7 {SESSION} 4100", "ok 7 arc 1"),
            ask(41130, f"arc 8 {SESSION} 4098", "ev * * merged 1 4098", "ok 8 arc 1"),
            at(41140, at=PAUSED),
        ),
        scenario(
            "an arc that only the host saw counts once",
            "11.8 11.9",
            energised(PAUSE),
            ask(41000, f"arc 7 {SESSION} 4095", "ev * 41000 pausing 1 4095", "ok 7 arc 1"),
            at(41000, at=PAUSED),
            send(41020, f"arc 7 {SESSION} 4095", "ok 7 arc 1"),
            at(41030, at=PAUSED),
        ),
        scenario(
            "a host's arc without a pause declared is a cut and latches",
            "11.1 11.6",
            energised(),
            ask(41000, f"arc 7 {SESSION} 4095", "ev * 41000 cut 8 *", "ok 7 arc *"),
            at(41000, at=CUT_AND_LATCHED),
        ),
        scenario(
            "an arc while lowering is a cut",
            "11.6 7.14",
            energised(PAUSE),
            ask(40500, f"lower 5 {SESSION}", "ok 5 lower"),
            at(41000, at={"state": 6}),
            COLLAPSE,
            at(41060, has=["ev * * cause 4 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "an arc after a lapse is a cut",
            "11.6 9.8",
            energised(PAUSE),
            at(40500, renew=False),
            at(45950, has=["ev * * lowering 2 0"], at={"state": 6, "latched": True}),
            at(46000, codes={"v": 100}),
            at(46030, codes={"v": None}),
            at(46060, has=["ev * * cut 8 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "an overcurrent without a collapse latches, relay included",
            "11.4",
            energised(PAUSE),
            at(41000, codes={"i": 25000, "v": 10000}),
            at(41200, has=["ev * * cause 1 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "an overcurrent with a collapse is an arc",
            "11.4",
            energised(PAUSE),
            at(41000, codes={"i": 25000, "v": 1000}),
            at(41030, codes={"i": None, "v": None}),
            at(41200, has=["ev * * pausing 1 *"], at=PAUSED),
        ),
        scenario(
            "a lower while pausing cuts",
            "11.7",
            energised(PAUSE),
            COLLAPSE,
            at(41100, at=PAUSED),
            ask(41200, f"lower 5 {SESSION}", "ev * 41200 cut 1 5", "ok 5 lower"),
            at(41200, at={**OFF, "latched": False}),
        ),
        scenario(
            "the last run's pause and limits do not reach the next run",
            "5.9 11.1",
            energised(PAUSE + " oc=16000 vmax=25000"),
            ask(41000, "cut 1 0", "ok 1 cut"),
            ask(45000, ARM, "ok 4 arm 2"),
            press(45100),
            ask(50000, SEG + "40000 30000 8000", "ok 5 seg * 1"),
            at(90000, at={"v": 40000}),
            at(91000, codes={"i": 18000}),
            at(91500, codes={"i": None}),
            at(91600, at={"state": 4}),
            at(92000, codes={"v": 500}),
            at(92030, codes={"v": None}),
            at(92100, has=["ev * * cause 4 *"], at=CUT_AND_LATCHED),
        ),
    ]


def _rules() -> list[dict[str, Any]]:
    def trips(name: str, clauses: str, cause: int, *steps: Step, **options: Any) -> dict[str, Any]:
        last = steps[-1]["t"]
        return scenario(
            name,
            clauses,
            energised(),
            list(steps),
            at(last, has=[f"ev * * cause {cause} *"], at=CUT_AND_LATCHED),
            **options,
        )

    return [
        trips(
            "overcurrent acts at the second sample",
            "10.2 10.3",
            OVERCURRENT,
            at(41000, codes={"i": 20001}),
            at(41010, at={"state": 4}),
            at(41020, at=OFF),
        ),
        scenario(
            "one interfering sample is counted, not acted on",
            "10.2",
            energised(),
            at(41000, codes={"i": 30000}),
            at(41010, codes={"i": None}),
            at(41100, has=["ev * * interfered 1 1"], at={"state": 4, "latched": False}),
        ),
        scenario(
            "a current at the limit trips nothing",
            "10.3",
            energised(),
            at(41000, codes={"i": 15000}),
            at(51000, lines=[], at={"state": 4}),
        ),
        trips(
            "overcurrent level for its time",
            "10.4",
            1 << 1,
            at(41000, codes={"i": 15001}),
            at(41990, at={"state": 4}),
            at(42020, at=OFF),
        ),
        trips("collapse", "10.5", BREAKDOWN, at(41000, codes={"v": 6900}), at(41030, at=OFF)),
        scenario(
            "a fall that the words explain is no collapse",
            "10.5",
            energised(),
            ask(41000, SEG + "2000 30000 3000", "ok 4 seg 2 0"),
            at(46000, has=["ev * * hold 2 0"], at={"state": 4, "v": 2000, "latched": False}),
        ),
        trips("overvoltage", "10.7", 1 << 3, at(41000, codes={"v": 31001}), at(41030, at=OFF)),
        trips("above the envelope", "10.8", 1 << 4, at(41000, codes={"v": 11002}), at(41030, at=OFF)),
        trips("interlock", "10.10", 1 << 5, at(41000, contacts={"interlock": False}), at(41020, at=OFF)),
        trips("emergency contact", "10.10", 1 << 6, at(41000, contacts={"emergency": False}), at(41020, at=OFF)),
        trips("grounding device", "10.10", 1 << 7, at(41000, contacts={"ground_open": False}), at(41020, at=OFF)),
        trips("auxiliary supplies", "10.10", 1 << 8, at(41000, contacts={"auxiliary": False}), at(41020, at=OFF)),
        trips("readback missing", "10.11", 1 << 9, at(51500, at=OFF), settings={"missms": 1000}),
        trips("longest time on", "10.12", 1 << 10, at(45400, at=OFF), settings={"longest": 1}),
        trips(
            "power lost and back while energised",
            "10.13",
            1 << 11,
            at(41000, power=False),
            at(41490, at={"state": 4}),
            at(41600, power=True),
            at(43000, at=OFF),
        ),
        scenario(
            "power still on after the relay was dropped",
            "10.14",
            energised(),
            at(41000, contacts={"danger": True}),
            ask(41000, "cut 1 0", "ok 1 cut"),
            at(42990, at={"latched": False}),
            at(43050, has=["ev * * cause 4096 *"], at=CUT_AND_LATCHED),
        ),
        scenario(
            "an interlock that did not cut",
            "10.15",
            energised(),
            at(41000, contacts={"danger": True}),
            at(41010, contacts={"interlock": False}),
            at(42900, has=["ev * * cause 32 *"]),
            at(43100, has=["ev * * cause 8192 *"]),
        ),
        scenario(
            "off, an open interlock and a lost readback are no trip",
            "10.16",
            CLEAN,
            at(2000, contacts={"interlock": False, "auxiliary": False}),
            at(6000, at={**OFF, "latched": False}, none=["ev * * cause ..."]),
        ),
        scenario(
            "negative polarity reads the same",
            "1.5 10.5",
            energised(),
            at(41000, codes={"v": 900}),
            at(41030, codes={"v": None}),
            at(41060, has=["ev * * cause 4 *"], at=CUT_AND_LATCHED),
            settings={"polarity": -1, "vmap": -32768, "vzero": 1000},
        ),
    ]


def _latch() -> list[dict[str, Any]]:
    tripped = [*energised(), *COLLAPSE, at(41100, has=["ev * * cause 4 *"], at=CUT_AND_LATCHED)]
    return [
        scenario(
            "reset names the whole set",
            "12.3",
            tripped,
            at(46000, has=["ev * * snapshot * *"]),
            send(46000, f"reset {{n}} {SESSION} 00000001 0", "err 4 reset causes"),
            send(46010, f"reset {{n}} {SESSION} 00000005 0", "err 5 reset causes"),
            ask(46020, f"reset {{n}} {SESSION} 00000004 0", "ev * * reset 4 0"),
            at(46020, at={**OFF, "latched": False}),
        ),
        scenario(
            "reset refused: interlock, read-back, readback",
            "12.4",
            tripped,
            at(46000, contacts={"interlock": False}),
            at(46100, has=[]),
            send(46100, f"reset {{n}} {SESSION} 00000004 0", "err 4 reset interlock"),
            at(46200, contacts={"interlock": True}),
            at(46500, has=[]),
            send(46900, f"reset {{n}} {SESSION} 00000004 0", "err 5 reset interlock"),
            at(47300, contacts={"relay_back": True}),
            at(47500, has=[]),
            send(47500, f"reset {{n}} {SESSION} 00000004 0", "err 6 reset position"),
            at(47600, contacts={"relay_back": None}),
            at(47600, codes={"v": 51}),
            at(47800, has=[]),
            send(47800, f"reset {{n}} {SESSION} 00000004 0", "err 7 reset zero"),
            at(47900, codes={"v": None}),
            at(48500, has=[]),
            ask(48500, f"reset {{n}} {SESSION} 00000004 0", "ev * * reset 4 0"),
        ),
        scenario(
            "reset where the monitor is unpowered: grounded by hand, and the bleed times",
            "12.5",
            GREET,
            send(1100, f"reset {{n}} {SESSION} 00100000 0", "err 1 reset grounded"),
            send(1110, f"reset {{n}} {SESSION} 00100000 1", "err 2 reset bleed"),
            ask(10100, f"reset {{n}} {SESSION} 00100000 1", "ev * * reset 1048576 1"),
            settings={"fitted": FITTED & ~0x1000, "bleed": 200},
        ),
        scenario(
            "causes outlive a boot",
            "12.2 12.7",
            tripped,
            at(46000, has=[]),
            at(46000, reset=1),
            at(46010, at=CUT_AND_LATCHED, has=["ev 1 * boot 1 2"]),
            ask(46020, "hello 3221225473 C0FFEE02 1 500", "ok 3221225473 hello 1 500"),
            ask(46030, "info 1 C0FFEE02 3", "ok 1 info 3 causes=00100004 tag=0000ABCD mark=0 boot=2 arm=0"),
        ),
        scenario(
            "a boot while energised says that causes may be missing",
            "5.17 12.6 12.7",
            energised(),
            at(41000, reset=4),
            at(41000, at=CUT_AND_LATCHED),
            at(41010, has=["ev 1 * boot 4 2"]),
            ask(41020, "hello 3221225473 C0FFEE02 1 500", "ok 3221225473 hello 1 500"),
            ask(41030, "info 1 C0FFEE02 3", "ok 1 info 3 causes=00300000 tag=0000ABCD mark=0 reset=4"),
            at(45000, at=CUT_AND_LATCHED),
        ),
        scenario(
            "a snapshot is fetched, confirmed and gone",
            "13.1 13.2 13.3 13.6",
            tripped,
            ask(41700, f"info {{n}} {SESSION} 3", "ev * * snapshot 65537 32", "ok 4 info 3 snap=65537"),
            ask(41710, f"snap {{n}} {SESSION} 0", "ok 5 snap 65537 trip 0000ABCD 0 32 15 * 0 32 *"),
            send(41720, f"snap {{n}} {SESSION} 32", "err 6 snap nothing"),
            send(41730, f"stored {{n}} {SESSION} 1", "err 7 stored nothing"),
            send(41740, f"stored {{n}} {SESSION} 65537", "ok 8 stored"),
            send(41750, f"snap {{n}} {SESSION} 0", "err 9 snap nothing"),
        ),
        scenario(
            "a snapshot waits through a new session",
            "13.2",
            tripped,
            at(45000, has=[]),
            ask(46000, "hello 3221225473 C0FFEE02 1 500", "ok 3221225473 hello 1 500"),
            ask(46010, "snap 1 C0FFEE02 0", "ok 1 snap 65537 trip ..."),
        ),
        scenario(
            "a trip overwrites an arc's snapshot, and says so",
            "13.4",
            energised(PAUSE),
            COLLAPSE,
            at(42500, has=["ev * * snapshot 65537 32"]),
            at(42500, contacts={"interlock": False}),
            at(43000, has=["ev * * lost 65537 1", "ev * * snapshot 65538 32"]),
            ask(43010, f"snap {{n}} {SESSION} 0", "ok 4 snap 65538 trip 0000ABCD 0 32 15 * 1 32 *"),
        ),
        scenario(
            "a snapshot lost by a reset is told",
            "13.5",
            tripped,
            at(42500, has=["ev * * snapshot 65537 32"]),
            at(42500, reset=2),
            at(42510, has=["ev 1 * boot 2 2", "ev * * lost 65537 3"]),
        ),
        scenario(
            "counters wrap: energised across the wrap of ticks and indices",
            "1.4 8.2 9.3",
            CLEAN_NO_TICKS,
            config={"first_tick": 4294967295 - 41000, "first_index": 4294967295 - 4100},
        ),
    ]


CLEAN_NO_TICKS = [
    at(10, has=["ev 1 4294926295 boot 1 1"]),
    ask(10, HELLO, "ok 3221225472 hello 1 500"),
    at(10, renew=True),
    ask(1100, f"reset {{n}} {SESSION} 00100000 0", "ok 1 reset 00100000"),
    ask(2100, ARM, "ok 2 arm 1"),
    *press(2200),
    ask(10000, SEG + "20000 30000 4000", "ok 3 seg 1 1"),
    at(40000, has=["ev * * energised 1 0"], at={"state": 4, "v": 20000}),
    at(48000, at={"state": 4, "latched": False}),
    ask(48000, "cut 1 0", "ev * 6999 cut 1 1", "ok 1 cut"),
]


def scenario_files() -> dict[str, dict[str, Any]]:
    """Return the files' contents by name."""
    groups = {
        "session": _session,
        "arming": _arming,
        "setpoints": _setpoints,
        "stops": _stops,
        "lease": _lease,
        "arc": _arc,
        "rules": _rules,
        "latch": _latch,
    }
    return {
        f"scenarios-{name}.json": {"title": f"scenarios: {name}", "source": "", "cases": make()}
        for name, make in groups.items()
    }
