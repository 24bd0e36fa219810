"""Duty: a file, a table or a recipe -> ``MissionProfile`` (rows of time, current or torque, and speed)."""

from .making import LoadShare, Recipe
from .moves import Move, ramp, s_curve
from .profile import WHOLE_MISSION, MissionProfile, ProfileBlock, profile_from_rows
from .reading import profile_from_frame, read_profile
from .recipes import Conveyor, Fan, Hoist, Lift, Pump, Vehicle
from .source import RECIPES, DutySource, recipe
from .spec import ColumnMap, ColumnSpec, DutySpec
from .standard import (
    LIFT_USAGE,
    DutyType,
    LiftUsage,
    MechanismGroup,
    lift_usage,
    lift_usage_of_trips,
    load_spectrum,
    mechanism_group,
    structure_class,
)
from .units import QUANTITIES, conversion

__all__ = ["LIFT_USAGE", "QUANTITIES", "RECIPES", "WHOLE_MISSION", "ColumnMap", "ColumnSpec", "Conveyor", "DutySource", "DutySpec", "DutyType", "Fan", "Hoist",
           "Lift", "LiftUsage", "LoadShare", "MechanismGroup", "MissionProfile", "Move", "ProfileBlock", "Pump", "Recipe", "Vehicle", "conversion", "lift_usage",
           "lift_usage_of_trips", "load_spectrum", "mechanism_group", "profile_from_frame", "profile_from_rows", "ramp", "read_profile", "recipe", "s_curve",
           "structure_class"]
