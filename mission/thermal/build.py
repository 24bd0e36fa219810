"""The network of one inverter: module data, what lies under it, and the cooling."""

from __future__ import annotations

import numpy as np

from ..device import PowerModule
from ..errors import InputError
from .assembly import FullNetwork, NetworkBuilder
from .cooling import sink_path
from .coupling import module_mutual, with_mutual
from .downstream import with_coolant_rise
from .layers import StackLadder, stack_ladder
from .modes import MOST_SHARED, ReducedNetwork, reduce_coupled, reduce_to_modes
from .networks import CauerLadder, FosterNetwork, cauer_to_foster, foster_to_cauer, merge_close_branches
from .plates import plated_network


def chip_ladder(thermal, materials, where: str) -> StackLadder:
    """Ladder from one switch or diode to its reference point, from data-sheet branches or from layers."""
    if thermal.layer:
        return stack_ladder(thermal.layer, materials, cells=thermal.cells_per_layer, where=f"{where}.layer")
    branches = FosterNetwork(np.array(thermal.r_k_per_w), np.array(thermal.tau_s))
    ladder = foster_to_cauer(merge_close_branches(branches))
    return StackLadder(ladder, 0.0, ())


def inverter_modes(module: PowerModule, cooling, *, materials=None, relative_tolerance: float = 1e-3) -> ReducedNetwork:
    """The modes that the march needs: the joined network reduced, or the lumped form where ``cooling.sink_sees`` asks for it.

    Couplings of the module file come on top, exactly (:func:`with_mutual`).

    Parameters
    ----------
    module, cooling, materials
        As for :func:`inverter_network`.
    relative_tolerance : float
        Of the reduction, see :func:`reduce_to_modes`, or :func:`reduce_coupled` for chips on a plate.
    """
    return full_and_reduced(module, cooling, materials=materials, relative_tolerance=relative_tolerance)[1]


def full_and_reduced(module: PowerModule, cooling, *, materials=None, relative_tolerance: float = 1e-3,
                     like: ReducedNetwork | None = None) -> tuple[FullNetwork | None, ReducedNetwork]:
    """The full network beside what :func:`inverter_modes` makes of it; ``like``: reduced modes of a network that differs little.

    There is no full network where the sink is driven by the chips' losses at once.
    """
    path = sink_path(cooling)
    if path.chip_losses:
        full, network = None, _lumped_modes(module, cooling)
    else:
        full = inverter_network(module, cooling, materials=materials)
        if module.plate is None:
            network = reduce_to_modes(full, relative_tolerance=relative_tolerance, like=like)
        else:
            # a row of modules adds shared modes of its own
            room = MOST_SHARED - (30 if path.coolant_rise_k_per_w > 0.0 else 0)
            network = reduce_coupled(full, relative_tolerance=relative_tolerance, most_shared=room, like=like)
    network = with_mutual(network, module_mutual(module, materials=materials))
    if path.coolant_rise_k_per_w > 0.0:
        network = with_coolant_rise(network, full, path.coolant_rise_k_per_w, path.first_to_last, relative_tolerance=relative_tolerance)
    return full, network


#: Stands for "at once" where a resistance without capacity meets the losses directly.
_AT_ONCE_S = 1e-3


