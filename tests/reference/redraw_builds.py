"""Builds of any plan, drawn again from plan.yaml alone, by chain matrices in NumPy (and PyYAML).

Usage: python3 redraw_builds.py PLAN.yaml [BUILDS] [index of an alternative]

Deviations are uniform within the tolerances, temperature uniform over the brief's range,
values hold at 20 degrees Celsius. Each trim, in its order and at 20 degrees, sets its part
to the value of its range at which the output at its frequency is least, and misses that by
residue (uniform) times the planned value. A build meets the brief when every order loses its
target over the whole design spread, and no keep band loses or gains more than allowed
outside the guards.
"""

import sys

import numpy as np
import yaml

plan = yaml.safe_load(open(sys.argv[1]))
count = int(sys.argv[2]) if len(sys.argv) > 2 else 4000
design = plan["alternatives"][int(sys.argv[3])] if len(sys.argv) > 3 else plan
brief = plan["brief"]
rng = np.random.default_rng(7)
parts = {part["ref"]: part for part in design["parts"]}


def number(value):
    return float(value)


def impedance(part, value, r, w):
    if part["kind"] in ("resistor", "trimmer"):
        return value + 0 * w
    if part["kind"] == "capacitor":
        return r + 1 / (1j * w * value)
    coil = r + 1j * w * value
    return coil / (1 + 1j * w * number(part["self_capacitance_f"]) * coil)


def branch(tree, z):
    if isinstance(tree, str):
        return z[tree]
    if "series" in tree:
        return sum(branch(one, z) for one in tree["series"])
    return 1 / sum(1 / branch(one, z) for one in tree["parallel"])


def chain(stages, z):
    a, b, c, d = 1, 0, 0, 1
    for stage in stages:
        if "beside" in stage:
            ys = []
            for leg in stage["beside"]:
                la, lb, lc, ld = chain(leg, z)
                det = la * ld - lb * lc
                ys.append(np.array([ld / lb, -det / lb, -1 / lb, la / lb]))
            y11, y12, y21, y22 = sum(ys)
            m = (-y22 / y21, -1 / y21, -(y11 * y22 - y12 * y21) / y21, -y11 / y21)
        elif "series" in stage:
            m = (1, branch(stage["series"], z), 0, 1)
        else:
            m = (1, 0, 1 / branch(stage["shunt"], z), 1)
        a, b, c, d = a * m[0] + b * m[2], a * m[1] + b * m[3], c * m[0] + d * m[2], c * m[1] + d * m[3]
    return a, b, c, d


def loss_db(values, resistances, hz):
    w = 2 * np.pi * np.asarray(hz, float)[None, :]
    z = {ref: impedance(part, values[ref][:, None], resistances[ref][:, None], w) for ref, part in parts.items()}
    a, b, c, d = chain([stage for section in design["network"] for stage in section["stages"]], z)
    zs = number(plan["source"]["resistance_ohm"]) + 1j * w * number(plan["source"]["inductance_h"])
    yl = 1 / number(plan["load"]["resistance_ohm"]) + 1j * w * number(plan["load"]["capacitance_f"])
    return 20 * np.log10(np.abs((a + b * yl + zs * (c + d * yl)) / (1 + zs * yl)))


def nominal(part):
    return number(part["value_si"] if part.get("setting_ohm") is None else part["setting_ohm"])


values = {}
for ref, part in parts.items():
    values[ref] = nominal(part) * (1 + number(part["tolerance_pct"]) / 100 * (2 * rng.random(count) - 1))
resistances = {ref: np.full(count, number(part["series_resistance_ohm"])) for ref, part in parts.items()}
kelvin = number(brief["temperature_from_c"]) - 20 + rng.random(count) * (
    number(brief["temperature_to_c"]) - number(brief["temperature_from_c"])
)
for trim in design["trims"]:
    ref = trim["part"]
    planned = nominal(parts[ref])
    low = np.full(count, number(trim["from_si"]))
    high = np.full(count, number(trim["to_si"]))
    low = np.maximum(low, 1e-6 * high)
    for _ in range(5):
        grid = np.linspace(0, 1, 33)
        tried = low[:, None] + (high - low)[:, None] * grid[None, :]
        losses = []
        for k in range(len(grid)):
            values[ref] = tried[:, k]
            losses.append(loss_db(values, resistances, [trim["frequency_hz"]])[:, 0])
        best = np.argmax(np.array(losses), axis=0)
        rows = np.arange(count)
        step = (high - low) / 32
        middle = tried[rows, best]
        low, high = np.maximum(low, middle - step), np.minimum(high, middle + step)
    miss = number(trim["residue"]) * planned * (2 * rng.random(count) - 1)
    values[ref] = np.clip(middle + miss, number(trim["from_si"]), number(trim["to_si"]))
for ref, part in parts.items():
    values[ref] = values[ref] * (1 + number(part["drift_per_k"]) * kelvin)
    resistances[ref] = resistances[ref] * (1 + number(part["series_resistance_drift_per_k"]) * kelvin)

meets = np.ones(count, bool)
spread = number(plan["design_spread_hz"])
centre = number(plan["centre_hz"])
lines = [entry["order"] * centre for entry in design["predicted"] if entry["target_db"] is not None]
for entry in design["predicted"]:
    if entry["target_db"] is None:
        continue
    k = entry["order"]
    loss = loss_db(values, resistances, k * (centre + spread * np.linspace(-1, 1, 9))).min(axis=1)
    meets &= loss >= number(entry["target_db"])
    print(f"order {k}: {np.percentile(loss, 5):.2f} dB in 95 %, plan says {number(entry['reduction_worst_db']):.2f}")
for band in design["keep"]:
    start, stop = number(band["from_hz"]), number(band["to_hz"])
    hz = np.linspace(start, stop, 120) if start == 0 else np.geomspace(start, stop, 400)
    hz = np.maximum(hz, 1e-3)
    hz = hz[[all(abs(f - line) > number(brief["guard_hz"]) for line in lines) for f in hz]]
    loss = np.abs(loss_db(values, resistances, hz)).max(axis=1)
    meets &= loss <= number(band["allowed_db"])
    print(f"band: {np.percentile(loss, 95):.3f} dB in 95 %, plan says {abs(number(band['loss_worst_db'])):.3f}")
share = meets.mean()
said = number(design["builds"]["meeting_pct"]) / 100
se = np.sqrt(share * (1 - share) / count + said * (1 - said) / design["builds"]["count"])
print(f"{100 * share:.1f} % of {count} builds meet the brief, plan says {100 * said:.1f} %: {(share - said) / max(se, 1e-9):+.1f} standard errors")
