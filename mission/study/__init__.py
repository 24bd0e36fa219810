"""A study file put to work: read it, run it, judge the result."""

from .run import MissionResult, Stopped, run
from .spec import Study, StudySpec, check_parts, check_rows, load_study
from .verdicts import Verdict, verdicts

__all__ = ["MissionResult", "Stopped", "Study", "StudySpec", "Verdict", "check_parts", "check_rows", "load_study", "run", "verdicts"]
