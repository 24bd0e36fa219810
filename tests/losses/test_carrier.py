"""The loss models against a leg switched by a carrier, after that code has been held against closed forms.

First part: :mod:`.carrier` reproduces published and analytic figures. Second part: ``leg_losses_w``
against it (*independent code*) for every modulation and every kind of device, at operating points drawn at random.
Conduction has to agree within 0.1 % and switching within 0.5 % of the most loaded chip of the leg.
"""

import zlib

import numpy as np
import pytest
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st

from mission.device import module_from_dict
from mission.losses import Modulation, leg_losses_w

from ..device.factories import straight_line_data, straight_line_module
from . import carrier
from .carrier import MODULATIONS, OVERMODULATED, SIX_STEP, switched_average
from .factories import power_law_module
from .kinds import FREE_GATE, MODULES

REFERENCE = straight_line_module()
COMMON = {"t_vj_c": 125.0, "switching_frequency_hz": 8000.0, "v_dc_v": 600.0}


def average(module, modulation, i, m, phi, **changes):
    return switched_average(module, modulation, i_peak_a=i, mod_index=m, phi_rad=phi, **{**COMMON, **changes})


# ------------------------------------------------------------------ the carrier against closed forms

# Published: F. Casanellas, "Losses in PWM inverters using IGBTs", IEE Proc. Electr. Power Appl. 141 (1994) 235-239 (the formula), with
# the device of straight_line_module at 150 A peak; figures re-derived.
@pytest.mark.parametrize(("m", "cos_phi", "switch_w", "diode_w"), [
    (1.0, 1.0, 69.5599, 6.7804), (1.0, 0.85, 64.8800, 11.0637), (0.8, 0.8, 58.3282, 17.0603),
    (0.5, 0.85, 51.6205, 23.1998), (0.1, 0.5, 39.9209, 33.9081), (0.0, 1.0, 38.3609, 35.3358),
])
@pytest.mark.parametrize("lagging", [1.0, -1.0])
def test_sine_conduction(m, cos_phi, switch_w, diode_w, lagging):
    found = average(REFERENCE, "sine", 150.0, m, lagging * np.arccos(cos_phi))
    np.testing.assert_allclose(found.conduction_w, [switch_w, switch_w, diode_w, diode_w], rtol=0.0, atol=1e-4)


# Published: J. W. Kolar, H. Ertl, F. C. Zach, "Influence of the modulation method on the conduction and switching losses of a PWM
# converter system", IEEE Trans. Ind. Appl. 27 (1991) 1063-1075 (the method); figures re-derived.
@pytest.mark.parametrize(("m", "cos_phi", "switch_w", "diode_w"), [
    (1.0, 1.0, 69.0824, 7.1385), (1.154701, 0.85, 69.0341, 7.2701), (1.0, 0.5, 54.4379, 20.7000),
])
def test_third_harmonic_conduction(m, cos_phi, switch_w, diode_w):
    found = average(REFERENCE, "third-harmonic", 150.0, min(m, 2 / np.sqrt(3)), np.arccos(cos_phi))
    np.testing.assert_allclose(found.conduction_w, [switch_w, switch_w, diode_w, diode_w], rtol=0.0, atol=1.5e-4)


# Analytic: integral of the min-max zero sequence against sin^2 (cf. Kolar, Ertl, Zach 1991), as change of the slope term over m r I^2.
@pytest.mark.parametrize(("deg", "g"), {0: -0.00437845, 10: -0.00379904, 20: -0.00220342, 30: 0.0, 45: 0.00310847, 60: 0.00437845, 90: 0.0}.items())
def test_space_vector_conduction(deg, g):
    m, ratio = 0.9, 8009  # the zero sequence has kinks, which a slower carrier rounds
    vector, sine = (average(REFERENCE, name, 150.0, m, np.radians(deg), carrier_ratio=ratio) for name in ("space-vector", "sine"))
    change = vector.conduction_w - sine.conduction_w
    np.testing.assert_allclose(change / (m * 150.0**2) / [6.0e-3, 6.0e-3, -4.5e-3, -4.5e-3], g, rtol=0.0, atol=3e-8)


