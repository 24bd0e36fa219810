"""Make two cooling curves of a Heron 300 switch as a thermal tester would record them: on a dry and on a greased cold plate.

The Heron 300 is invented: no real part stands behind it. Its switch, two chips of 1.5 cm2 side by side, is a stack of layers whose
heat widens by 45 degrees; together they are the 0.110 K/W of the module file. Below the case come the
interface, dry or greased, and a copper cold plate in water. The stack is cut into cells and solved exactly in time; the record
adds the ringing of the first microseconds after switching, noise and the steps of a digitiser.

Run ``python make_records.py [FOLDER]``: it writes the CSV files beside itself or into FOLDER.
Needs NumPy only. The seed is fixed, so the files are always the same.
"""

import sys
from pathlib import Path

import numpy as np

SEED = 300
POWER_W = 400.0
WATER_C = 25.0
CHIPS, CHIP_MM = 2, 12.25
#: Thickness [mm], conductivity [W/(m K)], heat capacity of a volume [J/(m3 K)], cells. From the chip down to the case.
MODULE = (
    (0.12, 102.0, 2330.0 * 750.0, 48),  # silicon, hot
    (0.10, 57.0, 7370.0 * 220.0, 8),  # solder
    (0.30, 394.0, 8930.0 * 385.0, 8),  # copper
    (0.635, 21.5, 3780.0 * 880.0, 24),  # alumina, hot
    (0.30, 394.0, 8930.0 * 385.0, 8),  # copper
    (0.20, 57.0, 7370.0 * 220.0, 8),  # solder
    (3.00, 394.0, 8930.0 * 385.0, 24),  # copper baseplate
)
#: Conductivity of 0.06 mm between case and cold plate [W/(m K)].
INTERFACES = {"dry": 0.5, "greased": 2.5}
PLATE = (20.0, 394.0, 8930.0 * 385.0, 40)
FILM_W_PER_M2_K = 20e3
NOISE_K, DIGIT_K = 0.04, 0.01
RINGING_K, RINGING_S = -6.0, 4e-6


def cells(layers, width_mm):
    """Resistances [K/W] and heat capacities [J/K] of all cells of one chip's column, and the width below [mm]."""
    r, c = [], []
    for thick, k, heat, count in layers:
        edge = width_mm + 2.0 * np.linspace(0.0, thick, count + 1)
        # integrals of dz/w^2 and w^2 dz with w = w0 + 2 z
        r.append(0.5 * (1.0 / edge[:-1] - 1.0 / edge[1:]) * 1e3 / k)
        c.append((edge[1:] ** 3 - edge[:-1] ** 3) / 6.0 * 1e-9 * heat)
        width_mm = edge[-1]
    return np.concatenate(r), np.concatenate(c), width_mm


def junction_to_case_k_per_w():
    """Of both chips in parallel: what an evaluation should find."""
    return cells(MODULE, CHIP_MM)[0].sum() / CHIPS


def rise_k(t_s, interface_w_per_m_k):
    """Rise of the chips ``t_s`` after the power is switched on."""
    layers = (*MODULE, (0.06, interface_w_per_m_k, 2.5e6, 6), PLATE)
    r, c, width = cells(layers, CHIP_MM)
    r = np.append(r, 1.0 / (FILM_W_PER_M2_K * width**2 * 1e-6)) / CHIPS
    c = c * CHIPS
    # capacities on the borders of the cells, half of each neighbour; the heated face is the first of them
    c = 0.5 * (np.append(c, 0.0) + np.append(0.0, c))
    g = 1.0 / r
    flow = np.diag(g + np.append(0.0, g[:-1])) - np.diag(g[:-1], 1) - np.diag(g[:-1], -1)
    rate, shape = np.linalg.eigh(flow / np.sqrt(np.outer(c, c)))
    return POWER_W * (shape[0] ** 2 / c[0] / rate * -np.expm1(-np.outer(t_s, rate))).sum(axis=1)


def main(folder):
    rng = np.random.default_rng(SEED)
    t = np.unique(np.round(np.geomspace(2e-6, 100.0, 1200), 7))
    for name, k in INTERFACES.items():
        hot = WATER_C + rise_k([1e9], k)[0]
        seen = hot - rise_k(t, k) + RINGING_K * np.exp(-t / RINGING_S) + NOISE_K * rng.standard_normal(t.size)
        what = f"# Heron 300, invented: one switch cooling from {POWER_W:g} W on a {name} cold plate, water of {WATER_C:g} degC"
        lines = [what, "t (s),T_vj (degC)"]
        lines += [f"{a:.7g},{DIGIT_K * round(v / DIGIT_K):.2f}" for a, v in zip(t, seen)]
        (folder / f"{name}.csv").write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
