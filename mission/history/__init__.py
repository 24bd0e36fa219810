"""Operating points, module and network -> junction temperatures over the mission."""

from .envelope import EnvelopeBuilder, JunctionHistory
from .march import ElectrothermalMarch, MarchSettings, PointBlock, RippleBlock, RowEnvelope

__all__ = ["ElectrothermalMarch", "EnvelopeBuilder", "JunctionHistory", "MarchSettings", "PointBlock", "RippleBlock", "RowEnvelope"]
