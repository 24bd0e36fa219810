"""Independent reckoning for the thermal tests: matrix exponentials and frequency responses, nothing from the stage but its numbers."""

import numpy as np
from scipy.linalg import expm

from mission.thermal import NetworkBuilder


def single(ladder):
    """One ladder from a heated node to the coolant, as a full network."""
    builder = NetworkBuilder()
    node = builder.ladder(ladder, None)
    return builder.build([node], [node])


def full_response(full, powers_w, steps_s):
    """Junction and case rises after each step of held power, by matrix exponentials; (m, n), (m, n)."""
    a = -full.g_w_per_k / full.c_j_per_k[:, None]
    y = np.zeros(full.c_j_per_k.size)
    junction, case = [], []
    for p, h in zip(powers_w, steps_s):
        end = np.linalg.solve(full.g_w_per_k, full.out_junction.T @ p)
        y = end + expm(a * h) @ (y - end)
        junction.append(full.out_junction @ y)
        case.append(full.out_case @ y)
    return np.array(junction), np.array(case)


def reduced_response(net, powers_w, steps_s):
    """The same of a reduced network, each mode exactly."""
    x_l, x_s = np.zeros_like(net.lam_local_per_s), np.zeros_like(net.lam_shared_per_s)
    junction, case = [], []
    for p, h in zip(powers_w, steps_s):
        keep_l, keep_s = np.exp(-net.lam_local_per_s * h), np.exp(-net.lam_shared_per_s * h)
        x_l = keep_l * x_l + (1 - keep_l) / net.lam_local_per_s * p
        x_s = keep_s * x_s + (1 - keep_s) / net.lam_shared_per_s * (net.b_shared @ p)
        junction.append((net.rho_local * x_l).sum(axis=0) + net.c_shared @ x_s)
        case.append((net.rho_case_local * x_l).sum(axis=0) + net.c_case_shared @ x_s)
    return np.array(junction), np.array(case)


def ladder_impedance(r, c, s):
    """Input impedance of a ladder with its far end at zero, from the far end up."""
    z = 0.0
    for r_k, c_k in zip(r[::-1], c[::-1]):
        z = 1.0 / (s * c_k + 1.0 / (r_k + z))
    return z


def foster_impedance(r, tau, s):
    return sum(r_k / (1.0 + s * t_k) for r_k, t_k in zip(r, tau))
