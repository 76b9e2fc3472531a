"""Solves the element lists of networks.json by nodal analysis, and compares or rewrites.

    python3 networks.py            compares with networks.json, exit code 1 on a difference
    python3 networks.py --write    rewrites the responses from the element lists

Kirchhoff's current law with complex admittances at every node, solved with
numpy.linalg.solve; no chain matrix is used. H is the voltage at `out` with 1 V at
`in`; zout_re is the real part of the voltage at `out` with 1 A into it and `in` on
ground.
"""

import json
import pathlib
import sys

import numpy as np

FILE = pathlib.Path(__file__).with_name("networks.json")


def admittance(kind, value, omega):
    if kind == "R":
        return 1.0 / value
    if kind == "C":
        return 1j * omega * value
    return 1.0 / (1j * omega * value)


def solve(elements, frequency_hz):
    """Transfer and output impedance at one frequency."""
    omega = 2 * np.pi * frequency_hz
    free = sorted({node for _, a, b, _ in elements for node in (a, b)} - {"0", "in"})
    column = {node: index for index, node in enumerate(free)}
    matrix = np.zeros((len(free), len(free)), dtype=complex)
    right = np.zeros((len(free), 2), dtype=complex)
    for kind, a, b, value in elements:
        y = admittance(kind, value, omega)
        for here, there in ((a, b), (b, a)):
            if here not in column:
                continue
            matrix[column[here], column[here]] += y
            if there in column:
                matrix[column[here], column[there]] -= y
            elif there == "in":
                right[column[here], 0] += y
    right[column["out"], 1] = 1.0
    voltages = np.linalg.solve(matrix, right)
    return voltages[column["out"]]


def main():
    data = json.loads(FILE.read_text())
    worst = 0.0
    for name, network in data["networks"].items():
        solved = np.array([solve(network["elements"], f) for f in network["frequency_hz"]])
        h, zout = solved[:, 0], solved[:, 1].real
        stored = np.array(network["h_re"]) + 1j * np.array(network["h_im"])
        stored_zout = np.array(network["zout_re"])
        # 1 is the difference that the tests allow.
        off = max(
            np.max(np.abs(h - stored) / (1e-9 * np.abs(stored) + 1e-12)),
            np.max(np.abs(zout - stored_zout) / (1e-9 * stored_zout)),
        )
        worst = max(worst, off)
        print(f"{name}: {len(h)} points, off by {off:.2g} of what is allowed")
        network["h_re"], network["h_im"] = h.real.tolist(), h.imag.tolist()
        network["zout_re"] = zout.tolist()
    if "--write" in sys.argv[1:]:
        FILE.write_text(json.dumps(data))
    sys.exit(worst > 1.0)


if __name__ == "__main__":
    main()
