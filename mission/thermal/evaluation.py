"""One measured curve from its record to branches for a module file, alone or beside a second one on another interface.

The steps are those of :mod:`mission.thermal.measured`; here they are put in a row, and what is doubtful about the answer is gathered.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from ..checks import require_range
from ..device.fitting import FosterFit, fit_foster
from ..errors import InputError, RangeError
from .assembly import NetworkBuilder
from .layers import Material
from .measured import (
    MeasuredImpedance,
    Separation,
    StructureFunction,
    ThermalRecord,
    TimeConstantSpectrum,
    fit_branches,
    half_space_slope_k_per_sqrt_s,
    impedance,
    separation,
    structure_function,
    time_constant_spectrum,
)
from .networks import CauerLadder

#: Relative residual of the branches from which it is told as a doubt.
GOOD_FIT = 0.01
#: Relative residual of the spectrum, at its largest, from which it is told as a doubt.
GOOD_SPECTRUM = 0.05
#: Difference of the heated area from the stated one that the law of the square root leaves without a word.
GOOD_AREA = 0.1
#: Difference of the early slopes per watt of one chip, on two interfaces, that is left without a word.
GOOD_SLOPE = 0.05
#: Difference of the two ways to find the case from which it is told as a doubt.
GOOD_SEPARATION = 0.1


@dataclass(frozen=True)
class CurveEvaluation:
    """What a record says.

    Attributes
    ----------
    measured : MeasuredImpedance
    fit : FosterFit
        Branches of the whole curve, from the first sample that counts on.
    spectrum : TimeConstantSpectrum
    structure : StructureFunction
    second : MeasuredImpedance or None
        The curve on the other interface.
    parted : Separation or None
        Where the two part.
    case_r_k_per_w : float or None
        Resistance at which the way is cut: the case [K/W].
    case_why : str
        Where that number comes from, in words.
    case_fit : FosterFit or None
        Branches from the junction to the case, the case held at one temperature.
    area_found_mm2 : float or None
        Heated area that the slope over the square root of time speaks for [mm2].
    doubts : tuple of str
        What to mistrust, in sentences.
    """

    measured: MeasuredImpedance
    fit: FosterFit
    spectrum: TimeConstantSpectrum
    structure: StructureFunction
    second: MeasuredImpedance | None
    parted: Separation | None
    case_r_k_per_w: float | None
    case_why: str
    case_fit: FosterFit | None
    area_found_mm2: float | None
    doubts: tuple[str, ...]


def ladder_up_to(structure: StructureFunction, r_k_per_w: float) -> CauerLadder:
    """The first part of a structure function, cut where a resistance has been passed.

    Parameters
    ----------
    structure : StructureFunction
    r_k_per_w : float
        Above zero and below the end of the structure function [K/W].

    Returns
    -------
    CauerLadder
        Its resistances add up to ``r_k_per_w``.

    Raises
    ------
    RangeError
        A cut that lies outside.

    Examples
    --------
    >>> whole = structure_function(CauerLadder([0.1, 0.2, 0.3], [0.01, 1.0, 100.0]))
    >>> part = ladder_up_to(whole, 0.2)
    >>> part.r_k_per_w.round(3).tolist(), part.c_j_per_k.round(3).tolist()
    ([0.1, 0.1], [0.01, 1.0])
    """
    end = float(structure.r_k_per_w[-1])
    cut = float(require_range("r_k_per_w", r_k_per_w, low=0.0, low_open=True, high=end, high_open=True, unit="K/W"))
    held = int(np.searchsorted(structure.r_k_per_w, cut))
    r = np.diff(np.concatenate([[0.0], structure.r_k_per_w[:held], [cut]]))
    return CauerLadder(r, np.diff(structure.c_j_per_k[: held + 1], prepend=0.0))


def branches_up_to(structure: StructureFunction, r_k_per_w: float, *, first_s: float, branches: int | None = None) -> FosterFit:
    """Foster branches of a way that is cut where a resistance has been passed, the cut held at one temperature.

    That is what a module file calls branches to the case.

    Parameters
    ----------
    structure : StructureFunction
    r_k_per_w : float
        Above zero and below the end of the structure function [K/W].
    first_s : float
        The branches hold from this time on [s], > 0.
    branches : int, optional
        1 to 8; without it as many as are needed.

    Returns
    -------
    FosterFit
        Its residuals count from the cut ladder. The branches are scaled to add up to ``r_k_per_w``, by less than the residual.

    Raises
    ------
    RangeError
        A cut outside the structure function, or so early that the way is settled at ``first_s``.

    Notes
    -----
    A deconvolved structure function is blunt, but the impedance up to the cut hardly knows it: on a layered stack of seven plates with
    0.04 K of noise on swings of 64 and 105 K, cut at the true resistance, it was right within 0.6 and 1.4 % from 1 ms on.
    A wrong resistance goes into the late part in full.
    """
    first = float(require_range("first_s", first_s, low=0.0, low_open=True, unit="s"))
    builder = NetworkBuilder()
    junction = builder.ladder(ladder_up_to(structure, r_k_per_w), None)
    network = builder.build([junction], [junction])
    slowest_s = 1.0 / float(network.shapes()[0][0])
    last = 8.0 * slowest_s
    if not last > 10.0 * first:
        raise RangeError("r_k_per_w", f"{r_k_per_w:.4g} K/W, which is passed after {slowest_s:.2g} s",
                         f"a resistance that heat needs clearly more than {first:.2g} s to pass", "the record begins too late for it")
    t = np.geomspace(first, last, int(np.ceil(20 * np.log10(last / first))) + 1)
    fit = fit_foster(t, network.step_response_k_per_w(t, 0)[:, 0], branches=branches, good=GOOD_FIT, where=structure.label)
    return replace(fit, r_k_per_w=tuple(r * r_k_per_w / fit.r_total_k_per_w for r in fit.r_k_per_w))


def evaluate_curve(
    record: ThermalRecord,
    against: ThermalRecord | None = None,
    *,
    window_s: tuple[float, float] | None = None,
    start_c: float | None = None,
    against_start_c: float | None = None,
    branches: int | None = None,
    chip_area_mm2: float | None = None,
    chip_material: Material | None = None,
    case_at_k_per_w: float | None = None,
) -> CurveEvaluation:
    """Impedance, branches and structure function of a record; with a second one the case as well.

    Parameters
    ----------
    record : ThermalRecord
    against : ThermalRecord, optional
        The same device on an interface that is better or worse, at much the same power.
    window_s : (float, float), optional
        Window of the square-root law [s], for both records; without it one is looked for in each.
    start_c, against_start_c : float, optional
        Temperature at the step, where it is known: for both records or for none [degC].
    branches : int, optional
        1 to 8; without it as many as are needed.
    chip_area_mm2, chip_material : float and Material, optional
        Heated area and what it consists of: the early slope is held against them.
    case_at_k_per_w : float, optional
        Resistance to the case, where it is known [K/W]; without it the middle of the two ways of :func:`mission.thermal.measured.separation`, or the
        one that there is.

    Returns
    -------
    CurveEvaluation

    Raises
    ------
    InputError
        What the steps refuse; a start for one record only.
    RangeError
        Numbers out of range.
    """
    if against is not None and (start_c is None) != (against_start_c is None):
        raise InputError("start_c", "a start for one of the two records", "a start for both, or for none",
                         "state the temperature at the step of each")
    if against is None and against_start_c is not None:
        raise InputError("against_start_c", f"{against_start_c:g} degC", "none without a second record")
    if (chip_area_mm2 is None) != (chip_material is None):
        raise InputError("chip_area_mm2", "an area or a material alone", "both or neither")
    if case_at_k_per_w is not None:
        require_range("case_at_k_per_w", case_at_k_per_w, low=0.0, low_open=True, unit="K/W")
    measured = impedance(record, window_s=window_s, start_c=start_c)
    # branches for times that no sample saw would be branches of the law
    seen = ~measured.extrapolated
    fit = fit_branches(replace(measured, time_s=measured.time_s[seen], z_th_k_per_w=measured.z_th_k_per_w[seen]), branches=branches, good=GOOD_FIT)
    spectrum = time_constant_spectrum(measured)
    structure = structure_function(spectrum)
    doubts = list(measured.notes)
    if fit.residual_relative > GOOD_FIT:
        doubts.append(f"the branches miss the curve by up to {100 * fit.residual_relative:.2g} %, at {fit.residual_at_s:.3g} s")
    if spectrum.residual_max > GOOD_SPECTRUM:
        doubts.append(f"the spectrum behind the structure function misses the curve by up to {100 * spectrum.residual_max:.2g} %")
    area = None
    if chip_material is not None and measured.start is not None:
        area = chip_area_mm2 * half_space_slope_k_per_sqrt_s(record.power_w, chip_area_mm2, chip_material) / measured.start.slope_k_per_sqrt_s
        if abs(area / chip_area_mm2 - 1.0) > GOOD_AREA:
            doubts.append(
                f"the slope over the square root of time is that of {area:.3g} mm2, {100 * (area / chip_area_mm2 - 1.0):+.2g} % off the stated "
                f"{chip_area_mm2:g} mm2: power, calibration, area or conductivity is wrong, or the window lies too early or too late"
            )
    second = parted = None
    if against is not None:
        second = impedance(against, window_s=window_s, start_c=against_start_c)
        doubts += [f"{second.label}: {note}" for note in second.notes]
        if measured.start is not None:
            steep = second.start.slope_k_per_sqrt_s / second.power_w / measured.start.slope_k_per_sqrt_s * measured.power_w - 1.0
            if abs(steep) > GOOD_SLOPE:
                doubts.append(
                    f"the early slopes per watt differ by {100 * steep:+.2g} %, though the chip is the same: "
                    "state one window for both, check the powers"
                )
        parted = separation(measured, second)
        ways = (parted.r_th_jc_k_per_w, parted.r_structure_k_per_w)
        if None not in ways and abs(ways[1] / ways[0] - 1.0) > GOOD_SEPARATION:
            doubts.append(
                f"the two ways to find the case differ by {100 * (ways[1] / ways[0] - 1.0):+.2g} %; on exact curves of layered stacks the "
                "derivatives came out up to a fifth too low, the structure functions up to a third too high"
            )
    case_r, why = _case(case_at_k_per_w, parted)
    case_fit = None
    if case_r is not None:
        if case_r >= structure.r_k_per_w[-1]:
            raise RangeError("case_at_k_per_w", f"{case_r:.4g} K/W", f"below {structure.r_k_per_w[-1]:.4g} K/W, where {measured.label} ends")
        case_fit = branches_up_to(structure, case_r, first_s=float(measured.time_s[seen][0]), branches=branches)
        if case_fit.residual_relative > GOOD_FIT:
            doubts.append(
                f"the branches to the case miss the cut curve by up to {100 * case_fit.residual_relative:.2g} %, at {case_fit.residual_at_s:.3g} s"
            )
    return CurveEvaluation(measured, fit, spectrum, structure, second, parted, case_r, why, case_fit, area, tuple(doubts))


def _case(stated, parted):
    """Resistance at which the case is taken to be, and where it comes from."""
    if stated is not None:
        return float(stated), "as stated"
    if parted is None or not parted.separates:
        return None, ""
    ways = [r for r in (parted.r_th_jc_k_per_w, parted.r_structure_k_per_w) if r is not None]
    if len(ways) == 2:
        return float(np.mean(ways)), f"the middle of {ways[0]:.4g} K/W by the derivatives and {ways[1]:.4g} K/W by the structure functions"
    return float(ways[0]), "by the derivatives" if parted.r_th_jc_k_per_w is not None else "by the structure functions"