def _lumped_modes(module: PowerModule, cooling) -> ReducedNetwork:
    """Data-sheet branches and sink branches side by side, each driven by the losses at once."""
    pairs = module.chip_pairs()
    for pair in pairs:
        if pair.thermal.layer:
            raise InputError("cooling.sink_sees", "'chip-losses' with layers", "'heat-leaving' with layers", f"{pair.place}.thermal has layers; their heat arrives later")
    if module.case_to_sink is not None and module.case_to_sink.per == "switch-and-diode":
        raise InputError("cooling.sink_sees", "'chip-losses' beside a case_to_sink resistance of its own under every chip", "'heat-leaving'",
                         "a resistance that meets the losses at once would show the whole ripple; only one per module can be joined this way")
    n = 6 * len(pairs)
    branches = [FosterNetwork(np.array(p.thermal.r_k_per_w), np.array(p.thermal.tau_s)) for p in pairs]
    most = max(b.tau_s.size for b in branches)
    lam, rho, rho_case = np.ones((most, n)), np.zeros((most, n)), np.zeros((most, n))
    for chip in range(n):
        b = branches[chip // 6]
        lam[: b.tau_s.size, chip] = 1.0 / b.tau_s
        rho[: b.tau_s.size, chip] = b.r_k_per_w / b.tau_s
    path = sink_path(cooling)
    if len(path.ladders) > 1:
        raise InputError("cooling.sink_sees", "'chip-losses' with a sink for every module", "'heat-leaving'")
    sink = path.ladders[0]
    if isinstance(sink, CauerLadder):
        found = cauer_to_foster(sink)
        r_s, tau_s = found.r_k_per_w, found.tau_s
    else:
        r_s, tau_s = np.array([sink]), np.array([_AT_ONCE_S])
    rows = [(np.ones(n), np.full(n, r / tau), np.full(n, r / tau), 1.0 / tau) for r, tau in zip(r_s, tau_s)]
    legs = (np.arange(n) % 6) // 2
    if module.case_to_sink is not None:
        groups = [np.ones(n)] if module.arrangement == "six-pack" else [(legs == k).astype(float) for k in range(3)]
        share = path.paste * module.case_to_sink.r_th_k_per_w / _AT_ONCE_S
        rows += [(g, g * share, g * share, 1.0 / _AT_ONCE_S) for g in groups]
    return ReducedNetwork(
        lam, rho, rho_case, np.array([r[3] for r in rows]), np.array([r[0] for r in rows]), np.array([r[1] for r in rows]).T.copy(),
        np.array([r[2] for r in rows]).T.copy(), np.zeros(len(rows)), np.zeros_like(lam), np.zeros((n, n)), 0.0, 0.0, 0.0, 0.0,
        sum(b.tau_s.size * 6 for b in branches) + len(rows))


def inverter_network(module: PowerModule, cooling, *, materials=None) -> FullNetwork:
    """All chips of a bridge on their sink.

    A sink is one temperature for all chips on it; it takes the heat that leaves the
    ladders, not the heat that enters the chips. With a resistance per module the
    chips of a module share its case; with resistances per switch and diode every
    chip has a case point of its own. A half-bridge or leg file stands for three modules,
    on one sink or (a :class:`SinkPath` with three ladders) each on its own.

    Parameters
    ----------
    module : PowerModule
    cooling : FixedCooling, FosterCooling or SinkPath
    materials : dict, optional
        For layer stacks; default: the shipped ones.

    Returns
    -------
    FullNetwork
        Outputs: junctions, the case points under them (the sink surface where
        the module's data end there), and the sink surfaces. The coolant's own rise along a row of
        sinks is not in it (see :func:`mission.thermal.downstream.with_coolant_rise`).
    """
    if materials is None:
        from .layers import load_materials

        materials = load_materials()
    path = sink_path(cooling)
    builder = NetworkBuilder()
    surfaces = [_surface(builder, ladder) for ladder in path.ladders]
    if len(surfaces) > 1 and module.arrangement == "six-pack":
        raise InputError("cooling", f"{len(surfaces)} sinks under {module.name}", "one sink under a six-pack, which is one module")
    pairs = module.chip_pairs()
    stacks = [chip_ladder(pair.thermal, materials, f"{pair.place}.thermal") for pair in pairs]
    if module.plate is not None:
        return plated_network(builder, surfaces, module, stacks, materials, path.paste)
    per = module.case_to_sink.per if module.case_to_sink is not None else None
    shared = {}
    heated, cases = [], []
    for chip in range(6 * len(pairs)):
        pair, stack = pairs[chip // 6], stacks[chip // 6]
        leg = (chip % 6) // 2
        surface = surfaces[leg if len(surfaces) > 1 else 0]
        if per is None:
            case = surface
        elif per == "module":
            number = 0 if module.arrangement == "six-pack" else leg
            if number not in shared:
                shared[number] = builder.node()
                builder.resistance(shared[number], surface, path.paste * module.case_to_sink.r_th_k_per_w)
            case = shared[number]
        else:
            case = builder.node()
            r = module.case_to_sink.r_th_diode_k_per_w if pair.is_diode else module.case_to_sink.r_th_switch_k_per_w
            builder.resistance(case, surface, path.paste * r)
        if stack.c_end_j_per_k > 0.0:
            builder.add_capacity(case, stack.c_end_j_per_k)
        heated.append(builder.ladder(stack.ladder, case))
        cases.append(case)
    return builder.build(heated, cases, surfaces)


def _surface(builder: NetworkBuilder, sink: CauerLadder | float) -> int:
    if isinstance(sink, CauerLadder):
        return builder.ladder(sink, None)
    surface = builder.node()
    builder.to_coolant(surface, sink)
    return surface
