"""A study file put to work: read it, run it, judge the result."""

from .compare import Comparison, compare
from .heat import HeatReview, review_heat
from .rating import Rating, RatingBench, RatingPoint, rating_point
from .run import HotPoint, MissionResult, Stopped, run
from .spec import Study, StudySpec, check_parts, check_rows, load_study
from .verdicts import Stability, Verdict, stability, verdicts

__all__ = [
    "Comparison", "HeatReview", "HotPoint", "MissionResult", "Rating", "RatingBench", "RatingPoint", "Stability", "Stopped", "Study", "StudySpec", "Verdict",
    "check_parts", "check_rows", "compare", "load_study", "rating_point", "review_heat", "run", "stability", "verdicts",
]
