"""Duty: a file or a table of time, current and speed -> ``MissionProfile``."""

from .profile import WHOLE_MISSION, MissionProfile, ProfileBlock
from .reading import profile_from_frame, read_profile
from .spec import ColumnMap, ColumnSpec, DutySpec
from .units import QUANTITIES, conversion

__all__ = ["ColumnMap", "ColumnSpec", "DutySpec", "MissionProfile", "ProfileBlock", "QUANTITIES", "WHOLE_MISSION", "conversion", "profile_from_frame",
           "read_profile"]