# Published: A. M. Hava, R. J. Kerkman, T. A. Lipo, "A high-performance generalized discontinuous PWM algorithm", IEEE Trans. Ind. Appl. 34
# (1998) 1059-1071: 1 - cos(phi)/2 up to 60 degrees, then (sqrt 3)/2 sin(phi), for energies linear in current.
# Allowed: one switching more or less at each edge of the held stretches, of 8010 a period.
@pytest.mark.parametrize(("deg", "factor"), [(0, 0.50000), (15, 0.51704), (30, 0.56699), (60, 0.75000), (90, 0.86603), (-60, 0.75), (180, 0.5)])
def test_switching_of_the_clamp_at_voltage_peaks(deg, factor):
    held, free = (average(REFERENCE, name, 150.0, 0.8, np.radians(deg), carrier_ratio=8010) for name in ("clamp-60-voltage-peak", "sine"))
    np.testing.assert_allclose(held.switching_w / free.switching_w, factor, rtol=0.0, atol=6e-4)


# Analytic, for energies linear in current. Held around the current's peak: half, as far as the stretch can follow (30 degrees), beyond as the
# clamp at the voltage peaks 30 degrees nearer. Four times 30 degrees: 1 - (cos 30 - cos 60) at 0 and 90 degrees. At one rail:
# of the loaded upper switch 1 - cos 30 is left at 0 degrees, and all of the lower one.
@pytest.mark.parametrize(("modulation", "deg", "upper", "lower"), [
    ("clamp-60-current-peak", 0, 0.5, 0.5), ("clamp-60-current-peak", 25, 0.5, 0.5), ("clamp-60-current-peak", -25, 0.5, 0.5),
    ("clamp-60-current-peak", 160, 0.5, 0.5), ("clamp-60-current-peak", -160, 0.5, 0.5), ("clamp-60-current-peak", -150, 0.5, 0.5),
    ("clamp-60-current-peak", 70, 0.616978, 0.616978), ("clamp-60-current-peak", 110, 0.616978, 0.616978),
    ("clamp-30", 0, 0.633975, 0.633975), ("clamp-30", 90, 0.633975, 0.633975), ("clamp-30", -90, 0.633975, 0.633975),
    ("clamp-120-upper", 0, 0.133975, 1.0), ("clamp-120-upper", 180, 1.0, 0.133975), ("clamp-120-lower", 0, 1.0, 0.133975),
])
def test_switching_of_the_other_clamps(modulation, deg, upper, lower):
    held, free = (average(REFERENCE, name, 150.0, 0.8, np.radians(deg), carrier_ratio=8010) for name in (modulation, "sine"))
    np.testing.assert_allclose(held.switching_w[:2] / free.switching_w[:2], [upper, lower], rtol=0.0, atol=6e-4)
    np.testing.assert_allclose(held.switching_w[2:] / free.switching_w[2:], [lower, upper], rtol=0.0, atol=6e-4)


# Published exponents: A. Wintrich, U. Nicolai, W. Tursky, T. Reimann, "Application Manual Power Semiconductors", 2nd ed. 2015, ch. 5 (from
# memory); the arithmetic f E g(K)/2 (I/Iref)^K (V/Vref)^Kv (1 + TC (T - Tref)) is re-derived. The diode's energy is steep at zero current.
def test_switching_loss_numbers():
    found = average(power_law_module(), "sine", np.sqrt(2) * 100.0, 0.8, 0.3, t_vj_c=110.0, v_dc_v=560.0, carrier_ratio=16001)
    np.testing.assert_allclose(found.switching_w, [62.6669, 62.6669, 24.6730, 24.6730], rtol=0.0, atol=1e-3)


def resistor_mosfet(r_ohm=5e-3):
    """Channel r i both ways, body diode of the reference device (it starts at 0.95 V)."""
    data = straight_line_data()
    data["kind"] = "mosfet"
    del data["diode"]["thermal"]
    ends_a = [10.0, 600.0]
    data["switch"]["on_state"] = {"curve": [{"t_vj_c": t, "current_a": ends_a, "voltage_v": [r_ohm * i for i in ends_a]} for t in (25.0, 125.0)]}
    return module_from_dict(data)


