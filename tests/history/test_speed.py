"""The march must stay fast: a ratio against the plain route, measured in one run."""

import pytest

from .benchmark import ratios


@pytest.mark.slow
def test_thousands_of_times_faster_than_the_plain_route(capsys):
    measured = ratios(window_s=0.05, seconds=500)
    with capsys.disabled():
        for name, (ours, plain) in measured.items():
            print(f"\n{name}: {plain / ours:,.0f} times faster than solve_ivp ({ours * 1e6:.0f} us per second of duty)", end="")
    for name, (ours, plain) in measured.items():
        # machines differ and drift; a tenth of what was measured when this was written
        assert plain / ours > 5_000, name
