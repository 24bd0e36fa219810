"""Junction history -> counted temperature cycles."""

from .counter import CycleCounter, rainflow_astm, rainflow_four_point, turning_points
from .files import CycleWriter
from .table import CLOSED, KIND_WORDS, RESIDUE, RIPPLE, CycleTable, RippleClasses

__all__ = ["CLOSED", "CycleCounter", "CycleTable", "CycleWriter", "KIND_WORDS", "RESIDUE", "RIPPLE", "RippleClasses", "rainflow_astm",
           "rainflow_four_point", "turning_points"]