@pytest.mark.parametrize(("m", "phi"), [(0.0, 0.0), (0.9, 0.4), (0.5, 2.8)])
def test_mosfet_is_a_resistor(m, phi):
    """Analytic: R I^2/4 a switch, whatever the modulation index and displacement, while R I stays below the diode's start."""
    np.testing.assert_allclose(average(resistor_mosfet(), "space-vector", 180.0, m, phi).conduction_w, 5e-3 * 180.0**2 / 4, rtol=1e-6)


def test_body_diode_helps_and_takes_the_dead_time():
    """Analytic, m = 0: half the time each way; beyond 0.95 V backwards with both; 2 t_d f_sw of the time with the diode alone."""
    theta = (np.arange(100_000) + 0.5) * np.pi / 100_000
    i, moved = 400.0 * np.sin(theta), 2e-6 * 8e3
    forward, alone = 5e-3 * i, 0.95 + 4.5e-3 * i
    both = np.where(5e-3 * i <= 0.95, 5e-3 * i, (i + 0.95 / 4.5e-3) / (1 / 5e-3 + 1 / 4.5e-3))
    want = (i * (forward * 0.5 + both * (0.5 - 2 * moved) + alone * 2 * moved)).mean() / 2
    found = average(resistor_mosfet(), "sine", 400.0, 0.0, 0.0, dead_time_s=2e-6, dead_time_compensated=True)
    np.testing.assert_allclose(found.conduction_w, want, rtol=1e-6)
    # not corrected: forward t_d f_sw less, freewheeling t_d f_sw more, of which the gated channel has the rest of 2 t_d f_sw
    late = (i * (forward * (0.5 - moved) + both * (0.5 - moved) + alone * 2 * moved)).mean() / 2
    np.testing.assert_allclose(average(resistor_mosfet(), "sine", 400.0, 0.0, 0.0, dead_time_s=2e-6).conduction_w, late, rtol=1e-4)


def test_channel_and_body_diode_share_the_current():
    """Analytic: R beside V0 + r i. Below V0 the channel alone, above it i = v/R + (v - V0)/r."""
    current, volts = carrier.in_parallel((np.array([0.0, 1e4]), np.array([0.0, 100.0])), (np.array([0.0, 1e4]), np.array([0.8, 40.8])))
    i = np.array([0.0, 40.0, 80.0, 100.0, 300.0])
    want = np.where(i <= 80.0, 0.01 * i, (i + 0.8 / 4e-3) / (1 / 0.01 + 1 / 4e-3))
    np.testing.assert_allclose(np.interp(i, current, volts), want, rtol=1e-12)


def three_level(arrangement):
    """Outer switches of the reference device; every element alike."""
    data = straight_line_data(arrangement=arrangement)
    data["inner_switch"], data["inner_diode"] = data["switch"], data["diode"]
    if arrangement == "npc-leg":
        data["clamp_diode"] = data["diode"]
    return module_from_dict(data)


@pytest.mark.parametrize("arrangement", ["npc-leg", "t-type-leg"])
@pytest.mark.parametrize(("m", "deg"), [(1.0, 0.0), (0.8, 35.0), (0.6, 120.0), (0.9, 180.0)])
def test_three_level_conduction(arrangement, m, deg):
    """Analytic: integrals of the shares |r| and 1 - |r| over the stretches where current and reference agree in sign or not."""
    phi, i = np.radians(deg), 150.0
    found = average(three_level(arrangement), "sine", i, m, phi)
    got = dict(zip(found.positions, found.conduction_w))
    s, c = np.sin(phi), np.cos(phi)
    p_v, p_r = m / (4 * np.pi) * ((np.pi - phi) * c + s), m * (1 + c) ** 2 / (6 * np.pi)  # of i > 0 at the rail of the same sign
    n_v, n_r = m / (4 * np.pi) * (s - phi * c), m * (1 - c) ** 2 / (6 * np.pi)  # at the other rail
    z_v, z_r = 1 / np.pi - p_v - n_v, 0.25 - p_r - n_r

    def watts(v0_v, r_ohm, v, r):
        return v0_v * i * v + r_ohm * i**2 * r

    switch, diode = (0.90, 6.0e-3), (0.95, 4.5e-3)
    want = {"SO": watts(*switch, p_v, p_r), "DO": watts(*diode, n_v, n_r)}
    if arrangement == "npc-leg":
        want |= {"SI": watts(*switch, p_v + z_v, p_r + z_r), "DI": want["DO"], "DC": watts(*diode, z_v, z_r)}
    else:
        want |= {"SI": watts(*switch, z_v, z_r), "DI": watts(*diode, z_v, z_r)}
    for name, value in want.items():
        for side in ("up", "lo"):
            assert got[f"{name}-{side}"] == pytest.approx(value, abs=2e-3), name


