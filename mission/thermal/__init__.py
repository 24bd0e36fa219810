"""Heat: layers, data-sheet curves and cooling -> a network reduced to modes."""

from .assembly import FullNetwork, NetworkBuilder
from .build import chip_ladder, inverter_modes, inverter_network
from .cooling import FixedCooling, FosterCooling, SinkPath, sink_ladder, sink_path
from .levels import SLOW_MODES, CoolingLevels, LevelGroup, Move
from .coupling import MutualBranches, matrix_modes, module_mutual, with_mutual
from .layers import ConductivityEffect, Material, StackLadder, conductivity_effect, load_materials, materials_at, shipped_materials, stack_ladder
from .modes import ReducedNetwork, reduce_to_modes, unreduced
from .plan import CoolingPlan, CoolingSpec, LevelState
from .networks import CauerLadder, FosterNetwork, cauer_to_foster, foster_to_cauer, merge_close_branches

__all__ = [
    "SLOW_MODES",
    "CauerLadder", "ConductivityEffect", "CoolingLevels", "CoolingPlan", "CoolingSpec", "FixedCooling", "FosterCooling", "FosterNetwork", "FullNetwork", "Material", "LevelGroup", "LevelState", "Move", "MutualBranches", "NetworkBuilder",
    "ReducedNetwork", "StackLadder", "cauer_to_foster", "chip_ladder", "conductivity_effect", "foster_to_cauer",
    "inverter_modes", "inverter_network", "load_materials", "materials_at", "matrix_modes", "merge_close_branches", "module_mutual", "reduce_to_modes", "shipped_materials",
    "SinkPath", "sink_ladder", "sink_path", "stack_ladder", "unreduced", "with_mutual",
]
