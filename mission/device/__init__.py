"""Device: a module file -> ``PowerModule`` with curves, ratings, gate and thermal data."""

from .curves import OutsideData, on_state_voltage_v, outside_data, switching_energy_j
from .files import load_module, module_from_dict, save_module, shipped_modules, to_toml
from .gate import gate_drive_power_w, gate_peak_current_a
from .module import (
    CaseToSinkChips,
    CaseToSinkModule,
    ChipThermal,
    DiodeData,
    EnergyCurve,
    EnergyCurves,
    FailureMode,
    Gate,
    LayerSpec,
    OnStateCurve,
    OnStateCurves,
    PowerModule,
    Ratings,
    SwitchData,
    Wires,
)

__all__ = [
    "CaseToSinkChips",
    "CaseToSinkModule",
    "ChipThermal",
    "DiodeData",
    "EnergyCurve",
    "EnergyCurves",
    "FailureMode",
    "Gate",
    "LayerSpec",
    "OnStateCurve",
    "OnStateCurves",
    "OutsideData",
    "PowerModule",
    "Ratings",
    "SwitchData",
    "Wires",
    "gate_drive_power_w",
    "gate_peak_current_a",
    "load_module",
    "module_from_dict",
    "on_state_voltage_v",
    "outside_data",
    "save_module",
    "shipped_modules",
    "switching_energy_j",
    "to_toml",
]
