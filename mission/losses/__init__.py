"""Losses: operating point and junction temperature -> watts per chip."""

from .legs import LegPlan, leg_plan
from .modulation import MOD_INDEX_INJECTED_MAX, MOD_INDEX_SIX_STEP, Modulation, held_phase, phase_reference, reference_for
from .periods import (
    LegLosses,
    conduction_integrals_w,
    leg_losses_at_angle_w,
    leg_losses_w,
    mean_energy_j,
    mean_losses_w,
    voltage_factor,
)
from .tables import CURRENT_REACH, DEAD_SHARE_MAX, LossTables, build_tables, current_reach_a

__all__ = [
    "CURRENT_REACH", "DEAD_SHARE_MAX", "LegLosses", "LegPlan", "LossTables", "MOD_INDEX_INJECTED_MAX", "MOD_INDEX_SIX_STEP", "Modulation", "build_tables",
    "conduction_integrals_w", "current_reach_a", "held_phase", "leg_losses_at_angle_w", "leg_losses_w", "leg_plan", "mean_energy_j",
    "mean_losses_w", "phase_reference", "reference_for", "voltage_factor",
]