@pytest.mark.parametrize("arrangement", ["npc-leg", "t-type-leg"])
def test_three_level_switching(arrangement):
    """Analytic, energies linear in current: the half wave splits at the reference's zero; half the link is commutated."""
    phi = np.radians(40.0)
    found = average(three_level(arrangement), "sine", 150.0, 0.9, phi, carrier_ratio=8010)
    got = dict(zip(found.positions, found.switching_w))
    agree, differ = 0.5 * (1 + np.cos(phi)), 0.5 * (1 - np.cos(phi))  # shares of the mean current
    switch, diode = (8e3 * e_j / np.pi * 0.5**k for e_j, k in ((0.030, 1.35), (0.010, 0.6)))
    want = {"SO": switch * agree, "SI": switch * differ, "DO": diode * differ}
    want |= {"DC": diode * agree, "DI": 0.0} if arrangement == "npc-leg" else {"DI": diode * agree}
    for name, value in want.items():
        for side in ("up", "lo"):
            assert got[f"{name}-{side}"] == pytest.approx(value, rel=2e-3, abs=1e-12), name


@pytest.mark.parametrize("deg", [20.0, 160.0])
def test_dead_time_moves_conduction(deg):
    """Analytic: t_d f_sw of the time passes from switch to diode; a straight line's mean over the half wave is V0 I/pi + r I^2/4."""
    phi, moved = np.radians(deg), 2e-6 * 8e3
    late = average(REFERENCE, "sine", 150.0, 0.8, phi, dead_time_s=2e-6)
    ideal = average(REFERENCE, "sine", 150.0, 0.8, phi)
    corrected = average(REFERENCE, "sine", 150.0, 0.8, phi, dead_time_s=2e-6, dead_time_compensated=True)
    change = moved * np.array([-(0.90 * 150 / np.pi + 6.0e-3 * 150**2 / 4), 0.95 * 150 / np.pi + 4.5e-3 * 150**2 / 4])
    np.testing.assert_allclose(late.conduction_w - ideal.conduction_w, change[[0, 0, 1, 1]], rtol=2e-3)
    np.testing.assert_allclose(corrected.conduction_w, ideal.conduction_w, rtol=1e-6)
    np.testing.assert_allclose(late.switching_w, ideal.switching_w, rtol=1e-3)
    # the voltage lost is a square wave of 2 t_d f_sw against the current's sign: fundamental 4/pi of it
    lost = 4 / np.pi * 2 * moved
    np.testing.assert_allclose(late.fundamental, [0.8 - lost * np.cos(phi), lost * np.sin(phi)], atol=2e-4)


def test_pulses_shorter_than_the_dead_time_vanish():
    """Analytic: generating, the upper pulse (1 - m sin(theta))/2 carries positive current; below t_d f_sw it neither conducts nor switches."""
    m, share, ratio = 0.98, 0.05, 4001
    late = average(REFERENCE, "sine", 150.0, m, np.pi, dead_time_s=share / 8e3, carrier_ratio=ratio)
    gone = 1.0 - 2.0 / np.pi * np.arcsin((1 - 2 * share) / m)  # of all pulses
    assert late.events == pytest.approx(2 * ratio * (1.0 - gone), abs=4)
    assert gone > 0.2


