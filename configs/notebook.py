# %% [markdown]
# # A bench from a notebook
#
# Cells for an editor that knows `# %%`; as a plain script the file does the same from top to bottom.
# Nothing here arms the bench: that is `hvhost arm` in a terminal, then the press outside the danger zone.
# Software is never the safety device.

# %%
import numpy as np

from hvhost.client import connect

bench = connect()  # the one daemon that runs here; connect("demo") names a bench
now = bench.status()
print(f"{now.bench}: link {now.link}, {now.permission}, voltage {now.voltage}, control: {now.seat or 'nobody'}")

# %% [markdown]
# ## Prepare a direct run
# Set-points by hand under the bench file's limits.
# A plan instead: `bench.run("withstand.plan.yaml", "my.sheet.yaml")`.

# %%
prepared = bench.direct("NB-1", operator="notebook", reason="trial of the notebook")
print(f"run {prepared.run}, up to {prepared.volts_highest / 1e3:g} kV.  Now in a terminal: hvhost arm")
bench.wait_energised(timeout_s=120)

# %% [markdown]
# ## Climb in steps and look at the current
# Means over 100 samples, with the least and the greatest value of each, so that no peak is hidden.

# %%
steps = []
try:
    for volts in (1e3, 2e3, 3e3):
        bench.set(volts=volts, amps=1e-3, slew=1e3)
        bench.wait_until(lambda s, v=volts: s.reading is not None and abs((s.reading.volts or 0.0) - v) < 0.02 * v, 30)
        blocks = list(bench.readings(every=100, seconds=1.0))
        amps = np.concatenate([block.amps for block in blocks])
        steps.append((volts, float(amps.mean()), float(max(block.amps_max.max() for block in blocks))))
        if blocks[-1].dropped:
            print(f"{blocks[-1].dropped} samples were not taken in time")
finally:
    bench.lower()  # ramps to zero, then cuts; bench.cut() cuts at once.  Both work from any thread, without control

for volts, mean, highest in steps:
    print(f"{volts / 1e3:4.1f} kV  {mean * 1e6:8.3f} µA  at most {highest * 1e6:8.3f} µA")

# %% [markdown]
# ## The record
# Arrays with units in their names and the output's sign; it is complete when the run is closed.

# %%
bench.wait_until(lambda s: s.verdict_text != "", 120)
record = bench.record(prepared.run)
live = record["state"] == "energised"
highest = np.abs(record["voltage_kV"][live]).max()
print(f"{record.summary.outcome}: {live.sum()} samples energised, highest {highest:.3f} kV")
for run in bench.runs("highest > 0.5 kV and opened >= 2026-01-01"):
    print(run.run, run.specimen, run.outcome, run.verdict)
bench.close()
