"""Make the curves of the Swift 400 as if they had been digitised from a printed data sheet.

The Swift 400 is invented: no real part stands behind it. Each curve is a formula whose numbers are typical
of a 1200 V silicon carbide six-pack of 400 A, plus the scatter of a hand that clicks along a drawing: about
0.2 % of the axes, a point clicked twice, a click that steps back.

Run ``python make_curves.py [FOLDER]``: it writes the CSV files beside itself or into FOLDER.
Needs NumPy only. The seed is fixed, so the files are always the same.
"""

import sys
from pathlib import Path

import numpy as np

SEED = 400
SCATTER = 0.0015  # of the length of each axis


def channel_v(i, r_ohm):
    """Drop of the channel: a resistance that rises a little with current; r_ohm at 400 A."""
    return r_ohm * i * (0.98 + 0.02 * (i / 400.0) ** 2)


def body_diode_v(i, v0_v):
    """Body diode with -4 V at the gate: a wide-gap junction and 2 milliohm."""
    return v0_v + 0.18 * np.log1p(i / 4.0) + 2.05e-3 * i


def reverse_v(i, r_ohm, v0_v):
    """Gate on, current from source to drain: the channel, and beside it the body diode once its knee is reached."""
    v = np.linspace(0.0, 6.0, 6001)
    diode_a = np.maximum(v - v0_v - 0.6, 0.0) / 4.0e-3
    return np.interp(i, v / (0.96 * r_ohm) + diode_a, v)


R_OHM = {25: 4.0e-3, 150: 7.0e-3, 175: 7.9e-3}
BODY_V = {25: 2.35, 150: 1.95, 175: 1.87}
#: Energies in mJ at 800 V, by current; the share at no current is the charge of the output capacitance.
E_ON_MJ = {25: lambda i: 0.6 + 0.0110 * i + 1.875e-5 * i**2, 175: lambda i: 0.65 + 0.0119 * i + 2.02e-5 * i**2}
E_OFF_MJ = {25: lambda i: 0.2 + 0.0070 * i + 1.25e-5 * i**2, 175: lambda i: 0.2 + 0.0074 * i + 1.35e-5 * i**2}
#: Recovery in uJ: the plasma of the body diode grows with temperature.
E_RR_UJ = {25: lambda i: 150 + 0.75 * i, 175: lambda i: 260 + 2.6 * i}
#: Foster branches that the impedance is drawn from: 0.110 K/W.
R_K_PER_W, TAU_S = (0.003, 0.009, 0.030, 0.045, 0.023), (0.25e-3, 1.5e-3, 12e-3, 65e-3, 0.45)


def z_th_k_per_w(t_s):
    return sum(r * -np.expm1(-t_s / tau) for r, tau in zip(R_K_PER_W, TAU_S))


def clicked(rng, f, x0, x1, n, *numbers):
    """Points along y = f(x, numbers), a little beside it, one of them twice and one stepping back."""
    step = (x1 - x0) / (n - 1)
    x = np.linspace(x0, x1, n) + 0.25 * step * rng.uniform(-1, 1, n)
    x = np.clip(x, x0, x1)
    again = int(rng.integers(3, n - 3))
    x = np.insert(x, again, x[again])
    back = int(rng.integers(3, n - 3))
    x[back], x[back + 1] = x[back + 1], x[back]
    y = f(x, *numbers)
    return x + SCATTER * x1 * rng.uniform(-0.5, 0.5, x.size), y + SCATTER * y.max() * rng.uniform(-1, 1, y.size)


def write(folder, name, header, x, y, digits=(1, 4)):
    lines = ["# Swift 400: invented, digitised from a drawing that does not exist", header]
    lines += [f"{a:.{digits[0]}f},{b:.{digits[1]}f}" for a, b in zip(x, y)]
    (folder / name).write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


def main(folder):
    rng = np.random.default_rng(SEED)
    for t in (25, 150, 175):
        write(folder, f"vds_{t}c.csv", "I_D (A),V_DS (V)", *clicked(rng, channel_v, 0.0, 840.0, 42, R_OHM[t]))
        write(folder, f"vsd_gate_on_{t}c.csv", "I_S (A),V_SD (V)", *clicked(rng, reverse_v, 0.0, 840.0, 42, R_OHM[t], BODY_V[t]))
        write(folder, f"vsd_body_{t}c.csv", "I_S (A),V_SD (V)", *clicked(rng, body_diode_v, 4.0, 840.0, 46, BODY_V[t]))
    for t in (25, 175):
        write(folder, f"eon_{t}c.csv", "I_D (A),E_on (mJ)", *clicked(rng, E_ON_MJ[t], 20.0, 840.0, 36))
        write(folder, f"eoff_{t}c.csv", "I_D (A),E_off (mJ)", *clicked(rng, E_OFF_MJ[t], 20.0, 840.0, 36))
        write(folder, f"err_{t}c.csv", "I_S (A),E_rr (uJ)", *clicked(rng, E_RR_UJ[t], 20.0, 840.0, 36), digits=(1, 1))
    # over the gate resistor, at 400 A, 800 V, 175 degC; 2 ohm is the one of the energy curves
    on, off, rr = (f[175](400.0) for f in (E_ON_MJ, E_OFF_MJ, E_RR_UJ))
    write(folder, "eon_rg.csv", "R_G (ohm),E_on (mJ)", *clicked(rng, lambda r: on * (0.62 + 0.19 * r), 0.5, 12.0, 16), digits=(3, 4))
    write(folder, "eoff_rg.csv", "R_G (ohm),E_off (mJ)", *clicked(rng, lambda r: off * (0.70 + 0.15 * r), 0.5, 12.0, 16), digits=(3, 4))
    write(folder, "err_rg.csv", "R_G (ohm),E_rr (uJ)", *clicked(rng, lambda r: rr * 1.35 / (1.0 + 0.175 * r), 0.5, 12.0, 16), digits=(3, 1))
    # over the DC voltage, at 400 A, 25 degC
    write(folder, "eon_vdc.csv", "V_DC (V),E_on (mJ)", *clicked(rng, lambda v: E_ON_MJ[25](400.0) * (v / 800.0) ** 1.25, 400.0, 900.0, 14))
    # impedance: log axes, so the scatter is a share of the value
    t = np.geomspace(1e-5, 5.0, 64) * np.exp(rng.uniform(-0.05, 0.05, 64))
    z = z_th_k_per_w(t) * np.exp(rng.uniform(-0.005, 0.005, 64))
    lines = ["# Swift 400: invented, digitised from a drawing that does not exist", "t (ms),Z_th (mK/W)"]
    lines += [f"{1e3 * a:.5g},{1e3 * b:.5g}" for a, b in zip(t, z)]
    (folder / "zth.csv").write_text("\n".join(lines) + "\n", encoding="utf-8", newline="\n")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent)
