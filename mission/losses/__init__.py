"""Losses: operating point and junction temperature -> watts per chip."""

from .modulation import MOD_INDEX_INJECTED_MAX, Modulation, phase_reference
from .periods import conduction_integrals_w, mean_energy_j, mean_losses_w, voltage_factor
from .tables import CURRENT_REACH, LossTables, build_tables

__all__ = [
    "CURRENT_REACH", "LossTables", "MOD_INDEX_INJECTED_MAX", "Modulation", "build_tables", "conduction_integrals_w", "mean_energy_j", "mean_losses_w",
    "phase_reference", "voltage_factor",
]
