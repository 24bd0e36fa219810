"""Heat: layers, data-sheet curves and cooling -> a network reduced to modes."""

from .assembly import FullNetwork, NetworkBuilder
from .build import chip_ladder, inverter_modes, inverter_network
from .cooling import CoolingSpec, FixedCooling, FosterCooling, sink_ladder
from .levels import CoolingLevels, LevelGroup, Move
from .layers import Material, StackLadder, load_materials, shipped_materials, stack_ladder
from .modes import ReducedNetwork, reduce_to_modes, unreduced
from .networks import CauerLadder, FosterNetwork, cauer_to_foster, foster_to_cauer, merge_close_branches

__all__ = [
    "CauerLadder", "CoolingLevels", "CoolingSpec", "FixedCooling", "FosterCooling", "FosterNetwork", "FullNetwork", "Material", "LevelGroup", "Move", "NetworkBuilder",
    "ReducedNetwork", "StackLadder", "cauer_to_foster", "chip_ladder", "foster_to_cauer",
    "inverter_modes", "inverter_network", "load_materials", "merge_close_branches", "reduce_to_modes", "shipped_materials",
    "sink_ladder", "stack_ladder", "unreduced",
]
