"""Faulty bench files: for each file every line, key, expected and found that must be told, all in one go.

A row is (line, grade, key, words of expected, words of found[, nearest right text]); the files lie in
``tests/faulty/bench``, one or several kinds of fault each, and each opens with what is wrong with it.
"""

from hvhost.words.findings import Grade

REFUSE, REASON, NOTE = Grade.REFUSE, Grade.REASON, Grade.NOTE

Row = tuple[int, Grade, str, str, str] | tuple[int, Grade, str, str, str, str]

TABLE: dict[str, tuple[Row, ...]] = {
    "a-list.yaml": (
        (1, REFUSE, "file", "a block of keys, 'key: value'", "a list"),
    ),
    "a-sentence.yaml": (
        (1, REFUSE, "file", "a block of keys, 'key: value'", "'The bench is as it was last year'"),
    ),
    "above-the-supply.yaml": (
        (23, REFUSE, "ceilings.voltage", "at most the supply's 25 kV", "30 kV"),
        (24, REFUSE, "ceilings.current", "at most the supply's 4 mA", "6 mA"),
        (39, REFUSE, "voltage.program.converter", "a range that reaches the ceiling 30 kV", "25 kV at its last code"),
        (59, REFUSE, "current.program.converter", "a range that reaches the ceiling 6 mA", "4 mA at its last code"),
        (113, REFUSE, "limits.overvoltage", "above the ceiling 30 kV", "24.8 kV"),
    ),
    "anchors-and-aliases.yaml": (
        (10, REFUSE, "anchor", "a plain value", "'&supply'"),
        (25, REFUSE, "anchor", "a plain value", "'&fast'"),
        (29, REFUSE, "alias", "the value written out", "'*fast'"),
    ),
    "arc-bounds.yaml": (
        (126, REFUSE, "arcs.window", "at least the rest, 500 ms", "100 ms"),
        (127, REFUSE, "arcs.total", "at least the count, 50", "10"),
        (128, REFUSE, "arcs.restrike", "at most the rest, 500 ms", "800 ms"),
    ),
    "archive.yaml": (
        (130, REFUSE, "archive.results", "a whole path such as '/srv/results'", "'results'"),
        (132, REFUSE, "archive.separator", "another character than the decimal mark", "'comma'"),
        (133, REFUSE, "archive.command", "a program by its whole path", "'import-result'"),
        (134, REFUSE, "archive.compress", "one of command, command_limit", "'compress'"),
    ),
    "bad-indentation.yaml": (
        (86, REFUSE, "form", "one 'key: value' on a line,", "a second ': ', or a key indented too far"),
    ),
    "bleed.yaml": (
        (102, REFUSE, "bleed.time", "at least resistance times output and", "500 ms"),
        (103, REFUSE, "bleed.times", "at least 6: from 24 kV to 60 V", "5, which leaves 161.71 V"),
        (105, REFUSE, "bleed.zero_band", "at least the monitor's zero uncertainty", "5 V"),
    ),
    "collapse-too-large.yaml": (
        (115, REFUSE, "limits.collapse", "less than the ceiling 24 kV", "30 kV"),
    ),
    "colon-in-text.yaml": (
        (3, REFUSE, "form", "one 'key: value' on a line,", "a second ': ', or a key indented too far"),
    ),
    "control-character.yaml": (
        (3, REFUSE, "text", "visible characters", "control character U+0007"),
    ),
    "daemon.yaml": (
        (130, REFUSE, "daemon.disk_floor", "a size such as '2 GB'", "'2 Gb'", "2 GB"),
        (131, REFUSE, "daemon.disk_flor", "one of disk_floor", "'disk_flor'", "disk_floor"),
        (132, REFUSE, "daemon.realtime", "one of disk_floor", "'realtime'"),
    ),
    "decimal-comma-and-grouping.yaml": (
        (21, REFUSE, "cable.resistor", "a resistance such as '2.2 kΩ'", "'20,000 Ω'"),
        (113, REFUSE, "limits.overvoltage", "a voltage such as '25 kV'", "'24,8 kV'", "24.8 kV"),
        (114, REFUSE, "limits.envelope", "a voltage such as '25 kV'", "'1_000 V'", "1000 V"),
        (115, REFUSE, "limits.collapse", "a voltage such as '25 kV'", "'1 000 V'", "1000 V"),
        (120, REFUSE, "limits.deviation", "a voltage such as '25 kV'", "'2'500 V'", "2500 V"),
    ),
    "deep-nesting.yaml": (
        (3, REFUSE, "nesting", "at most 24 blocks inside each other", "more"),
    ),
    "directive.yaml": (
        (1, REFUSE, "directive", "no line that begins with '%'", "a directive"),
    ),
    "duplicate-keys.yaml": (
        (24, REFUSE, "voltage", "each key once", "'voltage' again (first on line 23)"),
        (33, REFUSE, "warning", "each key once", "'warning' again (first on line 32)"),
        (88, REFUSE, "hard_wired", "each key once", "'hard_wired' again (first on line 87)"),
    ),
    "empty-values.yaml": (
        (3, REFUSE, "title", "one line of text, at most", "nothing"),
        (11, REFUSE, "supply.voltage", "a voltage such as '25 kV'", "nothing"),
        (37, REFUSE, "voltage.program", "a block of keys", "nothing"),
        (75, REFUSE, "cut_path.means", "a list", "nothing"),
        (78, REFUSE, "interlock", "a block of keys", "nothing"),
    ),
    "empty.yaml": (
        (0, REFUSE, "file", "a block of keys, 'key: value'", "an empty file"),
    ),
    "ground-none-with-resistor.yaml": (
        (98, REASON, "ground.device", "stick or switch", "none; 432 mJ are stored at the ceiling"),
        (98, REFUSE, "ground.device", "stick or switch where a resistor", "none"),
    ),
    "ground-too-weak.yaml": (
        (99, REFUSE, "ground.resistor", "a discharge below the touch threshold", "44.936 s"),
        (100, REFUSE, "ground.energy", "at least the 432 mJ that", "100 mJ"),
    ),
    "ground-without-resistor.yaml": (
        (97, REFUSE, "ground.energy", "the energy that the resistor may", "nothing"),
        (97, REFUSE, "ground.resistor", "the discharge resistor of the grounding", "nothing"),
    ),
    "instrument-network.yaml": (
        (130, NOTE, "instrument.listen", "", "'192.0.2.20:5025', open to 192.0.2.0/28"),
    ),
    "instrument-open-to-all.yaml": (
        (130, REFUSE, "instrument.listen", "an address of this machine alone, or the key 'allow'", "'0.0.0.0:5025'"),
    ),
    "instrument-places.yaml": (
        (130, REFUSE, "instrument.listen", "an address of this machine and a port", "'localhost:5025'"),
        (132, REFUSE, "instrument.allow.1", "an address or network such as", "'bench-pc'"),
        (133, REFUSE, "instrument.allow.2", "a network no wider than /16", "'10.0.0.0/8'"),
        (134, REFUSE, "instrument.allow.3", "an address or network such as", "'192.0.2.7/24'"),
    ),
    "instrument-port.yaml": (
        (130, REFUSE, "instrument.listen", "a port from 1 to 65535", "70000"),
        (131, REFUSE, "instrument.password", "one of allow, listen", "'password'"),
    ),
    "interlock-by-software.yaml": (
        (85, REFUSE, "interlock.hard_wired", "yes, above the touch threshold", "no"),
        (87, REFUSE, "interlock.emergency_hard_wired", "yes, above the touch threshold", "no"),
        (90, REFUSE, "danger_signal.fed_from", "power contact, above the touch threshold", "other"),
    ),
    "key-is-a-list.yaml": (
        (32, REFUSE, "key", "a word", "a list"),
    ),
    "lease-out-of-order.yaml": (
        (33, REFUSE, "lease.time", "200 ms to 2 s", "150 ms"),
    ),
    "letter-for-point.yaml": (
        (21, REFUSE, "cable.resistor", "a resistance such as '2.2 kΩ'", "'4K7'", "4.7 kΩ"),
        (99, REFUSE, "ground.resistor", "a resistance such as '2.2 kΩ'", "'1M0'", "1.0 MΩ"),
        (104, REFUSE, "bleed.resistance", "a resistance such as '2.2 kΩ'", "'R47'", "0.47 Ω"),
    ),
    "limits-out-of-order.yaml": (
        (111, REFUSE, "limits.overcurrent_level", "at most the overcurrent 5 mA", "6 mA"),
        (113, REFUSE, "limits.overvoltage", "above the ceiling 24 kV", "23 kV"),
        (115, REFUSE, "limits.collapse", "more than the ripple from top", "8 V"),
        (118, REFUSE, "limits.missing_after", "at least 3 samples, 3 ms", "2 ms"),
    ),
    "look-alike-characters.yaml": (
        (11, REFUSE, "supply.voltage", "a voltage such as '25 kV'", "'\uff12\uff15 kV' (with U+FF12, U+FF15)", "25 kV"),
        (12, REFUSE, "supply.current", "a current such as '4 mA'", "'\u0664 mA' (with U+0664)"),
        (23, REFUSE, "ceilings.voltage", "a voltage such as '25 kV'", "'24 \u33b8' (with U+33B8)", "24 kV"),
        (29, REFUSE, "lower.slew", "a voltage slew such as '500 V/s'", "'5?kV/s' (with U+00A0)", "5 kV/s"),
        (51, REFUSE, "voltage.monitor.zero_code", "a number such as '1.25'", "'\u22123' (with U+2212)", "-3"),
    ),
    "many-at-once.yaml": (
        (4, REFUSE, "attended", "yes or no", "'perhaps'"),
        (10, REFUSE, "folder", "each key once", "'folder' again (first on line 9)"),
        (12, REFUSE, "supply.voltage", "a voltage such as '25 kV'", "'25 KV'", "25 kV"),
        (30, REFUSE, "tag", "a plain value", "'!fast'"),
        (32, REFUSE, "warning", "at least 3 s", "'1 s'"),
        (75, REFUSE, "sampling.rate", "the key 'rate'", "nothing"),
        (76, REFUSE, "sampling.rat", "one of bandwidth, rate", "'rat'", "rate"),
        (86, REFUSE, "interlock.hard_wired", "yes, above the touch threshold", "no"),
        (101, REFUSE, "ground.energy", "at least the 432 mJ that", "1 mJ"),
        (104, REFUSE, "bleed.times", "at least 6: from 24 kV to 60 V", "5, which leaves 161.71 V"),
        (116, REFUSE, "limits.collapse", "a voltage such as '25 kV'", "'1 000 V'", "1000 V"),
    ),
    "mqtt.yaml": (
        (140, REFUSE, "mqtt.ca", "tls: yes", "tls: no"),
        (141, REFUSE, "mqtt.certificate", "key beside it", "none"),
        (141, REFUSE, "mqtt.certificate", "tls: yes", "tls: no"),
        (142, REFUSE, "mqtt.password", "a known key", "'password'", "password_file"),
        (143, REFUSE, "mqtt.password_file", "tls: yes, or a broker on this machine", "tls: no"),
        (143, REFUSE, "mqtt.password_file", "user beside it", "none"),
        (144, REFUSE, "mqtt.commands", "tls: yes, or a broker on this machine", "tls: no"),
        (145, REFUSE, "mqtt.root", "a topic level of small letters", "'Lab/1'"),
        (146, REFUSE, "mqtt.telemetry", "at least 100 ms", "'10 ms'"),
        (147, REFUSE, "mqtt.version", "5 or 3.1.1", "'4'"),
    ),
    "merge-key.yaml": (
        (29, REFUSE, "merge", "keys written out", "'<<'"),
    ),
    "missing-keys.yaml": (
        (2, REFUSE, "bleed", "the key 'bleed'", "nothing"),
        (2, REFUSE, "title", "the key 'title'", "nothing"),
        (9, REFUSE, "supply.current", "the key 'current'", "nothing"),
        (42, REFUSE, "voltage.monitor.powered_after_cut", "the key 'powered_after_cut'", "nothing"),
        (81, REFUSE, "interlock.hard_wired", "the key 'hard_wired'", "nothing"),
    ),
    "monitor-out-of-range.yaml": (
        (110, REFUSE, "limits.overcurrent", "at most 9.9997 mA, where the", "12 mA"),
        (113, REFUSE, "limits.overvoltage", "at most 24.999 kV, where the", "26 kV"),
    ),
    "monitor-sign.yaml": (
        (51, REFUSE, "voltage.monitor.zero_code", "codes on the monitor's side of zero",
         "none: negative signal, unsigned converter, zero"),
        (71, REFUSE, "current.monitor.zero_code", "codes on the monitor's side of zero",
         "none: negative signal, unsigned converter, zero"),
    ),
    "names-and-addresses.yaml": (
        (2, REFUSE, "bench", "a name of letters, digits, '.',", "'demo bench!'"),
        (6, REFUSE, "port.device", "a serial device such as '/dev/ttyACM0',", "'ttyACM0'"),
        (9, REFUSE, "runs.folder", "one line of text, at most", "nothing"),
        (79, REFUSE, "calibration.valid_until", "a date such as '2027-03-31'", "'31.12.2027'"),
    ),
    "no-cut-means.yaml": (
        (81, REFUSE, "cut_path.means", "at least one of relay, inhibit,", "an empty list"),
        (124, REFUSE, "arcs.count", "0: an arc pause needs an", "50"),
    ),
    "no-such-day.yaml": (
        (79, REFUSE, "calibration.valid_until", "a date such as '2027-03-31'",
         "'2027-02-30', which the calendar does not"),
    ),
    "no-unit.yaml": (
        (11, REFUSE, "supply.voltage", "a voltage such as '25 kV'", "'25000'"),
        (31, REFUSE, "warning", "a duration such as '60 s'", "'3'"),
        (38, REFUSE, "voltage.program.bits", "a whole number from 8 to 16", "'16 bit'"),
        (119, REFUSE, "limits.follow", "a percentage such as '1 %'", "'0.5'"),
        (124, REFUSE, "arcs.count", "a whole number from 0 to 10000", "'50 arcs'"),
    ),
    "not-a-number.yaml": (
        (11, REFUSE, "supply.voltage", "a voltage such as '25 kV'", "'nan V'"),
        (12, REFUSE, "supply.current", "a current such as '4 mA'", "'inf A'"),
        (23, REFUSE, "ceilings.voltage", "a voltage such as '25 kV'", "'1e999 V'"),
        (24, REFUSE, "ceilings.current", "a current such as '4 mA'", "'-Infinity A'"),
        (115, REFUSE, "limits.collapse", "more than the ripple from top", "1e-93 µV"),
        (122, REFUSE, "limits.gap", "a duration such as '60 s'", "'nan'"),
    ),
    "not-proven.yaml": (
        (82, REASON, "cut_path.read_back", "relay", "no read-back: relay is not proven"),
    ),
    "not-utf8.yaml": (
        (21, REFUSE, "file", "text in UTF-8", "byte 0xEA"),
    ),
    "notes.yaml": (
        (30, NOTE, "lower.longest", "at least 4.8 s to reach", "2 s"),
        (54, NOTE, "voltage.monitor.measured_at", "a monitor at the specimen, powered", "measured at the supply"),
        (129, NOTE, "unattended", "nothing, with 'attended: yes'", "a block that is not used"),
    ),
    "only-comments.yaml": (
        (0, REFUSE, "file", "a block of keys, 'key: value'", "an empty file"),
    ),
    "out-of-range.yaml": (
        (7, REFUSE, "port.baud", "a whole number from 9600 to 4000000", "'300'"),
        (14, REFUSE, "supply.output_capacitance", "more than 0 F", "'0 nF'"),
        (38, REFUSE, "voltage.program.bits", "a whole number from 8 to 16", "'24'"),
        (52, REFUSE, "voltage.monitor.gain_uncertainty", "at most 100 %", "'150 %'"),
        (75, REFUSE, "sampling.rate", "at least 100 Hz", "'50 Hz'"),
        (103, REFUSE, "bleed.times", "a whole number from 1 to 100", "'0'"),
        (116, REFUSE, "limits.collapse_samples", "a whole number from 1 to 64", "'65'"),
        (117, REFUSE, "limits.persistence", "a whole number from 1 to 4", "'0'"),
        (128, REFUSE, "arcs.restrike", "at most 1 s", "'2 s'"),
    ),
    "program-out-of-range.yaml": (
        (39, REFUSE, "voltage.program.converter", "a range that reaches the ceiling 24 kV", "12.5 kV at its last code"),
        (59, REFUSE, "current.program.converter", "a range that reaches the ceiling 4 mA", "1 mA at its last code"),
    ),
    "programming-alone.yaml": (
        (81, REASON, "cut_path.means", "a relay or an inhibit", "programming alone"),
        (92, REFUSE, "danger_signal.dark_with_relay_open", "no: without a relay the signal burns", "yes"),
        (124, REFUSE, "arcs.count", "0: an arc pause needs an", "50"),
    ),
    "read-back-without-means.yaml": (
        (81, REFUSE, "cut_path.means", "each means once", "inhibit twice"),
        (82, REFUSE, "cut_path.read_back", "only means that are listed", "relay"),
        (82, REFUSE, "cut_path.read_back", "relay or inhibit: the others have", "clear"),
        (92, REFUSE, "danger_signal.dark_with_relay_open", "no: without a relay the signal burns", "yes"),
    ),
    "reasons.yaml": (
        (2, REASON, "calibration", "a certificate and its last day", "nothing"),
        (80, REASON, "cut_path.inhibits_without_mcu", "yes: the wiring inhibits without the", "no"),
        (83, REASON, "interlock.latches_open", "yes: closing the loop restores nothing", "no"),
        (85, REASON, "interlock.emergency_input", "yes: a second contact that the", "no"),
        (88, REASON, "danger_signal.input", "yes: the signal is seen lit", "no"),
        (91, REASON, "inputs.auxiliary_supplies", "yes: the driver's and converters' rails", "no"),
        (95, REASON, "ground.device", "stick or switch", "none; 432 mJ are stored at the ceiling"),
    ),
    "shapes.yaml": (
        (3, REFUSE, "title", "one line of text, at most", "a block of keys"),
        (5, REFUSE, "port", "a block of keys", "a list"),
        (8, REFUSE, "supply", "a block of keys", "'25 kV'"),
        (21, REFUSE, "warning", "a duration such as '60 s'", "a list"),
        (71, REFUSE, "cut_path.means", "a list", "'relay'"),
    ),
    "slow-channels.yaml": (
        (136, REFUSE, "slow_channels.2.name", "a name of its own", "'electrometer' again (as number 1)"),
        (137, REFUSE, "slow_channels.2.kind", "one of current, temperature, relative humidity,",
         "'temprature'", "temperature"),
        (138, REFUSE, "slow_channels.2.address", "a serial device such as '/dev/ttyUSB0',", "'192.0.2.7'"),
        (146, REFUSE, "slow_channels.3.every", "at least 100 ms", "'10 ms'"),
        (148, REFUSE, "slow_channels.4.name", "a name of its own", "'electrometer' again (as number 1)"),
    ),
    "slow-programming.yaml": (
        (17, REFUSE, "supply.programming_delay", "at most 64 samples, 64 ms", "100 ms, 101 samples"),
    ),
    "tab-in-indentation.yaml": (
        (24, REFUSE, "indentation", "spaces", "a tab"),
        (30, REFUSE, "indentation", "spaces", "a tab"),
    ),
    "tags.yaml": (
        (7, REFUSE, "tag", "a plain value", "'!!int'"),
        (11, REFUSE, "tag", "a plain value", "'!!str'"),
        (81, REFUSE, "tag", "a plain value", "'!path'"),
    ),
    "times-out-of-range.yaml": (
        (30, REFUSE, "lower.longest", "at most 60 s", "'90 s'"),
        (31, REFUSE, "warning", "at least 3 s", "'1 s'"),
        (33, REFUSE, "lease.time", "at most 2 s", "'3 s'"),
        (34, REFUSE, "lease.shortest", "at least 100 ms", "'50 ms'"),
        (35, REFUSE, "lease.longest", "at most 2 s", "'5 s'"),
    ),
    "touch-threshold-wet.yaml": (
        (103, REFUSE, "bleed.times", "at least 7: from 24 kV to 35 V", "5, which leaves 161.71 V"),
        (107, REFUSE, "touch.threshold", "at most 35 V where wet", "60 V"),
    ),
    "touch-threshold.yaml": (
        (107, REFUSE, "touch.threshold", "at most 60 V", "75 V"),
    ),
    "two-documents.yaml": (
        (129, REFUSE, "document", "one document in the file", "another one after '---'"),
    ),
    "unattended-blind.yaml": (
        (129, REASON, "unattended", "fire and over-temperature inputs", "no fire input and no over-temperature input"),
    ),
    "unattended-without-block.yaml": (
        (4, REFUSE, "attended", "the block 'unattended' with 'attended: no'", "nothing"),
    ),
    "unclosed-quote.yaml": (
        (3, REFUSE, "form", "a closing quote", "the end of the file"),
    ),
    "units-in-wrong-case.yaml": (
        (11, REFUSE, "supply.voltage", "a voltage such as '25 kV'", "'25 KV'", "25 kV"),
        (12, REFUSE, "supply.current", "a current such as '4 mA'", "'4 ma'", "4 mA"),
        (20, REFUSE, "cable.capacitance", "a capacitance such as '1.5 nF'", "'500 PF'", "500 pF"),
        (23, REFUSE, "ceilings.voltage", "a voltage such as '25 kV'", "'24 kv'", "24 kV"),
        (25, REFUSE, "ceilings.slew", "a voltage slew such as '500 V/s'", "'5 kV/S'", "5 kV/s"),
        (75, REFUSE, "sampling.rate", "a frequency such as '50 Hz'", "'1 Khz'", "1 kHz"),
    ),
    "unknown-keys.yaml": (
        (2, REFUSE, "bleed", "the key 'bleed'", "nothing"),
        (2, REFUSE, "title", "the key 'title'", "nothing"),
        (3, REFUSE, "titel", "a known key", "'titel'", "title"),
        (10, REFUSE, "supply.voltage", "the key 'voltage'", "nothing"),
        (11, REFUSE, "supply.volage", "one of current, output_capacitance, polarity, programming_delay,",
         "'volage'", "voltage"),
        (74, REFUSE, "sampling.rate", "the key 'rate'", "nothing"),
        (75, REFUSE, "sampling.sample_rate", "one of bandwidth, rate", "'sample_rate'"),
        (84, REFUSE, "interlock.latches_open", "the key 'latches_open'", "nothing"),
        (86, REFUSE, "interlock.latchs_open", "one of emergency_hard_wired, emergency_input, hard_wired, latches_open",
         "'latchs_open'", "latches_open"),
        (101, REFUSE, "bleeds", "a known key", "'bleeds'", "bleed"),
        (129, REFUSE, "colour", "a known key", "'colour'"),
    ),
    "wide-zero-band.yaml": (
        (105, REFUSE, "bleed.zero_band", "at most 5 % of the ceiling, 1.2 kV", "2 kV"),
    ),
    "words.yaml": (
        (4, REFUSE, "attended", "yes or no", "'maybe'"),
        (13, REFUSE, "supply.polarity", "positive or negative", "'postive'", "positive"),
        (50, REFUSE, "voltage.monitor.sign", "positive or negative", "'+'"),
        (54, REFUSE, "voltage.monitor.measured_at", "supply or specimen", "'Specimen'", "specimen"),
        (81, REFUSE, "cut_path.means.1", "one of relay, inhibit, clear, programming", "'relais'", "relay"),
        (90, REFUSE, "danger_signal.fed_from", "power contact or other", "'mcu'"),
        (98, REFUSE, "ground.device", "one of none, stick, switch", "'stik'", "stick"),
    ),
    "wrong-dimension.yaml": (
        (11, REFUSE, "supply.voltage", "a voltage such as '25 kV'", "'25 mA'"),
        (20, REFUSE, "cable.capacitance", "a capacitance such as '1.5 nF'", "'500 pV'"),
        (25, REFUSE, "ceilings.slew", "a voltage slew such as '500 V/s'", "'5 kV'", "5 kV/s"),
        (29, REFUSE, "lower.slew", "a voltage slew such as '500 V/s'", "'10 s'"),
        (100, REFUSE, "ground.energy", "an energy such as '350 mJ'", "'20 W'"),
        (102, REFUSE, "bleed.time", "a duration such as '60 s'", "'2 m'"),
        (104, REFUSE, "bleed.resistance", "a resistance such as '2.2 kΩ'", "'500 mF'"),
    ),
    "yaml-guesses.yaml": (
        (4, REFUSE, "attended", "yes or no", "'on'", "yes"),
        (27, REFUSE, "ceilings.longest_on", "a duration such as '60 s'", "'10:30'"),
        (38, REFUSE, "voltage.program.bits", "a whole number from 8 to 16", "'0x10'"),
        (75, REFUSE, "sampling.rate", "a frequency such as '50 Hz'", "'1e3'"),
        (86, REFUSE, "interlock.latches_open", "yes or no", "'true'", "yes"),
        (108, REFUSE, "touch.wet", "yes or no", "'~'"),
        (124, REFUSE, "arcs.count", "a whole number from 0 to 10000", "'012'", "12"),
    ),
}
