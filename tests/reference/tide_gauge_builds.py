"""Builds of the tide gauge's plan, drawn again by nodal arithmetic in NumPy.

The parts are those of the plan for examples/tide-gauge.yaml: R1 105 ohm in the line,
C1 22 uF across, L1 10 H (300 ohm) with C2 820 nF side by side in the line, C3 15 uF
across. Tolerances, losses and drifts are those of examples/bench-stock.yaml; values
hold at 20 degrees Celsius, deviations and temperature (10 to 35) are uniform.

Prints: share of builds that meets the brief, loss up to 12 Hz that 95 % stay within,
and the reductions of orders 1 and 3 over the design spread that 95 % reach.
"""

import numpy as np

BUILDS = 20_000
rng = np.random.default_rng(0)
kept_hz = np.concatenate([[1e-3], np.linspace(0.5, 12, 24)])
line_hz = [49.8, 50.0, 50.2, 149.4, 150.0, 150.6]
f = np.concatenate([kept_hz, line_hz])[None, :]
w = 2 * np.pi * f

kelvin = (10 + 25 * rng.random(BUILDS) - 20)[:, None]


def within(tolerance):
    return (1 + tolerance * (2 * rng.random(BUILDS) - 1))[:, None]


def capacitor(farad, loss, drift):
    value = farad * within(0.05) * (1 + drift * kelvin)
    return 1 / (1j * w * value) + loss / (2 * np.pi * 50 * farad)


r1 = 105 * within(0.01) * (1 + 50e-6 * kelvin)
c1 = capacitor(22e-6, 0.005, 400e-6)
coil = 300 * (1 + 0.0039 * kelvin) + 1j * w * 10 * within(0.05) * (1 + 150e-6 * kelvin)
c2 = capacitor(0.82e-6, 0.0005, -250e-6)
c3 = capacitor(15e-6, 0.005, 400e-6)

load = 1 / 1e6 + 1j * w * 220e-12
tank = 1 / (1 / coil + 1 / c2)
end = 1 / (1 / c3 + load)
middle = 1 / (1 / c1 + 1 / (tank + end))
with_network = middle / (350 + r1 + middle) * end / (tank + end)
without = 1 / (1 + 350 * load)
loss_db = -20 * np.log10(np.abs(with_network / without))

kept = np.abs(loss_db[:, : len(kept_hz)]).max(axis=1)
order_1 = loss_db[:, -6:-3].min(axis=1)
order_3 = loss_db[:, -3:].min(axis=1)
meets = (kept <= 0.5) & (order_1 >= 40) & (order_3 >= 40)
print(f"{100 * meets.mean():.1f} % of {BUILDS} builds meet the brief")
print(f"loss {np.percentile(kept, 95):.2f} dB")
print(f"order 1: {np.percentile(order_1, 5):.1f} dB, order 3: {np.percentile(order_3, 5):.1f} dB")
