"""The machine of a study, as its file describes it."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from ..errors import RangeError
from ..tomlfile import FileModel

_Positive = Annotated[float, Field(strict=True, gt=0)]
_NotNegative = Annotated[float, Field(strict=True, ge=0)]


class SynchronousMachine(FileModel):
    """Synchronous machine in rotor coordinates, amplitude-invariant (peak phase values).

    The d axis lies along the magnets; without magnets it is the axis of the
    smaller inductance. Saturation, iron and friction losses are left out.
    """

    kind: Literal["synchronous"]
    pole_pairs: Annotated[int, Field(strict=True, ge=1, le=200)]
    r_s_ohm: _NotNegative
    l_d_h: _Positive
    l_q_h: _Positive
    psi_pm_wb: _NotNegative

    @model_validator(mode="after")
    def _makes_torque(self):
        if self.psi_pm_wb == 0.0 and self.l_q_h <= self.l_d_h:
            raise RangeError(
                "psi_pm_wb",
                f"psi_pm_wb = 0 with l_q_h = {self.l_q_h:g} not above l_d_h = {self.l_d_h:g}",
                "magnets, or l_q_h above l_d_h",
                "without magnets the d axis is the one of the smaller inductance",
            )
        if max(self.l_d_h, self.l_q_h) > 10.0:
            raise RangeError(
                "l_d_h",
                f"l_d_h = {self.l_d_h:g} H, l_q_h = {self.l_q_h:g} H",
                "at most 10 H",
                "inductances are in henry, not millihenry",
            )
        return self


class DirectPoints(FileModel):
    """No machine model: the duty itself gives frequency, modulation index and displacement."""

    kind: Literal["direct"]


#: What a study's ``[machine]`` table may be.
MachineSpec = Annotated[SynchronousMachine | DirectPoints, Field(discriminator="kind")]
