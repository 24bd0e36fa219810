"""The ledger: damage per chip and failure mode, and where it comes from."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Literal

import numpy as np
from pydantic import Field

from ..cycles import KIND_WORDS, CycleTable
from ..tomlfile import FileModel
from .models import LifetimeModel, load_model

N_CHIPS = 12


class FailureMode(FileModel):
    """What wears out, on which swings, by which lifetime model (``[[lifetime.failure_mode]]`` of a study)."""

    name: str = Field(min_length=1)
    acts_on: Literal["junction", "case"]
    chips: Literal["all", "switches", "diodes"] = "all"
    model: str = Field(min_length=1)
    options: dict[str, Any] = Field(default_factory=dict)
    threshold_k: float | None = Field(default=None, ge=0, le=100)


@dataclass(frozen=True)
class Mode:
    """A failure mode with its model."""

    name: str
    acts_on: str
    chips: str
    model: LifetimeModel
    threshold_k: float | None = None

    def chip_numbers(self) -> np.ndarray:
        """Chips that it concerns."""
        return {"all": np.arange(12), "switches": np.arange(6), "diodes": np.arange(6, 12)}[self.chips]


def resolve_modes(own, module, *, folder=None, where: str = "study") -> tuple[Mode, ...]:
    """Failure modes with their models: the study's own, else those of the module file.

    Options that the module file answers (aspect ratio of the wire loops, wire diameter,
    voltage class) are taken from it where the mode does not give them.

    Raises
    ------
    InputError
        Unknown model, missing or unknown option.
    """
    given = own if own is not None else module.failure_mode
    place = f"{where}, lifetime.failure_mode" if own is not None else f"module '{module.name}', failure_mode"
    out = []
    for number, spec in enumerate(given, 1):
        here = f"{place}[{number}]"
        options = dict(spec.options)
        model = load_model(spec.model, _completed(spec.model, options, module, folder, here), folder=folder, where=here)
        out.append(Mode(spec.name, spec.acts_on, spec.chips, model, getattr(spec, "threshold_k", None)))
    return tuple(out)


def _completed(name, options, module, folder, where):
    from .models import load_set

    try:
        kind = load_set(name, folder).kind
    except Exception:  # the same error is raised with its place by load_model
        return options
    wires = module.wires
    if kind == "sintered" and wires is not None:
        options.setdefault("aspect_ratio", wires.loop_aspect_ratio)
    if kind == "multi-parameter":
        options.setdefault("v_class", module.ratings.v_ces_v / 100.0)
        if wires is not None:
            options.setdefault("wire_diameter_um", wires.diameter_um)
            options.setdefault("current_per_foot_a", module.ratings.i_nominal_a / wires.feet_per_switch)
    return options


@dataclass(frozen=True)
class LedgerRow:
    """One chip under one failure mode.

    ``worst_*``: the single counted swing that costs most each time it happens.
    ``outside_share``: share of the damage from cycles outside the model's tested range.
    """

    chip: str
    mode: str
    acts_on: str
    model: str
    damage_per_mission: float
    life_missions: float
    life_years: float
    cycles: float
    outside_share: float
    worst_range_k: float
    worst_min_c: float
    worst_max_c: float
    worst_heating_s: float
    worst_start_s: float
    worst_phase: str
    worst_damage: float
    damage_by_phase: dict[str, float]
    damage_by_kind: dict[str, float]
    damage_by_choice: dict[str, float]
    left_out_damage: float


class DamageLedger:
    """Adds up damage by Miner's rule, block by block.

    Parameters
    ----------
    modes : sequence of Mode
    chips : sequence of str
    phases : sequence of str
    missions_per_year : float

    Notes
    -----
    Each cycle is charged to the phase at its peak. Damage of a mission is the sum of
    count over cycles to failure (M. A. Miner, J. Appl. Mech. 12, 1945).
    """

    def __init__(self, modes, chips, phases, *, missions_per_year: float):
        self.modes, self.chips, self.phases, self.missions_per_year = tuple(modes), tuple(chips), tuple(phases), float(missions_per_year)
        m, p = len(self.modes), len(self.phases)
        self._damage = np.zeros((m, N_CHIPS, p, len(KIND_WORDS)))
        self._cycles = np.zeros((m, N_CHIPS))
        self._outside = np.zeros((m, N_CHIPS))
        self._left_out = np.zeros((m, N_CHIPS))
        self._worst = np.zeros((m, N_CHIPS, 7))  # damage of one, range, min, max, heating, start, phase
        self._other = [{words: model for words, model in mode.model.alternatives().items()} for mode in self.modes]
        self._other_damage = [np.zeros((len(o), N_CHIPS)) for o in self._other]

    def add(self, table: CycleTable) -> np.ndarray:
        """Charge a block of cycles.

        Returns
        -------
        ndarray, shape (modes, len(table))
            Damage of each entry (its count included) under each mode; zero where the mode does not look.
        """
        out = np.zeros((len(self.modes), len(table)))
        if not len(table):
            return out
        chip_all = table.signal % N_CHIPS
        for number, mode in enumerate(self.modes):
            mine = (table.signal < N_CHIPS) if mode.acts_on == "junction" else (table.signal >= N_CHIPS)
            mine &= np.isin(chip_all, mode.chip_numbers())
            at = np.flatnonzero(mine)
            if not at.size:
                continue
            chip = chip_all[at].astype(np.int64)
            part = tuple(getattr(table, n)[at] for n in ("range_k", "mean_c", "min_c", "max_c", "heating_s"))
            count = table.count[at]
            n_f, outside = mode.model.cycles_to_failure(*part, diode=chip >= 6)
            each = 1.0 / n_f
            if mode.threshold_k is not None:
                small = part[0] < mode.threshold_k
                self._left_out[number] += np.bincount(chip, weights=np.where(small, each * count, 0.0), minlength=N_CHIPS)
                each = np.where(small, 0.0, each)
            damage = each * count
            out[number, at] = damage
            place = (chip * len(self.phases) + table.phase_id[at]) * len(KIND_WORDS) + table.kind[at]
            self._damage[number] += np.bincount(place, weights=damage, minlength=self._damage[number].size).reshape(self._damage[number].shape)
            self._cycles[number] += np.bincount(chip, weights=count, minlength=N_CHIPS)
            self._outside[number] += np.bincount(chip, weights=damage * outside, minlength=N_CHIPS)
            for k, other in enumerate(self._other[number].values()):
                n_other, _ = other.cycles_to_failure(*part, diode=chip >= 6)
                weight = count / n_other if mode.threshold_k is None else np.where(part[0] < mode.threshold_k, 0.0, count / n_other)
                self._other_damage[number][k] += np.bincount(chip, weights=weight, minlength=N_CHIPS)
            order = np.lexsort((each, chip))
            last = np.flatnonzero(np.append(np.diff(chip[order]) != 0, True))
            for j in order[last]:
                if each[j] > self._worst[number, chip[j], 0]:
                    self._worst[number, chip[j]] = (each[j], part[0][j], part[2][j], part[3][j], part[4][j], table.start_s[at[j]], table.phase_id[at[j]])
        return out

    def rows(self) -> list[LedgerRow]:
        """All chips and modes, in the order of the file."""
        out = []
        for number, mode in enumerate(self.modes):
            for chip in mode.chip_numbers():
                d = self._damage[number, chip]
                total = float(d.sum())
                missions = 1.0 / total if total > 0.0 else float("inf")
                worst = self._worst[number, chip]
                out.append(LedgerRow(
                    chip=self.chips[chip], mode=mode.name, acts_on=mode.acts_on, model=mode.model.name, damage_per_mission=total,
                    life_missions=missions, life_years=missions / self.missions_per_year, cycles=float(self._cycles[number, chip]),
                    outside_share=float(self._outside[number, chip] / total) if total > 0.0 else 0.0,
                    worst_range_k=float(worst[1]), worst_min_c=float(worst[2]), worst_max_c=float(worst[3]), worst_heating_s=float(worst[4]),
                    worst_start_s=float(worst[5]), worst_phase=self.phases[int(worst[6])], worst_damage=float(worst[0]),
                    damage_by_phase=dict(zip(self.phases, d.sum(axis=1).tolist())), damage_by_kind=dict(zip(KIND_WORDS, d.sum(axis=0).tolist())),
                    damage_by_choice={w: float(self._other_damage[number][k, chip]) for k, w in enumerate(self._other[number])},
                    left_out_damage=float(self._left_out[number, chip])))
        return out

    def worst(self, mode: str | None = None) -> LedgerRow | None:
        """The row with the shortest life (of one mode, or of all); None without failure modes."""
        rows = [r for r in self.rows() if mode is None or r.mode == mode]
        return max(rows, key=lambda r: r.damage_per_mission) if rows else None

    def to_frame(self):
        """One row per chip and mode; damage by phase and by kind as further columns."""
        import pandas as pd

        records = []
        for r in self.rows():
            record = {k: v for k, v in vars(r).items() if not isinstance(v, dict)}
            record |= {f"damage in {p}": v for p, v in r.damage_by_phase.items()}
            record |= {f"damage by {k} cycles": v for k, v in r.damage_by_kind.items()}
            record |= {f"damage with {k}": v for k, v in r.damage_by_choice.items()}
            records.append(record)
        return pd.DataFrame.from_records(records)

    def warnings(self) -> list[str]:
        """What a reader of the lives must know: extrapolation, fixed options outside the tests, what was left out."""
        out = []
        for mode in self.modes:
            row = self.worst(mode.name)
            if row is None or row.damage_per_mission == 0.0:
                continue
            if row.outside_share > 0.0:
                out.append(f"{mode.name}: {row.outside_share:.0%} of the damage of {row.chip} comes from cycles outside the tested range of "
                           f"{mode.model.name} ({mode.model.tested_text()})")
            if not mode.model.tested_range:
                out.append(f"{mode.name}: no tested range is stated for {mode.model.name}; how far it may be trusted is not known")
            out.extend(f"{mode.name}: {text}" for text in mode.model.notes)
            if row.left_out_damage > 0.0:
                out.append(f"{mode.name}: swings below {mode.threshold_k:g} K are left out; with them the damage of {row.chip} would be "
                           f"{row.left_out_damage / row.damage_per_mission:.1%} higher")
        return out


def miner_sum(counts, cycles_to_failure) -> float:
    """Damage of cycles of several sizes.

    Parameters
    ----------
    counts, cycles_to_failure : array_like, shape (n,)

    Examples
    --------
    >>> miner_sum([10.0, 5.0], [100.0, 50.0])
    0.2
    """
    return float(np.sum(np.asarray(counts, float) / np.asarray(cycles_to_failure, float)))
