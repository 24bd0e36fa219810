"""Heat conduction in a stack by finite elements in three dimensions (scikit-fem): quadratic bricks on a graded mesh.

Shares nothing with the stage.
"""

from dataclasses import dataclass

import numpy as np
from scipy.sparse import block_diag, bmat
from scipy.sparse.linalg import splu
from skfem import Basis, BilinearForm, ElementHex2, FacetBasis, LinearForm, MeshHex, asm


def graded(borders, steps):
    """Points between ``borders``, ``steps`` of them in each interval, closer towards its ends (Chebyshev)."""
    parts = [a + (b - a) * 0.5 * (1 - np.cos(np.pi * np.arange(n) / n)) for a, b, n in zip(borders[:-1], borders[1:], steps)]
    return np.concatenate([*parts, [borders[-1]]])


@BilinearForm
def _conduct(u, v, w):
    return w["k"] * (u.grad[0] * v.grad[0] + u.grad[1] * v.grad[1] + u.grad[2] * v.grad[2])


@BilinearForm
def _conduct_along(u, v, w):
    return w["side"] * (u.grad[0] * v.grad[0] + u.grad[1] * v.grad[1]) + w["k"] * u.grad[2] * v.grad[2]


@BilinearForm
def _store(u, v, w):
    return w["heat"] * u * v


@BilinearForm
def _leave(u, v, w):
    return u * v


@LinearForm
def _enter(v, w):
    return 1.0 * v


@dataclass
class Model:
    """C dT/dt + G T = F p with T over the coolant; ``load[:, j]`` is 1 W spread evenly over chip j, and also the mean over it."""

    capacity: object
    conductance: object
    load: np.ndarray
    shadow: np.ndarray

    def steady(self):
        """Rise of chip i, and of the bottom below it, per watt in chip j; (n, n) each."""
        t = splu(self.conductance.tocsc(), permc_spec="MMD_AT_PLUS_A", options={"SymmetricMode": True}, diag_pivot_thresh=0.0).solve(self.load)
        return self.load.T @ t, self.shadow.T @ t

    def step_response(self, first_s, growth, stages, steps):
        """Times and rises (t, n, n) after a step; in each stage ``steps`` equal steps of a two-stage, second-order, L-stable implicit rule."""
        gamma = 1.0 - np.sqrt(0.5)
        t, y, h = 0.0, np.zeros_like(self.load), first_s
        times, rises = [], []
        for _ in range(stages):
            solve = splu((self.capacity + gamma * h * self.conductance).tocsc(), permc_spec="MMD_AT_PLUS_A",
                         options={"SymmetricMode": True}, diag_pivot_thresh=0.0).solve
            for _ in range(steps):
                k1 = solve(self.load - self.conductance @ y)
                k2 = solve(self.load - self.conductance @ (y + (1.0 - gamma) * h * k1))
                y = y + h * ((1.0 - gamma) * k1 + gamma * k2)
                t += h
                times.append(t)
                rises.append(self.load.T @ y)
            h *= growth
        return np.array(times), np.array(rises)


def model(x_m, y_m, layers, chips, r_area_m2_k_per_w):
    """Bricks between the planes ``x_m`` and ``y_m``.

    ``layers``: (k, rho c, thickness [m], elements) from the top; ``chips``: (x0, x1, y0, y1) [m] on mesh planes.
    """
    z = [0.0]
    for _, _, thick, count in reversed(layers):
        z.extend(z[-1] + thick * np.arange(1, count + 1) / count)
    mesh = MeshHex.init_tensor(x_m, y_m, np.array(z))
    middle = mesh.p[:, mesh.t].mean(axis=1)[2]
    tops = np.cumsum([layer[2] for layer in reversed(layers)])
    number = len(layers) - 1 - np.searchsorted(tops, middle)
    element = ElementHex2()
    basis = Basis(mesh, element, intorder=4)
    k = np.array([layer[0] for layer in layers])[number][:, None] * np.ones(basis.dx.shape[1])
    heat = np.array([layer[1] for layer in layers])[number][:, None] * np.ones(basis.dx.shape[1])
    height = z[-1]
    bottom = FacetBasis(mesh, element, facets=mesh.facets_satisfying(lambda p: np.abs(p[2]) < 1e-9), intorder=4)
    loads = [[], []]
    place = mesh.p[:, mesh.facets].mean(axis=1)
    for x0, x1, y0, y1 in chips:
        for store, level in zip(loads, (height, 0.0)):
            facets = np.flatnonzero((np.abs(place[2] - level) < 1e-9) & (place[0] > x0) & (place[0] < x1) & (place[1] > y0) & (place[1] < y1))
            store.append(asm(_enter, FacetBasis(mesh, element, facets=facets, intorder=4)) / ((x1 - x0) * (y1 - y0)))
    return Model(asm(_store, basis, heat=heat), asm(_conduct, basis, k=k) + asm(_leave, bottom) / r_area_m2_k_per_w,
                 np.array(loads[0]).T, np.array(loads[1]).T)


