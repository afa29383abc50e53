"""``hvhost set``: set-points of an energised direct run."""

from hvhost.cli import exits
from hvhost.cli.talk import Bench, parser_of
from hvhost.words.quantities import Dimension, format_quantity, parse_quantity

ABOUT = "Heads for a voltage and a current limit, at the bench's slew or a gentler one, from wherever the output is."


def run(argv: list[str]) -> int:
    """Send the set-points."""
    parser = parser_of("set", ABOUT)
    parser.add_argument("volts", metavar="VOLTAGE", help="such as '5 kV'")
    parser.add_argument("amps", metavar="CURRENT", help="such as '1 mA'")
    parser.add_argument("--slew", default="", metavar="RATE", help="such as '500 V/s'")
    options = parser.parse_args(argv)
    params = {"volts": parse_quantity(options.volts, Dimension.VOLT),
              "amps": parse_quantity(options.amps, Dimension.AMP)}
    if options.slew:
        params["slew"] = parse_quantity(options.slew, Dimension.VOLT_PER_SECOND)
    with Bench(options) as bench:
        bench.take_seat()
        done = bench.call("set", **params)
    volts, amps = format_quantity(done["volts"], Dimension.VOLT), format_quantity(done["amps"], Dimension.AMP)
    print(f"heading for {volts}, limit {amps}, at {format_quantity(done['slew'], Dimension.VOLT_PER_SECOND)}")
    return exits.PASSED
