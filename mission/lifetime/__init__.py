"""Counted cycles -> damage and life."""

from .acceleration import NORRIS_LANDZBERG_SAC, NORRIS_LANDZBERG_SNPB, board_solder_term, norris_landzberg_factor
from .ledger import ChoiceEffect, DamageLedger, FailureMode, LedgerRow, Mode, effect_of_choices, miner_sum, resolve_modes
from .models import LifetimeModel, load_model, load_set, shipped_sets

__all__ = [
    "NORRIS_LANDZBERG_SAC",
    "NORRIS_LANDZBERG_SNPB",
    "ChoiceEffect",
    "DamageLedger",
    "FailureMode",
    "LedgerRow",
    "LifetimeModel",
    "Mode",
    "board_solder_term",
    "effect_of_choices",
    "load_model",
    "load_set",
    "miner_sum",
    "norris_landzberg_factor",
    "resolve_modes",
    "shipped_sets",
]
