"""Make the curves of the Osprey 450 as if they had been digitised from a printed data sheet.

The Osprey 450 is invented: no real part stands behind it. Each curve is a formula whose numbers are typical
of a 1200 V trench IGBT half-bridge of 450 A, plus the scatter of a hand that clicks along a drawing. The
files are as another digitiser writes them: decimal commas, semicolons, the voltage first where the drawing
has it along the bottom, and points from right to left in some.

Run ``python make_curves.py [FOLDER]``: it writes the CSV files beside itself or into FOLDER.
Needs NumPy only. The seed is fixed, so the files are always the same.
"""

import sys
from pathlib import Path

import numpy as np

SEED = 450
SCATTER = 0.0015  # of the length of each axis

#: On-state voltage: offset [V], knee [V/sqrt(A)], slope [ohm]; the switch with 15 V at the gate.
SWITCH = {25: (0.75, 0.0386, 0.407e-3), 125: (0.59, 0.0421, 1.11e-3), 150: (0.55, 0.0430, 1.30e-3)}
DIODE = {25: (0.75, 0.0340, 0.55e-3), 150: (0.50, 0.0370, 0.80e-3)}
#: Energies in mJ at 600 V, by current.
E_ON_MJ = {25: lambda i: 0.030 * i + 4.2e-5 * i**2, 150: lambda i: 0.045 * i + 6.3e-5 * i**2}
E_OFF_MJ = {150: lambda i: 55.0 * (i / 450.0) ** 0.95}
E_RR_MJ = {25: lambda i: 24.0 * -np.expm1(-i / 250.0), 150: lambda i: 50.3 * -np.expm1(-i / 250.0)}
#: Foster branches that the impedance of a switch is drawn from: 0.066 K/W.
R_K_PER_W, TAU_S = (0.004, 0.017, 0.029, 0.016), (0.8e-3, 14e-3, 60e-3, 0.35)


def on_state_v(i, offset_v, knee, r_ohm):
    return offset_v + knee * np.sqrt(i) + r_ohm * i


def clicked(rng, f, x0, x1, n, *numbers):
    """Points along y = f(x, numbers), a little beside it, one of them twice."""
    x = np.linspace(x0, x1, n) + 0.3 * (x1 - x0) / n * rng.uniform(-1, 1, n)
    x = np.clip(x, x0, x1)
    again = int(rng.integers(3, n - 3))
    x = np.insert(x, again, x[again])
    y = f(x, *numbers)
    return np.maximum(x + SCATTER * x1 * rng.uniform(-0.5, 0.5, x.size), 0.0), y + SCATTER * y.max() * rng.uniform(-1, 1, y.size)


def write(folder, name, header, first, second, digits):
    lines = ["# Osprey 450: invented, digitised from a drawing that does not exist", header]
    lines += [f"{a:.{digits[0]}f};{b:.{digits[1]}f}".replace(".", ",") for a, b in zip(first, second)]
    (folder / name).write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


def main(folder):
    rng = np.random.default_rng(SEED)
    for t, numbers in SWITCH.items():
        i, v = clicked(rng, on_state_v, 2.0, 950.0, 44, *numbers)
        write(folder, f"output_{t}c.csv", "V_CE (V);I_C (A)", v[::-1], i[::-1], (4, 1))
    for t, numbers in DIODE.items():
        i, v = clicked(rng, on_state_v, 2.0, 950.0, 44, *numbers)
        write(folder, f"forward_{t}c.csv", "V_F (mV);I_F (A)", 1e3 * v, i, (1, 1))
    for name, curves in (("eon", E_ON_MJ), ("eoff", E_OFF_MJ), ("erec", E_RR_MJ)):
        for t, f in curves.items():
            write(folder, f"{name}_{t}c.csv", "I_C (A);E (mJ)", *clicked(rng, f, 0.0, 950.0, 36), (1, 3))
    # over the gate resistor, at 450 A, 600 V, 150 degC; 1.5 ohm is the one of the energy curves
    on, off, rr = E_ON_MJ[150](450.0), E_OFF_MJ[150](450.0), E_RR_MJ[150](450.0)
    write(folder, "eon_rg.csv", "R_G (ohm);E (mJ)", *clicked(rng, lambda r: on * (0.80 + 0.133 * r), 1.0, 15.0, 16), (3, 3))
    write(folder, "eoff_rg.csv", "R_G (ohm);E (mJ)", *clicked(rng, lambda r: off * (0.96 + 0.027 * r), 1.0, 15.0, 16), (3, 3))
    write(folder, "erec_rg.csv", "R_G (ohm);E (mJ)", *clicked(rng, lambda r: rr * 1.12 / (1.0 + 0.08 * r), 1.0, 15.0, 16), (3, 3))
    t = np.geomspace(1e-4, 4.0, 48) * np.exp(rng.uniform(-0.05, 0.05, 48))
    z = sum(r * -np.expm1(-t / tau) for r, tau in zip(R_K_PER_W, TAU_S)) * np.exp(rng.uniform(-0.005, 0.005, 48))
    lines = ["# Osprey 450: invented, digitised from a drawing that does not exist", "t (s);Z_th (K/W)"]
    lines += [f"{a:.5g};{b:.5g}".replace(".", ",") for a, b in zip(t, z)]
    (folder / "zth_igbt.csv").write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
