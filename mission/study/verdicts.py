"""Limits and target: what is met, by how much."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Verdict:
    """One limit held against its result.

    Attributes
    ----------
    what : str
    value, limit : float
    unit : str
    met : bool
    margin : float
        Positive when met, in the same unit (life: years).
    where : str
        Chip, time or failure mode that decides.
    """

    what: str
    value: float
    limit: float
    unit: str
    met: bool
    margin: float
    where: str


def verdicts(result) -> tuple[Verdict, ...]:
    """Junction limit, peak current and life target of a result."""
    study, history = result.study, result.history
    ratings, limits = study.module.ratings, study.spec.limits
    t_max = ratings.t_vj_op_max_c if limits.t_vj_max_c is None else limits.t_vj_max_c
    hot = history.hottest
    peak = float(history.peak_c[hot])
    out = [Verdict("highest junction temperature", peak, t_max, "degC", peak <= t_max, t_max - peak,
                   f"{history.chips[hot]} at {history.peak_time_s[hot]:.6g} s in '{history.phases[history.peak_phase_id[hot]]}'")]
    i_max = ratings.i_peak_repetitive_a if limits.i_peak_max_a is None else limits.i_peak_max_a
    out.append(Verdict("highest peak phase current", result.i_peak_max_a, i_max, "A", result.i_peak_max_a <= i_max, i_max - result.i_peak_max_a, "duty"))
    target = study.spec.lifetime.target_years
    if target is not None:
        worst = result.ledger.worst()
        if worst is not None:
            out.append(Verdict("life", worst.life_years, target, "years", worst.life_years >= target, worst.life_years - target,
                               f"{worst.chip}, {worst.mode}"))
    return tuple(out)
