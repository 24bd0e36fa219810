"""Cooling as the user gives it: what lies between the sink surface and the coolant."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Literal

import numpy as np
from pydantic import Field, model_validator

from ..errors import InputError, RangeError
from ..tomlfile import FileModel
from .networks import CauerLadder, FosterNetwork, foster_to_cauer, merge_close_branches

# A number in quotes or a true/false is a slip, not a number.
_Positive = Annotated[float, Field(strict=True, gt=0)]


class _Coolant(FileModel):
    """What every kind of cooling has.

    ``sink_sees``: ``heat-leaving`` (default, correct: the sink takes the heat that comes out of
    the module, later than it enters the chips) or ``chip-losses`` (the sink takes the losses at
    once; for data that were made so, and for comparing with hand calculations).
    """

    sink_sees: Literal["heat-leaving", "chip-losses"] = "heat-leaving"
    coolant_c: Annotated[float, Field(strict=True, ge=-60, le=150)] | None = None


class FixedCooling(_Coolant):
    """One resistance from sink surface to coolant for the whole inverter, with an optional heat capacity of the sink."""

    kind: Literal["fixed"]
    r_th_k_per_w: _Positive
    heat_capacity_j_per_k: _Positive | None = None


class FosterCooling(_Coolant):
    """Foster branches from sink surface to coolant for the whole inverter."""

    kind: Literal["foster"]
    r_k_per_w: list[_Positive] = Field(min_length=1, max_length=8)
    tau_s: list[_Positive] = Field(min_length=1, max_length=8)

    @model_validator(mode="after")
    def _same_length(self):
        if len(self.r_k_per_w) != len(self.tau_s):
            raise RangeError("tau_s", f"{len(self.tau_s)} values beside {len(self.r_k_per_w)} resistances", "one time constant for every resistance")
        return self


CoolingSpec = Annotated[FixedCooling | FosterCooling, Field(discriminator="kind")]


def sink_ladder(spec) -> CauerLadder | float:
    """Ladder from sink surface to coolant, or a bare resistance [K/W] where no capacity is given."""
    if isinstance(spec, FixedCooling):
        if spec.heat_capacity_j_per_k is None:
            return spec.r_th_k_per_w
        return CauerLadder(np.array([spec.r_th_k_per_w]), np.array([spec.heat_capacity_j_per_k]))
    if isinstance(spec, FosterCooling):
        return foster_to_cauer(merge_close_branches(FosterNetwork(np.array(spec.r_k_per_w), np.array(spec.tau_s))))
    raise InputError("cooling.kind", f"{spec!r}", "fixed or foster")


@dataclass(frozen=True)
class SinkPath:
    """What the network needs to know of a cooling.

    Attributes
    ----------
    ladders : tuple
        From a mounting surface to the coolant, as :func:`sink_ladder` gives them: one for all modules, or one for each of
        the three modules of a bridge, in the order of the legs a, b, c.
    paste : float
        Factor on the module's case-to-sink resistances: above 1 for aged grease.
    """

    ladders: tuple[CauerLadder | float, ...]
    paste: float = 1.0


def sink_path(cooling) -> SinkPath:
    """The path of a given cooling; a :class:`SinkPath` is handed through."""
    return cooling if isinstance(cooling, SinkPath) else SinkPath((sink_ladder(cooling),))
