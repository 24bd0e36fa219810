"""A measured heating or cooling curve in words, files and pictures."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np

from ..errors import InputError
from ..thermal.evaluation import CurveEvaluation
from .text import number, one_line


def branches_toml(evaluation: CurveEvaluation, reference: str | None = None) -> str:
    """Branches as a section of a module file.

    Parameters
    ----------
    evaluation : CurveEvaluation
    reference : {"case", "sink"}, optional
        Where the temperatures of the record count from. Not to be given where the way was cut at the case.

    Returns
    -------
    str
        Branches to the case where there are such, or else those of the whole way. Without ``reference`` these lack the line that a module
        file asks for, as the record does not say where they end.

    Raises
    ------
    InputError
        A reference beside a cut, or an unknown one.
    """
    e = evaluation
    if reference is not None and reference not in ("case", "sink"):
        raise InputError("reference", f"'{reference}'", "case or sink")
    if e.case_fit is not None:
        if reference is not None:
            raise InputError("reference", f"'{reference}' beside a way that is cut at the case", "none", "leave it out")
        fit, head = e.case_fit, [f"# junction to case, cut at {e.case_r_k_per_w:.4g} K/W: {e.case_why}"]
        where = 'reference = "case"'
    else:
        fit = e.fit
        head = ["# the whole way, from the junction to where the temperatures of the record count from"]
        where = f'reference = "{reference}"'
        if reference is None:
            head += ["# Water or air? Then find the case first.",
                     '# Did the record count from the case or the sink? Then say so: reference = "case" or "sink"']
            where = "# reference ="
    m = e.measured
    return "\n".join([
        f"# {one_line(m.label, 60)}: {m.kind} curve, step of {m.power_w:g} W", *head, f"# {one_line(fit.message, 300)}", "[switch.thermal]", where,
        f"r_k_per_w = [{', '.join(f'{r:.4g}' for r in fit.r_k_per_w)}]          # {fit.r_total_k_per_w:.4g} K/W",
        f"tau_s = [{', '.join(f'{tau:.4g}' for tau in fit.tau_s)}]",
    ]) + "\n"


def curve_text(evaluation: CurveEvaluation, reference: str | None = None) -> str:
    """What was found, for the terminal.

    Parameters
    ----------
    evaluation : CurveEvaluation
    reference : {"case", "sink"}, optional
        As for :func:`branches_toml`.

    Returns
    -------
    str
    """
    e, m = evaluation, evaluation.measured
    lines = _facts(m)
    if e.area_found_mm2 is not None:
        lines.append(f"  that slope, {number(m.start.slope_k_per_sqrt_s)} K/s^0.5, is the one of a heated area of {number(e.area_found_mm2, 3)} mm2")
    if e.second is not None:
        lines += ["", *_facts(e.second), "", "  the two curves", *(f"    {one}" for one in e.parted.message.split("; "))]
    lines += ["", *(f"  {one}" for one in branches_toml(e, reference).splitlines())]
    if e.case_fit is not None:
        lines += ["", f"  the whole way: {number(e.fit.r_total_k_per_w)} K/W; {one_line(e.fit.message, 300)}"]
    lines += ["", "  to know:", *(f"  - {one_line(one, 400)}" for one in e.doubts or ("nothing stands out",))]
    return "\n".join(lines)


def _facts(measured):
    """The report of a curve without its notes, which stand below with all others; and how far its first sample is off."""
    lines = replace(measured, label=one_line(measured.label, 60), notes=()).to_text().splitlines()
    if measured.start is not None:
        at = measured.raw_time_s[0]
        off_k = measured.raw_z_th_k_per_w[0] * measured.power_w - measured.start.slope_k_per_sqrt_s * at**0.5
        lines.append(f"  the first sample, at {at:.3g} s, lies {off_k if measured.kind == 'heating' else -off_k:+.2g} K off that line")
    return lines


def curve_frames(evaluation: CurveEvaluation):
    """Impedances and structure functions as tables.

    Parameters
    ----------
    evaluation : CurveEvaluation

    Returns
    -------
    impedance : DataFrame
        ``curve``, ``time_s``, ``z_th_k_per_w``, ``dz_dlnt_k_per_w``, ``extrapolated``, and ``branches_k_per_w``: the branches of the whole way,
        from the first sample that counts on.
    structure : DataFrame
        ``curve``, ``r_k_per_w``, ``c_j_per_k``: both summed from the junction on.
    """
    import pandas as pd

    e = evaluation
    parts = []
    for m in (e.measured, e.second):
        if m is not None:
            branches = np.where(m.extrapolated, np.nan, e.fit.z_th_k_per_w(m.time_s)) if m is e.measured else np.nan
            parts.append(pd.DataFrame({
                "curve": m.label, "time_s": m.time_s, "z_th_k_per_w": m.z_th_k_per_w, "dz_dlnt_k_per_w": m.slope_k_per_w,
                "extrapolated": m.extrapolated, "branches_k_per_w": branches}))
    structures = (e.structure,) if e.parted is None else e.parted.structures
    return (pd.concat(parts, ignore_index=True),
            pd.concat([pd.DataFrame({"curve": s.label, "r_k_per_w": s.r_k_per_w, "c_j_per_k": s.c_j_per_k}) for s in structures], ignore_index=True))


def write_curve(evaluation: CurveEvaluation, folder, reference: str | None = None) -> list[Path]:
    """Write branches.toml, impedance.csv, structure.csv, curve.txt and the pictures.

    Parameters
    ----------
    evaluation : CurveEvaluation
    folder : path-like
        Made if it is not there.
    reference : {"case", "sink"}, optional
        As for :func:`branches_toml`.

    Returns
    -------
    list of Path
    """
    from .folder import ResultFolder
    from .thermal_figures import measured_figure, separation_figure, structure_figure

    e = evaluation
    branches, text = branches_toml(e, reference), curve_text(e, reference)
    impedance, structure = (frame.to_csv(index=False, lineterminator="\n", float_format="%.7g") for frame in curve_frames(e))
    figures = {"measured": measured_figure(e.measured, e.fit),
               "structure": structure_figure([e.structure] if e.parted is None else e.parted.structures, parted=e.parted)}
    if e.parted is not None:
        figures["separation"] = separation_figure(e.parted)
    target = ResultFolder(folder)
    return [target.text("branches.toml", branches), target.text("impedance.csv", impedance), target.text("structure.csv", structure),
            target.text("curve.txt", text + "\n"), *target.figures(figures)[0]]
