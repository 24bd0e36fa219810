"""How fast the march is, as a ratio against the plain route in the same run.

    python -m tests.history.benchmark

Plain route: ``scipy.integrate.solve_ivp`` over the twelve-chip network with losses
read at every evaluation (tests/brute_force). Both march the same seconds of duty;
the figure is wall time per second of duty, medians of five (package) and one run
(plain route: it takes seconds).
"""

from __future__ import annotations

import statistics
import time

import numpy as np

from mission.device import load_module
from tests.brute_force import reference

from .marching import COOLANT_C, F_SW_HZ, SINK_R, SINK_TAU, V_DC_V, march, points

SETTINGS = {
    "angle marched, 2 Hz": dict(frequency_hz=2.0, mod_index=0.1, phi_rad=0.4),
    "mean and ripple, 40 Hz": dict(frequency_hz=40.0, mod_index=0.8, phi_rad=0.5),
}


def plain_s_per_s(op: dict, window_s: float) -> float:
    """Wall time of solve_ivp per second of duty."""
    params = reference.params_from_module(load_module("heron-300"), SINK_R, SINK_TAU, COOLANT_C, F_SW_HZ, V_DC_V, "space-vector")
    rows = reference.rows([window_s], op["frequency_hz"], 1.0, 300.0, op["mod_index"], op["phi_rad"])
    begin = time.perf_counter()
    reference.transient_solve_ivp(params, rows)
    return (time.perf_counter() - begin) / window_s


def package_s_per_s(op: dict, seconds: int) -> float:
    """Wall time of the march per second of duty (rows of 1 s, each a little different, so that nothing is reused)."""
    current = 300.0 + np.random.default_rng(1).normal(0.0, 12.0, seconds)
    duty = points(seconds, i_peak_a=current, **op)
    march(duty, 1.0)  # compiled and warm
    taken = []
    for _ in range(5):
        begin = time.perf_counter()
        march(duty, 1.0)
        taken.append(time.perf_counter() - begin)
    return statistics.median(taken) / seconds


def ratios(window_s: float = 0.2, seconds: int = 2000) -> dict[str, tuple[float, float]]:
    """Name -> (package, plain route), seconds of wall time per second of duty."""
    return {name: (package_s_per_s(op, seconds), plain_s_per_s(op, window_s)) for name, op in SETTINGS.items()}


#: Kinds of leg and modulation against the two-level sine case (first).
KINDS = (("heron-300", "sine"), ("heron-300", "space-vector"), ("heron-300", "clamp-60-current-peak"), ("heron-300", "clamp-120-upper"),
         ("swift-400", "space-vector"), ("tern-300", "sine"), ("plover-300", "sine"), ("dunlin-300", "sine"), ("curlew-300", "sine"),
         ("curlew-300", "clamp-60-voltage-peak"))


def kind_costs(seconds: int = 1000) -> dict[tuple[str, str], tuple[float, ...]]:
    """(module, modulation) -> wall time per second of duty, by angle and by mean and ripple; all in one run, turn by turn."""
    taken = {kind: [[] for _ in SETTINGS] for kind in KINDS}
    current = 250.0 + np.random.default_rng(1).normal(0.0, 10.0, seconds)
    for turn in range(6):
        for module, modulation in KINDS:
            for number, op in enumerate(SETTINGS.values()):
                begin = time.perf_counter()
                march(points(seconds, i_peak_a=current, **op), 1.0, module=module, modulation=modulation)
                if turn:  # the first is for compiling
                    taken[module, modulation][number].append(time.perf_counter() - begin)
    return {kind: tuple(statistics.median(t) / seconds for t in times) for kind, times in taken.items()}


def main() -> None:
    """Print the table."""
    print(f"{'':<26}{'march, us per s':>18}{'solve_ivp, s per s':>20}{'ratio':>12}")
    for name, (ours, plain) in ratios().items():
        print(f"{name:<26}{ours * 1e6:>18.1f}{plain:>20.2f}{plain / ours:>12,.0f}")
    costs = kind_costs()
    first = costs[KINDS[0]]
    print(f"\n{'us per s of duty':<42}{'by angle':>10}{'ratio':>8}{'by mean':>10}{'ratio':>8}")
    for (module, modulation), (angle, mean) in costs.items():
        print(f"{module + ', ' + modulation:<42}{angle * 1e6:>10.1f}{angle / first[0]:>8.2f}{mean * 1e6:>10.1f}{mean / first[1]:>8.2f}")


if __name__ == "__main__":
    main()
