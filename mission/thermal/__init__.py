"""Heat: layers, data-sheet curves and cooling -> a network reduced to modes."""

from .assembly import FullNetwork, NetworkBuilder
from .build import chip_ladder, inverter_modes, inverter_network
from .cooling import FixedCooling, FosterCooling, SinkPath, sink_ladder, sink_path
from .levels import SLOW_MODES, CoolingLevels, LevelGroup, Move
from .coupling import MutualBranches, matrix_modes, module_mutual, with_mutual
from .layers import ConductivityEffect, Material, StackLadder, conductivity_effect, load_materials, materials_at, shipped_materials, stack_ladder
from .modes import ReducedNetwork, reduce_coupled, reduce_to_modes, unreduced
from .plan import CoolingPlan, CoolingSpec, LevelState
from .fourier import FourierNetwork, FourierStack, PlateLayer, Source, plate_layers
from .networks import CauerLadder, FosterNetwork, cauer_to_foster, foster_to_cauer, merge_close_branches
from .plates import PlateBody, plate_body, plate_stack

# loaded when first asked for: a study needs none of them
_ON_DEMAND = {
    "spreading": ("ClosedForm", "by_angle_k_per_w", "closed_form", "closed_form_of_stack", "compare_spreading", "straight_down_k_per_w", "whole_footprint_k_per_w"),
    "measured": ("MeasuredImpedance", "Separation", "StructureFunction", "ThermalRecord", "fit_branches", "impedance", "read_record", "separation",
                 "square_root_start", "structure_function", "thermal_record", "time_constant_spectrum"),
    "sinks": ("FanSink", "LiquidPlate", "NaturalSink", "OperatingCurve", "SinkPoint", "TableSink", "natural_dependence", "operating_curve", "sink_point"),
}


def __getattr__(name):
    from importlib import import_module

    for module, names in _ON_DEMAND.items():
        if name in names:
            return getattr(import_module(f".{module}", __name__), name)
    raise AttributeError(f"module '{__name__}' has no attribute '{name}'")


__all__ = [
    "SLOW_MODES",
    "CauerLadder", "ConductivityEffect", "CoolingLevels", "CoolingPlan", "CoolingSpec", "FixedCooling", "FosterCooling", "FosterNetwork", "FullNetwork", "Material", "LevelGroup", "LevelState", "Move", "MutualBranches", "NetworkBuilder",
    "ReducedNetwork", "StackLadder", "cauer_to_foster", "chip_ladder", "conductivity_effect", "foster_to_cauer",
    "inverter_modes", "inverter_network", "load_materials", "materials_at", "matrix_modes", "merge_close_branches", "module_mutual", "reduce_coupled", "reduce_to_modes", "shipped_materials",
    "FourierNetwork", "FourierStack", "PlateBody", "PlateLayer", "Source", "plate_body", "plate_layers", "plate_stack",
    *(name for names in _ON_DEMAND.values() for name in names),
    "SinkPath", "sink_ladder", "sink_path", "stack_ladder", "unreduced", "with_mutual",
]