@pytest.mark.parametrize(("modulation", "limit"), {"sine": 1.0, "third-harmonic": 2 / np.sqrt(3), "space-vector": 2 / np.sqrt(3),
                                                   "third-harmonic-quarter": 1 / (7 / 6 * np.sqrt(7 / 12)), "clamp-30": 2 / np.sqrt(3)}.items())
def test_linear_limits(modulation, limit):
    """Analytic: highest point of the reference; sin x + sin(3x)/4 is highest where sin^2 x = 7/12."""
    assert carrier.linear_limit_cached(modulation) == pytest.approx(limit, abs=1e-9)


@pytest.mark.parametrize("amplitude", [1.01, 1.3, 2.0, 10.0])
def test_clipped_sine(amplitude):
    """Analytic: fundamental (2/pi)(A asin(1/A) + sqrt(1 - 1/A^2)) of a sine of amplitude A cut at 1."""
    fundamental = 2 / np.pi * (amplitude * np.arcsin(1 / amplitude) + np.sqrt(1 - 1 / amplitude**2))
    assert carrier.clipped_amplitude("sine", fundamental) == pytest.approx(amplitude, rel=1e-5)


@pytest.mark.parametrize("modulation", MODULATIONS)
@pytest.mark.parametrize("kind", ["igbt", "npc-leg"])
def test_the_output_has_the_fundamental_asked_for(modulation, kind):
    """What every modulation must keep: the zero sequence leaves the fundamental alone, clipping is made up for."""
    cases = [(0.3, 0.3), (0.95, -2.0), (0.7, 1.4)] + ([(1.2, 0.5), (1.26, 2.5), (SIX_STEP, 1.0)] if modulation in OVERMODULATED else [])
    for m, phi in cases:
        found = average(MODULES[kind], modulation, 100.0, m, phi, overmodulation=True)
        # where references jump, a half carrier more or less
        np.testing.assert_allclose(found.fundamental, [m, 0.0], atol=2e-3)


# ------------------------------------------------------------------ the loss models against the carrier

BATCH, BATCHES = 10, 5
DRAWN = {"max_examples": BATCHES, "derandomize": True, "deadline": None, "suppress_health_check": list(HealthCheck),
         "phases": (Phase.explicit, Phase.generate)}  # a batch that fails is printed as it is: making it smaller would take minutes
ONE_OF_EACH = ("igbt", "igbt-schottky", "reverse-conducting-igbt", "mosfet", "mosfet with reverse curves", "npc-leg", "t-type-leg")


@st.composite
def batches(draw, kind, modulation, overmodulated=False, dead=False):
    """Operating points (n,) of one module at one set of temperatures: evenly spread, and two that like the corners."""
    n_positions = len(carrier.Leg(MODULES[kind], 25.0).positions)
    limit = carrier.linear_limit_cached(modulation) * (1.0 - 1e-9)
    low, high = (limit, SIX_STEP - 1e-3) if overmodulated else (0.02, limit)
    ranges = {"i_peak_a": (1.0, 500.0), "mod_index": (low, high), "phi_rad": (-np.pi, np.pi), "switching_frequency_hz": (500.0, 20e3),
              "v_dc_v": (150.0, 950.0)}
    any_number = np.random.default_rng([draw(st.integers(0, 2**32 - 1)), zlib.crc32(f"{kind} {modulation}".encode())])
    case = {}
    for name, (a, b) in ranges.items():
        case[name] = np.concatenate([any_number.uniform(a, b, BATCH - 2), draw(st.lists(st.floats(a, b), min_size=2, max_size=2))])
    # at exactly 90 degrees the current's peak is as far from either peak of the voltage
    case["phi_rad"] = np.where(np.abs(np.cos(case["phi_rad"])) < 1e-6, case["phi_rad"] + 1e-5, case["phi_rad"])
    case["t_vj_c"] = any_number.uniform(-20.0, 175.0, n_positions)
    if kind in FREE_GATE:
        case["r_gate_on_ohm"], case["r_gate_off_ohm"] = any_number.uniform(1.0, 10.0, 2).tolist()
    if dead:
        case["dead_time_s"] = float(any_number.uniform(0.1e-6, 4e-6))
    return case


