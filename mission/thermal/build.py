"""The network of one inverter: module data, what lies under it, and the cooling."""

from __future__ import annotations

import numpy as np

from ..device import PowerModule
from .assembly import FullNetwork, NetworkBuilder
from .cooling import sink_ladder
from .layers import StackLadder, stack_ladder
from .networks import CauerLadder, FosterNetwork, foster_to_cauer, merge_close_branches


def chip_ladder(thermal, materials, where: str) -> StackLadder:
    """Ladder from one switch or diode to its reference point, from data-sheet branches or from layers."""
    if thermal.layer:
        return stack_ladder(thermal.layer, materials, cells=thermal.cells_per_layer, where=f"{where}.layer")
    branches = FosterNetwork(np.array(thermal.r_k_per_w), np.array(thermal.tau_s))
    ladder = foster_to_cauer(merge_close_branches(branches))
    return StackLadder(ladder, 0.0, ())


def inverter_network(module: PowerModule, cooling, *, materials=None) -> FullNetwork:
    """All twelve chips on one sink.

    The sink is one temperature for all chips; it takes the heat that leaves the
    ladders, not the heat that enters the chips. With a resistance per module the
    chips of a module share its case; with resistances per switch and diode every
    chip has a case point of its own. A half-bridge file stands for three modules
    on the sink.

    Parameters
    ----------
    module : PowerModule
    cooling : FixedCooling or FosterCooling
    materials : dict, optional
        For layer stacks; default: the shipped ones.

    Returns
    -------
    FullNetwork
        Outputs: junctions, and the case points under them (the sink surface where
        the module's data end there).
    """
    if materials is None:
        from .layers import load_materials

        materials = load_materials()
    builder = NetworkBuilder()
    sink = sink_ladder(cooling)
    if isinstance(sink, CauerLadder):
        surface = builder.ladder(sink, None)
    else:
        surface = builder.node()
        builder.to_coolant(surface, sink)
    switch = chip_ladder(module.switch.thermal, materials, "switch.thermal")
    diode = chip_ladder(module.diode.thermal, materials, "diode.thermal")
    per = module.case_to_sink.per if module.case_to_sink is not None else None
    shared = {}
    heated, cases = [], []
    for chip in range(12):
        stack = switch if chip < 6 else diode
        if per is None:
            case = surface
        elif per == "module":
            number = 0 if module.arrangement == "six-pack" else (chip % 6) // 2
            if number not in shared:
                shared[number] = builder.node()
                builder.resistance(shared[number], surface, module.case_to_sink.r_th_k_per_w)
            case = shared[number]
        else:
            case = builder.node()
            r = module.case_to_sink.r_th_switch_k_per_w if chip < 6 else module.case_to_sink.r_th_diode_k_per_w
            builder.resistance(case, surface, r)
        if stack.c_end_j_per_k > 0.0:
            builder.add_capacity(case, stack.c_end_j_per_k)
        heated.append(builder.ladder(stack.ladder, case))
        cases.append(case)
    return builder.build(heated, cases)
