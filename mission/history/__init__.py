"""Operating points, module and network -> junction temperatures over the mission."""

from .envelope import EnvelopeBuilder, JunctionHistory
from .march import MOST_PIECES, ElectrothermalMarch, MarchSettings, MarchState, PointBlock, RippleBlock, RowEnvelope, check_fit
from .steady import HeldPoint, SteadyState, worst_standstill_rad

__all__ = [
    "ElectrothermalMarch", "EnvelopeBuilder", "HeldPoint", "JunctionHistory", "MOST_PIECES", "MarchSettings", "MarchState", "PointBlock", "RippleBlock",
    "RowEnvelope", "SteadyState", "check_fit", "worst_standstill_rad",
]