def chips_on_plate(x_m, y_m, chip_layers, plate_layers, chips, r_area_m2_k_per_w, r_sink_k_per_w, c_sink_j_per_k, sideways=1.0):
    """Chips with bodies of their own on a plate, on a sink of one temperature; arguments as for :func:`model`, with the chips' layers apart.

    ``sideways``: factor on the chips' conductivity along the plate. The last unknown is the sink. Nothing is beside the chips.
    """
    z, heights = [0.0], []
    for _, _, thick, count in [*reversed(plate_layers), *reversed(chip_layers)]:
        z.extend(z[-1] + thick * np.arange(1, count + 1) / count)
        heights.append(z[-1])
    mesh = MeshHex.init_tensor(x_m, y_m, np.array(z))
    middle = mesh.p[:, mesh.t].mean(axis=1)
    plate_top = sum(p[2] for p in plate_layers)
    there = middle[2] < plate_top
    for x0, x1, y0, y1 in chips:
        there |= (middle[0] > x0) & (middle[0] < x1) & (middle[1] > y0) & (middle[1] < y1)
    mesh = mesh.restrict(np.flatnonzero(there))
    middle = mesh.p[:, mesh.t].mean(axis=1)
    every = [*chip_layers, *plate_layers]
    number = len(every) - 1 - np.searchsorted(heights, middle[2])
    element = ElementHex2()
    basis = Basis(mesh, element, intorder=4)
    k, heat = (np.array([p[column] for p in every])[number][:, None] * np.ones(basis.dx.shape[1]) for column in (0, 1))
    side = np.where(middle[2] > plate_top, sideways, 1.0)[:, None] * k
    bottom = FacetBasis(mesh, element, facets=mesh.facets_satisfying(lambda p: np.abs(p[2]) < 1e-9), intorder=4)
    out = asm(_enter, bottom) / r_area_m2_k_per_w
    area = (x_m[-1] - x_m[0]) * (y_m[-1] - y_m[0])
    conductance = bmat([[asm(_conduct_along, basis, k=k, side=side) + asm(_leave, bottom) / r_area_m2_k_per_w, -out[:, None]],
                        [-out[None], np.array([[area / r_area_m2_k_per_w + 1.0 / r_sink_k_per_w]])]]).tocsc()
    capacity = block_diag([asm(_store, basis, heat=heat), np.array([[c_sink_j_per_k]])]).tocsc()
    loads = [[], []]
    place = mesh.p[:, mesh.facets].mean(axis=1)
    for x0, x1, y0, y1 in chips:
        for store, level in zip(loads, (z[-1], 0.0)):
            facets = np.flatnonzero((np.abs(place[2] - level) < 1e-9) & (place[0] > x0) & (place[0] < x1) & (place[1] > y0) & (place[1] < y1))
            store.append(np.append(asm(_enter, FacetBasis(mesh, element, facets=facets, intorder=4)) / ((x1 - x0) * (y1 - y0)), 0.0))
    return Model(capacity, conductance, np.array(loads[0]).T, np.array(loads[1]).T)
