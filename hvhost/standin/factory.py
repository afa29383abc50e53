"""Settings as commissioning would have written them, one table per bench: a board fresh from the bench.

They are the codes of the two example bench files; a stand-in knows codes only, so they stand here as such.
"""

from hvhost.wire.settings import Settings
from hvhost.words.errors import UsageFault

_DEMO = {
    "vmax": 62913, "imax": 65535, "vslew": 13107, "islew": 655350, "vfull": 25000, "ifull": 4000, "polarity": 1,
    "vmap": 32767, "vzero": 0, "imap": 13107, "izero": 0, "downslew": 13107, "lowermax": 10000, "warn": 3000,
    "bleed": 2000, "bleeds": 8, "zeroband": 66, "longest": 14400, "leasemin": 100, "leasemax": 2000, "oc": 16383,
    "ocl": 13762, "oclms": 500, "ov": 32504, "env": 1310, "drop": 1310, "span": 4, "delay": 11, "persist": 2,
    "missms": 200, "arccount": 50, "arcrest": 500, "arcwindow": 60000, "arctotal": 500, "restrike": 20,
    "fitted": 32639,
}
_SMALL = {
    "vmax": 3931, "imax": 3685, "vslew": 1638, "islew": 40950, "vfull": 5000, "ifull": 20000, "polarity": -1,
    "vmap": 65405, "vzero": 0, "imap": 65536, "izero": 0, "downslew": 1638, "lowermax": 5000, "warn": 3000,
    "bleed": 1500, "bleeds": 6, "zeroband": 33, "longest": 3600, "leasemin": 100, "leasemax": 2000, "oc": 3992,
    "ocl": 3787, "oclms": 500, "ov": 4045, "env": 326, "drop": 326, "span": 4, "delay": 11, "persist": 2,
    "missms": 200, "arccount": 10, "arcrest": 500, "arcwindow": 60000, "arctotal": 100, "restrike": 20,
    "fitted": 31997,
}
_TABLES = {"demo": _DEMO, "gap": _DEMO, "small": _SMALL}


def factory_settings(profile: str) -> Settings:
    """Return the settings of a commissioned board of this profile."""
    if profile not in _TABLES:
        raise UsageFault(f"one of {', '.join(_TABLES)}", repr(profile), "profile")
    return Settings.of(_TABLES[profile])
