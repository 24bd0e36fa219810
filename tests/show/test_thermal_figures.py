"""Pictures of heat: what they say, and that nothing overlaps or leaves the page."""

from __future__ import annotations

import functools
import itertools
from types import SimpleNamespace

import numpy as np
import pytest
from matplotlib.text import Text

from mission.errors import InputError, RangeError
from mission.show.thermal_figures import (
    impedance_figure,
    measured_figure,
    separation_figure,
    stack_drops,
    stack_figure,
    step_response_k_per_w,
    structure_figure,
)
from mission.thermal import FixedCooling, FosterCooling, FosterNetwork, NetworkBuilder, foster_to_cauer, load_materials, reduce_to_modes, stack_ladder
from mission.thermal.measured import fit_branches, impedance, separation, structure_function, thermal_record

from .pages import check_texts, drawn, tick_labels

NASTY = '<script>alert(1)</script> & $\\frac{1}{0}$ "quoted" and long'
T = np.geomspace(1e-4, 300.0, 800)
COOLING = FixedCooling(kind="fixed", r_th_k_per_w=0.02)
NAMES = ("silicon", "solder", "copper", "alumina", "copper below")


@functools.cache
def network(n=4):
    """Chips on one sink, the first two on one case."""
    builder = NetworkBuilder()
    sink = builder.node(500.0)
    builder.to_coolant(sink, 0.05)
    cases = [builder.node(20.0) for _ in range(max(1, n // 2))]
    for case in cases:
        builder.resistance(case, sink, 0.04)
    ladder = foster_to_cauer(FosterNetwork([0.01, 0.05, 0.06], [1e-3, 2e-2, 2e-1]))
    where = [cases[min(k // 2, len(cases) - 1)] for k in range(n)]
    return builder.build([builder.ladder(ladder, c) for c in where], where)


@functools.cache
def curve(rest=0.5, label="dry", noise_k=0.02, kind="cooling"):
    foster = FosterNetwork([0.02, 0.03, 0.12, rest], [2e-4, 4e-3, 6e-2, 10.0 * rest])
    rise = 80.0 * foster.z_k_per_w(T) + noise_k * np.random.default_rng(len(label)).standard_normal(T.size)
    values = 120.0 - rise if kind == "cooling" else 20.0 + rise
    return impedance(thermal_record(T, values, power_w=80.0, kind=kind, label=label), window_s=(2e-4, 2e-3))


@functools.cache
def parted(second=0.1):
    return separation(curve(), curve(second, "grease"))


@functools.cache
def stack():
    parts = (("silicon", 0.2), ("solder-snag", 0.1), ("copper", 0.3), ("alumina-96", 0.38), ("copper", 0.3))
    return stack_ladder([SimpleNamespace(material=m, thickness_mm=d, spread_deg=45.0, width_mm=None if k else 10.0, length_mm=None if k else 10.0)
                         for k, (m, d) in enumerate(parts)], load_materials())


def drops(**more):
    usual = {"power_w": 150.0, "cooling": COOLING, "coolant_c": 60.0, "case_to_sink_k_per_w": 0.1, "sink_power_w": 900.0}
    return stack_drops(stack(), NAMES, **usual | more)


def words(figure):
    return [t.get_text() for t in figure.findobj(Text) if t.get_text().strip()]


FIGURES = {
    "full": lambda: impedance_figure(network()), "reduced": lambda: impedance_figure(reduce_to_modes(network()), names=("a", NASTY, "名前", "d")),
    "one chip": lambda: impedance_figure(network(1)), "chosen": lambda: impedance_figure(network(12), chip=3, others=[2, 5, 11], time_s=(1e-3, 10.0)),
    "twelve": lambda: impedance_figure(network(12)),
    "measured": lambda: measured_figure(curve(), fit_branches(curve())), "heating": lambda: measured_figure(curve(kind="heating", label=NASTY)),
    "structures": lambda: structure_figure(parted().structures, parted=parted()),
    "ladder": lambda: structure_figure([structure_function(FosterNetwork([0.1, 0.2], [0.1, 1.0]))]),
    "alike": lambda: structure_figure(parted(0.5).structures, parted=parted(0.5), labels=("one", NASTY)),
    "parted": lambda: separation_figure(parted()), "not parted": lambda: separation_figure(parted(0.5)),
    "stack": lambda: stack_figure(drops()), "bare": lambda: stack_figure(drops(case_to_sink_k_per_w=0.0)),
    "cold": lambda: stack_figure(drops(power_w=0.0, sink_power_w=0.0)),
}


@pytest.mark.parametrize("name", FIGURES)
def test_texts_stay_on_the_page_and_apart(name, tmp_path):
    figure = drawn(FIGURES[name], tmp_path)
    check_texts(figure, tick_labels)
    for ax in figure.axes:
        assert any(u in ax.get_ylabel() + ax.get_xlabel() for u in ("K/W", "J/K", "%", "°C"))


def test_axes_are_told_apart_without_colour():
    ax = impedance_figure(network(12), others=[1, 2]).axes[0]
    styles = {str(line.get_linestyle()) + str(line._dash_pattern) for line in ax.lines[:3]}
    assert len(styles) == 3


def test_reduced_step_response_is_that_of_the_full_network():
    full = network()
    t = np.geomspace(1e-4, 1e3, 40)
    want = full.step_response_k_per_w(t, 1)
    reduced = reduce_to_modes(full, relative_tolerance=1e-4)
    # the bound of the reduction holds for every power, so for a step
    assert (np.abs(step_response_k_per_w(reduced, t, 1) - want) <= reduced.bound_k_per_w[:, 1] * 1.01 + 1e-9).all()
    np.testing.assert_allclose(step_response_k_per_w(full, t, 1), want)


def test_impedance_says_what_it_draws():
    said = " ".join(words(impedance_figure(network(12))))
    assert "chip 1 itself" in said and "alike" in said and "0.2" in said
    assert words(impedance_figure(network(1)))


def test_drops_add_up():
    # Analytic: every part's resistance times its heat.
    parts = drops()
    assert [d.name for d in parts] == [*NAMES, "case to sink", "sink to coolant"]
    np.testing.assert_allclose([d.drop_k for d in parts], [*(150.0 * r for r in stack().r_layers_k_per_w), 15.0, 18.0])
    assert parts[-1].lower_c == pytest.approx(60.0) and all(a.lower_c == b.upper_c for a, b in itertools.pairwise(parts))
    foster = FosterCooling(kind="foster", r_k_per_w=[0.01, 0.02], tau_s=[1.0, 100.0])
    assert drops(cooling=foster)[-1].drop_k == pytest.approx(27.0)
    shown = words(stack_figure(parts))
    assert "coolant 60.0 °C" in shown and f"junction {parts[0].upper_c:.1f} °C" in shown and "15 K (" in " ".join(shown)


def test_separation_says_its_numbers():
    found = parted()
    assert found.separates
    said = " ".join(words(separation_figure(found)))
    assert "K/W, parted at" in said and "threshold" in said
    assert "do not part" in " ".join(words(separation_figure(parted(0.5))))
    assert "do not part" in " ".join(words(FIGURES["alike"]()))


@pytest.mark.parametrize(("make", "error", "word"), [
    (lambda: impedance_figure(network(), chip=9), InputError, "0 to 3"),
    (lambda: impedance_figure(network(), others=[0]), InputError, "without 0"),
    (lambda: impedance_figure(network(), names=["a"]), InputError, "1 names"),
    (lambda: impedance_figure(network(), time_s=(1.0, 0.1)), InputError, "before"),
    (lambda: step_response_k_per_w(network(), [-1.0], 0), RangeError, "time_s"),
    (lambda: structure_figure([]), InputError, "one to four"),
    (lambda: structure_figure(parted().structures, labels=["x"]), InputError, "1 names"),
    (lambda: stack_figure([]), InputError, "at least one"),
    (lambda: drops(power_w=-1.0), RangeError, "power_w"),
    (lambda: drops(sink_power_w=1.0), RangeError, "sink_power_w"),
    (lambda: drops(coolant_c=400.0), RangeError, "coolant_c"),
    (lambda: stack_drops(stack(), ["a"], power_w=1.0, cooling=COOLING, coolant_c=20.0), InputError, "5 layers"),
])
def test_broken_inputs(make, error, word):
    with pytest.raises(error, match=word):
        make()