def ratio_for(kind, modulation):
    """Where references jump, some events more or less; a three-level leg has them spread over more chips, a MOSFET its dead times at them."""
    if modulation in ("clamp-60-voltage-peak", "clamp-60-current-peak", "clamp-30"):
        return 8010 if MODULES[kind].arrangement in ("npc-leg", "t-type-leg") else 4002
    return 2003


def one_by_one(case):
    """The operating points of a batch as keyword arguments of the carrier."""
    n = case["i_peak_a"].size
    for k in range(n):
        yield k, {key: float(v[k]) if np.ndim(v) else v for key, v in case.items() if key != "t_vj_c"}


def deviations(kind, modulation, case, *, carrier_ratio, **both):
    """``leg_losses_w`` over a batch against the carrier at every point of it.

    Yields the point, both results, and the largest deviations of conduction and switching [W].
    """
    module, leg = MODULES[kind], carrier.Leg(MODULES[kind], case["t_vj_c"])
    f = case["switching_frequency_hz"] / carrier_ratio
    found = leg_losses_w(module, Modulation(modulation), frequency_hz=f, **case, **both)
    for k, point in one_by_one(case):
        want = switched_average(leg, modulation, carrier_ratio=carrier_ratio, **point, **both)
        assert want.positions == found.positions
        conduction, switching = np.abs(found.conduction_w[:, k] - want.conduction_w).max(), np.abs(found.switching_w[:, k] - want.switching_w).max()
        point["t_vj_c"] = case["t_vj_c"]
        yield point, (found.conduction_w[:, k], found.switching_w[:, k]), want, conduction, switching


def compare(kind, modulation, case, *, carrier_ratio, edge=False, **both):
    """Hold conduction to 0.1 % and switching to 0.5 % of the most loaded chip.

    ``edge``: allow the switching to differ by one turn-on, turn-off and recovery a period besides.
    """
    for point, found, want, conduction, switching in deviations(kind, modulation, case, carrier_ratio=carrier_ratio, **both):
        assert conduction <= 1e-3 * want.conduction_w.max(), (point, found[0], want.conduction_w)
        # a milliwatt besides: of a few amperes in a chip for hundreds, half a percent is less than one edge of the carrier counts
        allowed = 5e-3 * want.switching_w.max() + 1e-3 + (one_edge_w(MODULES[kind], point, carrier_ratio) if edge else 0.0)
        assert switching <= allowed, (point, found[1], want.switching_w)


def one_edge_w(module, point, carrier_ratio):
    """Everything that a chip can do once more in a period, at the current's peak; of the chip for which that is most."""
    leg = carrier.Leg(module, point["t_vj_c"])
    r_on, r_off = point.get("r_gate_on_ohm", module.gate.r_on_ohm), point.get("r_gate_off_ohm", module.gate.r_off_ohm)
    i, v = np.array([point["i_peak_a"]]), point["v_dc_v"] / (leg.levels - 1)
    sums = dict.fromkeys(leg.positions, 0.0)
    for switch, diode in set(carrier.SWITCHES[leg.topology].values()):
        sums[switch] += leg.energy_j(switch, "turn_on", i, v, r_on) + leg.energy_j(switch, "turn_off", i, v, r_off)
        sums[leg.position(diode)] += leg.energy_j(diode, "recovery", i, v, r_on)
    return max(sums.values()) * point["switching_frequency_hz"] / carrier_ratio


@pytest.mark.parametrize("modulation", MODULATIONS)
@pytest.mark.parametrize("kind", MODULES)
def test_linear_range(kind, modulation):
    @settings(**DRAWN)
    @given(batches(kind, modulation))
    def check(case):
        compare(kind, modulation, case, carrier_ratio=ratio_for(kind, modulation))

    check()


@pytest.mark.parametrize("modulation", OVERMODULATED)
@pytest.mark.parametrize("kind", ONE_OF_EACH)
def test_overmodulation(kind, modulation):
    """Near six-step a leg switches a few times a period, and the count is whole: one edge more or less, of 2003, is allowed beside the 0.5 %."""
    @settings(**DRAWN)
    @given(batches(kind, modulation, overmodulated=True))
    def check(case):
        compare(kind, modulation, case, carrier_ratio=2003, edge=True, overmodulation=True)

    check()


