"""Doors and limits of the closed formulas for joints."""

import pytest

from mission.errors import RangeError
from mission.lifetime import board_solder_term, norris_landzberg_factor


def test_test_equal_to_use_accelerates_nothing():
    assert norris_landzberg_factor(60, 60, 4, 4, 90, 90) == 1.0  # analytic


def test_there_and_back_is_one():
    there, back = norris_landzberg_factor(100, 60, 24, 1, 100, 80), norris_landzberg_factor(60, 100, 1, 24, 80, 100)
    assert there * back == pytest.approx(1.0, rel=1e-12)  # analytic


@pytest.mark.parametrize(("place", "value", "name"), [(0, 0.0, "test_k"), (1, -5.0, "use_k"), (2, 0.0, "test_per_day"), (3, float("nan"), "use_per_day"),
                                                      (4, -273.15, "test_max_c"), (5, float("inf"), "use_max_c")])
def test_norris_landzberg_refuses(place, value, name):
    args = [100.0, 60.0, 24.0, 1.0, 100.0, 80.0]
    args[place] = value
    with pytest.raises(RangeError, match=name):
        norris_landzberg_factor(*args)


@pytest.mark.parametrize(("place", "value", "name"), [(0, -1.0, "cycles"), (1, 0.0, "phase_h"), (2, -1.0, "heating_h"), (3, -4.0, "swing_k"), (4, -273.0, "max_c")])
def test_board_solder_term_refuses(place, value, name):
    args = [2.0, 24.0, 4.0, 40.0, 60.0]
    args[place] = value
    with pytest.raises(RangeError, match=name):
        board_solder_term(*args)
