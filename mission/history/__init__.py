"""Operating points, module and network -> junction temperatures over the mission."""

from .envelope import EnvelopeBuilder, JunctionHistory
from .march import CHIP_NAMES, ElectrothermalMarch, MarchSettings, PointBlock, RippleBlock, RowEnvelope

__all__ = ["CHIP_NAMES", "ElectrothermalMarch", "EnvelopeBuilder", "JunctionHistory", "MarchSettings", "PointBlock", "RippleBlock", "RowEnvelope"]
