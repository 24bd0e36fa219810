"""Several results of the same duty side by side."""

from __future__ import annotations

import hashlib
from dataclasses import dataclass

import numpy as np

from ..errors import InputError


@dataclass(frozen=True)
class Side:
    """One result in a comparison.

    Attributes
    ----------
    name, module, technology : str
    energy_kwh, energy_year_kwh : float
        Loss energy of the whole bridge in a mission and in a year.
    switch_energy_kwh, diode_energy_kwh : float
        By kind of chip; a chip that is switch and diode in one counts as a switch.
    peak_c, limit_c : float
    hottest : str
        Chip with the highest temperature.
    largest_swing_k : float
        Largest difference between highest and lowest junction temperature of a chip over the mission.
    loop_gain : float
    life_years : dict of str to float
        Shortest life by failure mode.
    shortest_years : float
        Shortest of all; NaN without failure modes.
    outside_share : float
        Share of the damage behind the shortest life that rests on cycles outside the tested range.
    missed : tuple of str
        Limits that are not met.
    """

    name: str
    module: str
    technology: str
    energy_kwh: float
    energy_year_kwh: float
    switch_energy_kwh: float
    diode_energy_kwh: float
    peak_c: float
    limit_c: float
    hottest: str
    largest_swing_k: float
    loop_gain: float
    life_years: dict[str, float]
    shortest_years: float
    outside_share: float
    missed: tuple[str, ...]


@dataclass(frozen=True)
class Comparison:
    """Results side by side; ``notes`` say where they differ in more than their devices."""

    sides: tuple[Side, ...]
    notes: tuple[str, ...]

    def to_frame(self):
        """One row per result."""
        import pandas as pd

        rows = []
        for s in self.sides:
            row = {k: v for k, v in vars(s).items() if k not in ("life_years", "missed")}
            rows.append(row | {f"life years, {mode}": v for mode, v in s.life_years.items()} | {"missed": "; ".join(s.missed)})
        return pd.DataFrame.from_records(rows)

    def to_json(self) -> str:
        """The same as text; a life without end or not known becomes null."""
        import json

        def known(value):
            if isinstance(value, float):
                return value if np.isfinite(value) else None
            return {k: known(v) for k, v in value.items()} if isinstance(value, dict) else list(value) if isinstance(value, tuple) else value

        return json.dumps({"sides": [{k: known(v) for k, v in vars(s).items()} for s in self.sides], "notes": list(self.notes)}, indent=1)

    def _repr_html_(self) -> str:
        return self.to_frame().set_index("name").T.to_html(escape=True)


def compare(results, names=None) -> Comparison:
    """Set results of one duty side by side.

    Parameters
    ----------
    results : sequence of MissionResult
        At least two.
    names : sequence of str, optional
        What to call them; default the names of their modules, or of the studies where a module occurs twice.

    Returns
    -------
    Comparison

    Raises
    ------
    InputError
        Fewer than two results, a number of names that does not fit, a run that was stopped, or different duties.

    Examples
    --------
    >>> import mission
    >>> study = mission.load_study("profiles/ferry-hour.toml")
    >>> slower = study.changed("inverter", switching_frequency_hz=3000)  # doctest: +SKIP
    >>> mission.compare([mission.run(study), mission.run(slower)], ["5 kHz", "3 kHz"]).to_frame()  # doctest: +SKIP
    """
    results = list(results)
    if len(results) < 2:
        raise InputError("results", f"{len(results)}", "at least two results to compare")
    first = results[0]
    for r in results:
        if not r.complete:
            raise InputError(f"result '{r.study.name}'", "a run that was stopped", "complete runs", "run it to its end")
        if not _same_duty(r.study, first.study):
            raise InputError(f"result '{r.study.name}'", f"the duty {r.study.profile.source}", f"the duty of '{first.study.name}', {first.study.profile.source}",
                             "compare studies of the same duty: lives and energies of different duties say nothing about the devices")
    if names is None:
        modules = [r.study.module.name for r in results]
        names = modules if len(set(modules)) == len(modules) else [r.study.name for r in results]
    names = [str(n) for n in names]
    if len(names) != len(results):
        raise InputError("names", f"{len(names)} names", f"{len(results)}, one for every result")
    return Comparison(tuple(_side(r, n) for r, n in zip(results, names)), tuple(_notes(results, names)))


def _same_duty(a, b):
    return a.spec.lifetime.missions_per_year == b.spec.lifetime.missions_per_year and _fingerprint(a.profile) == _fingerprint(b.profile)


def _fingerprint(profile) -> str:
    """Digest of every row: times and all columns."""
    digest = hashlib.sha256()
    for block in profile.blocks():
        digest.update(np.ascontiguousarray(block.time_s).tobytes() + np.ascontiguousarray(block.dt_s).tobytes())
        for name in sorted(block.columns):
            digest.update(name.encode() + np.ascontiguousarray(block.columns[name]).tobytes())
    return digest.hexdigest()


def _side(result, name):
    from .verdicts import junction_limit_c, stability

    history, ledger, module = result.history, result.ledger, result.study.module
    kwh = history.energy_j / 3.6e6
    diodes = module.diode_chips()
    hot = history.hottest
    worst = ledger.worst()
    lives = {m.name: ledger.worst(m.name).life_years for m in result.study.modes}
    return Side(
        name=name, module=module.name, technology=module.technology, energy_kwh=float(kwh.sum()),
        energy_year_kwh=float(kwh.sum() * result.study.spec.lifetime.missions_per_year), switch_energy_kwh=float(kwh[~diodes].sum()),
        diode_energy_kwh=float(kwh[diodes].sum()), peak_c=float(history.peak_c[hot]), limit_c=junction_limit_c(result.study), hottest=history.chips[hot],
        largest_swing_k=float((history.peak_c - history.lowest_c).max()), loop_gain=stability(result).loop_gain, life_years=lives,
        shortest_years=float("nan") if worst is None else worst.life_years, outside_share=float("nan") if worst is None else worst.outside_share,
        missed=tuple(v.what for v in result.verdicts if not v.met))


def _notes(results, names):
    first = results[0].study.spec
    for r, name in zip(results[1:], names[1:]):
        spec = r.study.spec
        for section in ("machine", "inverter", "cooling", "limits", "march"):
            one, other = (s.model_dump(exclude_none=True) for s in (getattr(first, section), getattr(spec, section)))
            for key in sorted(one.keys() | other.keys()):
                if one.get(key) != other.get(key):
                    yield f"{section}.{key}: {_word(one.get(key))} with {names[0]}, {_word(other.get(key))} with {name}"
        if first.lifetime.residue != spec.lifetime.residue:
            yield f"lifetime.residue: {first.lifetime.residue} with {names[0]}, {spec.lifetime.residue} with {name}"
    if len({tuple((m.name, m.acts_on, m.chips, m.model.name, m.threshold_k, str(sorted(m.model.options.items()))) for m in r.study.modes) for r in results}) > 1:
        yield "failure modes, lifetime models or their options differ: a longer life may be a kinder curve"


def _word(value):
    if value is None:
        return "nothing"
    if isinstance(value, dict):
        return "{" + ", ".join(f"{k} {_word(v)}" for k, v in value.items()) + "}"
    if isinstance(value, (list, tuple)):
        return "[" + ", ".join(_word(v) for v in value) + "]" if value else "nothing"
    return f"{value:g}" if isinstance(value, (int, float)) and not isinstance(value, bool) else str(value)
