"""A plant on the table, driven by hand: used by the tests of its parts."""

from dataclasses import replace

from hvhost.standin.faults import FaultBook
from hvhost.standin.params import PlantParams, demo
from hvhost.standin.plant import Plant

MS = 1e-3


def tough(**supply: float) -> PlantParams:
    """The demo plant with a specimen that never breaks down and without noise or ripple."""
    params = demo()
    quiet = replace(params.chain.v_adc, noise_lsb=0.0)
    return replace(params, specimen=replace(params.specimen, strength_v=1e9),
                   supply=replace(params.supply, ripple_v=0.0, ripple_v_per_a=0.0, **supply),
                   chain=replace(params.chain, v_adc=quiet, i_adc=quiet))


def fragile(volts: float, **specimen: float) -> PlantParams:
    """The demo plant whose specimen breaks down near ``volts``."""
    params = demo()
    return replace(params, specimen=replace(params.specimen, strength_v=volts, strength_shape=200.0, **specimen))


def live(params: PlantParams | None = None, seed: int = 1, *faults: str) -> Plant:
    """A plant with its relay closed and its output stage released, set-points zero."""
    plant = Plant(params or tough(), seed, FaultBook(faults))
    plant.drive(inhibit=True, clear=True, relay=True)
    plant.advance(20 * MS, 0.0, 0.0)
    plant.drive(inhibit=False, clear=False, relay=True)
    plant.advance(1 * MS, 0.0, 0.0)
    plant.events.clear()
    return plant


def run(plant: Plant, seconds: float, volts: float, amps: float = 4e-3, dt_s: float = MS) -> None:
    """Hold these set-points for so long, in steps of ``dt_s``."""
    supply = plant.params.supply
    v_cmd = volts / supply.v_full * supply.program_full_v
    i_cmd = amps / supply.i_full * supply.program_full_v
    for _ in range(round(seconds / dt_s)):
        plant.advance(dt_s, v_cmd, i_cmd)


def cut(plant: Plant) -> None:
    """Inhibit, clear, relay off: what a cut drives."""
    plant.drive(inhibit=True, clear=True, relay=False)


def kinds(plant: Plant) -> list[str]:
    """The kinds of the events so far."""
    return [event.kind for event in plant.events]