@pytest.mark.parametrize("modulation", OVERMODULATED)
@pytest.mark.parametrize("kind", ONE_OF_EACH)
def test_six_step(kind, modulation):
    """One turn-on and one turn-off a switch and period, at the voltage's zero; seen within half a carrier, so not near the current's zero."""
    module, phi = MODULES[kind], np.radians([-155.0, -60.0, 25.0, 90.0, 150.0])
    case = {"i_peak_a": np.array([80.0, 390.0, 210.0, 30.0, 300.0]), "mod_index": np.full(5, SIX_STEP), "phi_rad": phi, "v_dc_v": np.full(5, 620.0),
            "switching_frequency_hz": np.array([8e3, 1e3, 3e3, 16e3, 5e3]), "t_vj_c": 100.0}
    compare(kind, modulation, case, carrier_ratio=16001, overmodulation=True)
    one = switched_average(module, modulation, carrier_ratio=501, overmodulation=True, t_vj_c=100.0, **dict(one_by_one(case))[0])
    assert one.events == 2 * (one.positions[0] == "S-up") + 4 * (one.positions[0] == "SO-up")


@pytest.mark.parametrize("modulation", MODULATIONS)
@pytest.mark.parametrize("kind", ["mosfet", "mosfet with reverse curves"])
def test_dead_time_compensated(kind, modulation):
    """The output is as asked for; of a MOSFET the body diode conducts at both edges."""
    @settings(**DRAWN)
    @given(batches(kind, modulation, dead=True))
    def check(case):
        compare(kind, modulation, case, carrier_ratio=ratio_for(kind, modulation), dead_time_compensated=True)

    check()


@pytest.mark.parametrize("modulation", MODULATIONS)
@pytest.mark.parametrize("kind", ["igbt", "igbt-schottky", "reverse-conducting-igbt", "npc-leg", "t-type-leg"])
def test_dead_time_compensated_changes_nothing_without_a_channel(kind, modulation):
    """Analytic: the same elements conduct and switch at the same instants; that case is compared above."""
    @settings(**{**DRAWN, "max_examples": 2})
    @given(batches(kind, modulation, dead=True))
    def check(case):
        late = leg_losses_w(MODULES[kind], Modulation(modulation), dead_time_compensated=True, **case)
        ideal = leg_losses_w(MODULES[kind], Modulation(modulation), **{k: v for k, v in case.items() if k != "dead_time_s"})
        np.testing.assert_allclose(late.conduction_w, ideal.conduction_w, rtol=1e-12)
        np.testing.assert_allclose(late.switching_w, ideal.switching_w, rtol=1e-12)

    check()


@pytest.mark.parametrize("modulation", MODULATIONS)
@pytest.mark.parametrize("kind", [k for k in ONE_OF_EACH if k != "igbt-schottky"])
def test_dead_time(kind, modulation):
    """Turn-on really comes late: a pulse shorter than the dead time neither conducts nor switches.

    Where few pulses outlast it the count is whole: one edge more or less is allowed beside the 0.5 %.
    """
    @settings(**DRAWN)
    @given(batches(kind, modulation, dead=True))
    def check(case):
        compare(kind, modulation, case, carrier_ratio=ratio_for(kind, modulation), edge=True)

    check()


def test_dead_time_in_overmodulation():
    for kind in ("igbt", "mosfet with reverse curves", "t-type-leg"):
        for modulation in OVERMODULATED:
            n = 4
            case = {"i_peak_a": np.linspace(60.0, 400.0, n), "mod_index": np.linspace(1.16, 1.25, n), "phi_rad": np.array([0.3, -1.2, 2.0, -2.9]),
                    "switching_frequency_hz": np.full(n, 8e3), "v_dc_v": np.full(n, 600.0), "t_vj_c": 110.0, "dead_time_s": 1e-6}
            for compensated in (True, False):
                compare(kind, modulation, case, carrier_ratio=2003, edge=True, overmodulation=True, dead_time_compensated=compensated)
