"""The ledger: damage per chip and failure mode, and where it comes from."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..checks import require_range
from ..cycles import KIND_WORDS, CycleTable
from ..device import FailureMode
from ..errors import InputError, RangeError
from .models import LifetimeModel, load_model, load_set

#: Diodes among the chips of a two-level bridge with diodes of their own.
TWO_LEVEL_DIODES = np.repeat([False, True], 6)
#: Swings below this are rounding, not cycles [K].
NOISE_K = 1e-6
_NAN = float("nan")
_CYCLE = ("range_k", "mean_c", "min_c", "max_c", "heating_s")
#: Classes in which the ledger looks for the group of cycles that costs most [K], [degC].
CLASS_RANGE_K = np.append(np.arange(0.0, 200.0, 5.0), np.inf)
CLASS_MEAN_C = np.concatenate([[-np.inf], np.arange(-60.0, 251.0, 10.0), [np.inf]])


@dataclass(frozen=True)
class Mode:
    """A failure mode with its model."""

    name: str
    acts_on: str
    chips: str
    model: LifetimeModel
    threshold_k: float | None = None

    def chip_numbers(self, diodes=TWO_LEVEL_DIODES) -> np.ndarray:
        """Chips that it concerns; ``diodes`` (chips,): which of them are diodes only."""
        return np.flatnonzero({"all": np.ones_like(diodes), "switches": ~diodes, "diodes": diodes}[self.chips])

    def looks_at(self, table: CycleTable, diodes=TWO_LEVEL_DIODES) -> np.ndarray:
        """Which entries of a table concern this mode, shape (n,) of bool; the threshold is not applied."""
        n = diodes.size
        place = (table.signal < n) if self.acts_on == "junction" else (table.signal >= n)
        return place & np.isin(table.signal % n, self.chip_numbers(diodes))


def resolve_modes(own, module, *, folder=None, where: str = "study") -> tuple[Mode, ...]:
    """Failure modes with their models: the study's own, else those of the module file.

    Options that the module file answers (aspect ratio of the wire loops, wire diameter,
    voltage class, current per bond foot of switch and diode) are taken from it where the
    mode does not give them.

    Raises
    ------
    InputError
        Unknown model, missing or unknown option, two modes of one name.
    """
    given = own if own is not None else module.failure_mode
    place = f"{where}, lifetime.failure_mode" if own is not None else f"module '{module.name}', failure_mode"
    out: list[Mode] = []
    for number, spec in enumerate(given, 1):
        here = f"{place}[{number}]"
        if spec.name in [m.name for m in out]:
            raise InputError(f"{here}, name", f"a second failure mode named '{spec.name}'", "a name of its own for every failure mode", "rename one")
        if spec.chips == "diodes" and not module.diode_chips().any():
            raise InputError(f"{here}, chips", "'diodes'", f"'all' or 'switches' with {module.name}, whose chips are switch and diode in one", "correct the entry")
        model = load_model(spec.model, _completed(spec, module, folder), folder=folder, where=here)
        out.append(Mode(spec.name, spec.acts_on, spec.chips, model, spec.threshold_k))
    return tuple(out)


def _completed(spec, module, folder):
    """Options of a mode, filled up from the module file."""
    options = dict(spec.options)
    try:
        kind = load_set(spec.model, folder).kind
    except InputError:  # load_model raises it again, with its place
        return options
    wires = module.wires
    if kind == "sintered" and wires is not None:
        options.setdefault("aspect_ratio", wires.loop_aspect_ratio)
    if kind == "multi-parameter":
        options.setdefault("v_class", module.ratings.v_ces_v / 100.0)
        if wires is not None:
            options.setdefault("wire_diameter_um", wires.diameter_um)
            if "current_per_foot_a" not in options:
                nominal = module.ratings.i_nominal_a
                options["current_per_foot_a"] = nominal / wires.feet_per_switch
                options.setdefault("diode_current_per_foot_a", nominal / wires.feet_per_diode)
    return options


@dataclass(frozen=True)
class LedgerRow:
    """One chip under one failure mode.

    ``worst_*``: the single counted swing that costs most each time it happens.
    ``heaviest_*``: the class of cycles (5 K of range, 10 K of mean) that costs most in total,
    by its edges, its number of cycles and its damage.
    ``outside_share``: share of the damage from cycles outside the model's tested range;
    ``outside_by``: the same for each quantity alone (one cycle may be outside in several).
    ``cycles`` counts the cycles of the row, those below a threshold included;
    ``left_out_cycles`` and ``left_out_damage`` are the latter.
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
    left_out_cycles: float
    outside_by: dict[str, float]
    heaviest_range_low_k: float
    heaviest_range_high_k: float
    heaviest_mean_low_c: float
    heaviest_mean_high_c: float
    heaviest_cycles: float
    heaviest_damage: float


class DamageLedger:
    """Adds up damage by Miner's rule, block by block.

    Parameters
    ----------
    modes : sequence of Mode
    chips : sequence of str, length n
        Names, in the order of the signals: first n are junctions, then the n case points under them.
        Names that begin with D are diodes.
    phases : sequence of str
        What ``phase_id`` counts.
    missions_per_year : float

    Notes
    -----
    Each cycle is charged to the phase at its peak. Damage of a mission is the sum of
    count over cycles to failure (M. A. Miner, J. Appl. Mech. 12, 1945).
    """

    def __init__(self, modes, chips, phases, *, missions_per_year: float):
        self.modes, self.chips, self.phases = tuple(modes), tuple(chips), tuple(phases)
        self.missions_per_year = float(require_range("missions_per_year", missions_per_year, low=0.0, low_open=True))
        if not self.chips:
            raise RangeError("chips", "no names", "a name for every chip")
        self.diodes = np.array([c.startswith("D") for c in self.chips])
        n = len(self.chips)
        if not self.phases:
            raise RangeError("phases", "none", "at least one phase", "name the whole mission")
        m, p = len(self.modes), len(self.phases)
        self._damage = np.zeros((m, n, p, len(KIND_WORDS)))
        self._cycles = np.zeros((m, n))
        self._outside = np.zeros((m, n))
        self._outside_by = [{name: np.zeros(n) for name in mode.model.tested_range} for mode in self.modes]
        self._left_out, self._left_out_cycles = np.zeros((m, n)), np.zeros((m, n))
        # damage and number of cycles by class; (chip, range, mean)
        self._by_class = np.zeros((2, m, n, CLASS_RANGE_K.size - 1, CLASS_MEAN_C.size - 1))
        self._worst = np.zeros((m, n, 7))  # damage of one, range, min, max, heating, start, phase
        self._other = [{words: model for words, model in mode.model.alternatives().items()} for mode in self.modes]
        self._other_damage = [np.zeros((len(o), n)) for o in self._other]

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
        self._check(table)
        n = len(self.chips)
        chip_all = table.signal % n
        for number, mode in enumerate(self.modes):
            at = np.flatnonzero(mode.looks_at(table, self.diodes))
            if not at.size:
                continue
            chip = chip_all[at].astype(np.int64)
            diode = self.diodes[chip]
            part = tuple(getattr(table, n)[at] for n in _CYCLE)
            count = table.count[at]
            if mode.threshold_k is not None and mode.model.outside_range == "refuse":
                # what is left out is not refused; its damage is still told
                kept = part[0] >= mode.threshold_k
                self._refuse_outside(mode, tuple(v[kept] for v in part), chip[kept], table.start_s[at[kept]])
                n_f, outside = mode.model.never_refusing().cycles_to_failure(*part, diode=diode)
            else:
                if mode.model.outside_range == "refuse":
                    self._refuse_outside(mode, part, chip, table.start_s[at])
                n_f, outside = mode.model.cycles_to_failure(*part, diode=diode)
            each = np.where(part[0] < NOISE_K, 0.0, 1.0 / n_f)
            if mode.threshold_k is not None:
                small = part[0] < mode.threshold_k
                self._left_out[number] += np.bincount(chip, weights=np.where(small, each * count, 0.0), minlength=n)
                self._left_out_cycles[number] += np.bincount(chip, weights=np.where(small, count, 0.0), minlength=n)
                each = np.where(small, 0.0, each)
            damage = each * count
            out[number, at] = damage
            place = (chip * len(self.phases) + table.phase_id[at]) * len(KIND_WORDS) + table.kind[at]
            self._damage[number] += np.bincount(place, weights=damage, minlength=self._damage[number].size).reshape(self._damage[number].shape)
            self._cycles[number] += np.bincount(chip, weights=count, minlength=n)
            self._outside[number] += np.bincount(chip, weights=damage * outside, minlength=n)
            for name, mask in mode.model.outside_by(*part, diode=diode).items():
                self._outside_by[number][name] += np.bincount(chip, weights=damage * mask, minlength=n)
            self._add_classes(number, chip, part, damage, count)
            for k, other in enumerate(self._other[number].values()):
                n_other, _ = other.cycles_to_failure(*part, diode=diode)
                weight = count / n_other if mode.threshold_k is None else np.where(part[0] < mode.threshold_k, 0.0, count / n_other)
                self._other_damage[number][k] += np.bincount(chip, weights=weight, minlength=n)
            order = np.lexsort((each, chip))
            last = np.flatnonzero(np.append(np.diff(chip[order]) != 0, True))
            for j in order[last]:
                if each[j] > self._worst[number, chip[j], 0]:
                    self._worst[number, chip[j]] = (each[j], part[0][j], part[2][j], part[3][j], part[4][j], table.start_s[at[j]], table.phase_id[at[j]])
        return out

    def _refuse_outside(self, mode, part, chip, start_s):
        """Say which chip does what the model was not tested for, and when."""
        _, outside = mode.model.never_refusing().cycles_to_failure(*part, diode=self.diodes[chip])
        if not outside.any():
            return
        k = int(np.flatnonzero(outside)[0])
        try:
            mode.model.cycles_to_failure(*(v[k:k + 1] for v in part), diode=self.diodes[chip[k:k + 1]])
        except RangeError as err:
            where = f"failure mode '{mode.name}', {self.chips[chip[k]]}, cycle that begins at {start_s[k]:.6g} s"
            raise RangeError(where, err.found, err.allowed, err.advice) from None

    def _check(self, table):
        """Refuse what would be booked in a wrong place, or vanish."""
        for name in (*_CYCLE, "count"):
            require_range(f"cycles.{name}", getattr(table, name), low=0.0 if name in ("range_k", "heating_s", "count") else None)
        require_range("cycles.signal", table.signal, low=0, high=2 * len(self.chips) - 1)
        require_range("cycles.phase_id", table.phase_id, low=0, high=len(self.phases) - 1)
        require_range("cycles.kind", table.kind, low=0, high=len(KIND_WORDS) - 1)

    def _add_classes(self, number, chip, part, damage, count):
        r = np.searchsorted(CLASS_RANGE_K, part[0], side="right") - 1
        m = np.searchsorted(CLASS_MEAN_C, part[1], side="right") - 1
        shape = self._by_class.shape[2:]
        flat = (chip * shape[1] + r) * shape[2] + m
        for sums, weights in zip(self._by_class, (damage, count)):
            sums[number] += np.bincount(flat, weights=weights, minlength=sums[number].size).reshape(shape)

    def rows(self) -> list[LedgerRow]:
        """All chips and modes, in the order of the file."""
        out = []
        for number, mode in enumerate(self.modes):
            for chip in mode.chip_numbers(self.diodes):
                d = self._damage[number, chip]
                total = float(d.sum())
                missions = 1.0 / total if total > 0.0 else float("inf")
                worst = self._worst[number, chip]
                by_class, class_cycles = self._by_class[:, number, chip]
                r, m = np.unravel_index(int(by_class.argmax()), by_class.shape)
                none = total == 0.0
                out.append(LedgerRow(
                    chip=self.chips[chip], mode=mode.name, acts_on=mode.acts_on, model=mode.model.name, damage_per_mission=total,
                    life_missions=missions, life_years=missions / self.missions_per_year, cycles=float(self._cycles[number, chip]),
                    outside_share=_share(self._outside[number, chip], total) if total > 0.0 else 0.0,
                    worst_range_k=float(worst[1]), worst_min_c=float(worst[2]), worst_max_c=float(worst[3]), worst_heating_s=float(worst[4]),
                    worst_start_s=float(worst[5]), worst_phase="" if none else self.phases[int(worst[6])], worst_damage=float(worst[0]),
                    damage_by_phase=dict(zip(self.phases, d.sum(axis=1).tolist())), damage_by_kind=dict(zip(KIND_WORDS, d.sum(axis=0).tolist())),
                    damage_by_choice={w: float(self._other_damage[number][k, chip]) for k, w in enumerate(self._other[number])},
                    left_out_damage=float(self._left_out[number, chip]), left_out_cycles=float(self._left_out_cycles[number, chip]),
                    outside_by={name: 0.0 if none else float(v[chip] / total) for name, v in self._outside_by[number].items()},
                    heaviest_range_low_k=_NAN if none else float(CLASS_RANGE_K[r]), heaviest_range_high_k=_NAN if none else float(CLASS_RANGE_K[r + 1]),
                    heaviest_mean_low_c=_NAN if none else float(CLASS_MEAN_C[m]), heaviest_mean_high_c=_NAN if none else float(CLASS_MEAN_C[m + 1]),
                    heaviest_cycles=0.0 if none else float(class_cycles[r, m]), heaviest_damage=float(by_class[r, m])))
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
            record |= {f"share outside {k}": v for k, v in r.outside_by.items()}
            record |= {f"damage with {k}": v for k, v in r.damage_by_choice.items()}
            records.append(record)
        return pd.DataFrame.from_records(records)

    def warnings(self) -> list[str]:
        """What a reader of the lives must know: extrapolation, fixed options outside the tests, what was left out."""
        out = []
        for mode in self.modes:
            row = self.worst(mode.name)
            if row is None:
                continue
            if row.damage_per_mission == 0.0:
                left = max(self._left_out[self.modes.index(mode)])
                if left > 0.0:
                    out.append(f"{mode.name}: every swing lies below {mode.threshold_k:g} K and is left out; with them the damage would be {left:.3g} a mission")
                continue
            if row.outside_share > 0.0:
                which = ", ".join(f"{_percent(share)} outside {name} {low:g} to {high:g}" for (name, (low, high)), share
                                  in zip(mode.model.tested_range.items(), row.outside_by.values()) if share > 0.0)
                out.append(f"{mode.name}: {_percent(row.outside_share)} of the damage of {row.chip} comes from cycles outside the tested range of "
                           f"{mode.model.name} ({which})")
            if not mode.model.tested_range:
                out.append(f"{mode.name}: no tested range is stated for {mode.model.name}; how far it may be trusted is not known")
            out.extend(f"{mode.name}: {text}" for text in mode.model.notes)
            if row.left_out_damage > 0.0:
                out.append(f"{mode.name}: swings below {mode.threshold_k:g} K are left out; with them the damage of {row.chip} would be "
                           f"{row.left_out_damage / row.damage_per_mission:.1%} higher")
        return out


def _share(part, total):
    """A share; sums in another order are no reason to miss the whole by a rounding."""
    share = float(part / total)
    return 1.0 if share > 1.0 - 1e-12 else share


def _percent(share):
    """A share in words; a small one is not called nothing, nor a large one all."""
    return "under 1%" if 0.0 < share < 0.005 else "over 99%" if 0.995 < share < 0.99999 else f"{share:.0%}"


@dataclass(frozen=True)
class ChoiceEffect:
    """What one explicit choice of a lifetime model does.

    ``choice`` is ``"as chosen"`` for the model itself; ``damage_ratio`` is the damage over that of
    the model itself (NaN where that is zero).
    """

    choice: str
    damage: float
    damage_ratio: float


def effect_of_choices(cycles: CycleTable, spec, *, folder=None, diodes=TWO_LEVEL_DIODES) -> list[ChoiceEffect]:
    """Damage of the same cycles with each explicit choice of the model made otherwise, one at a time.

    Parameters
    ----------
    cycles : CycleTable
        All of them are charged; with a mode, only those that it looks at, less those below its
        threshold. Select one chip to see the effect on it.
    spec : LifetimeModel, Mode or FailureMode
        A ``FailureMode`` must hold all options that its model needs.
    folder : path-like, optional
        Where the relative path of a coefficient file counts from.
    diodes : ndarray of bool, shape (chips,)
        Which chips are diodes only; default: the last six of twelve.

    Returns
    -------
    list of ChoiceEffect
        The model as chosen first; then the other temperature, heating time rules and shipped
        coefficient sets of the same form.

    Raises
    ------
    InputError
        The mode names no model, or an option is missing or unknown.

    Examples
    --------
    >>> import numpy as np
    >>> one = CycleTable(np.array([0]), *(np.array([v]) for v in (50.0, 80.0, 55.0, 105.0, 2.0, 0.0, 9.0)), np.array([0]), np.array([100.0]),
    ...                  np.array([0]))
    >>> for e in effect_of_choices(one, load_model("lesit-1997-refit")):
    ...     print(f"{e.choice}: {e.damage_ratio:.2f}")
    as chosen: 1.00
    set = lesit-1997-print: 0.76
    """
    if isinstance(spec, FailureMode):
        model = load_model(spec.model, spec.options, folder=folder, where=f"failure mode '{spec.name}'")
        spec = Mode(spec.name, spec.acts_on, spec.chips, model, spec.threshold_k)
    model = spec
    if isinstance(spec, Mode):
        model = spec.model
        cycles = cycles.select(spec.looks_at(cycles, diodes))
        if spec.threshold_k is not None:
            cycles = cycles.select(cycles.range_k >= spec.threshold_k)
    part = tuple(getattr(cycles, n) for n in _CYCLE)
    damage = {}
    for choice, one in {"as chosen": model, **model.alternatives()}.items():
        n_f, _ = one.cycles_to_failure(*part, diode=diodes[cycles.signal % diodes.size])
        damage[choice] = miner_sum(cycles.count, n_f)
    base = damage["as chosen"]
    return [ChoiceEffect(choice, d, d / base if base > 0.0 else _NAN) for choice, d in damage.items()]


def miner_sum(counts, cycles_to_failure) -> float:
    """Damage of cycles of several sizes.

    Parameters
    ----------
    counts : array_like, shape (n,)
        How often each happens, >= 0.
    cycles_to_failure : array_like, shape (n,)
        > 0; infinite where a cycle does no harm.

    Returns
    -------
    float
        1 is the end of life in the sense of the coefficient set.

    Raises
    ------
    RangeError
        A negative count, or a number of cycles to failure that is not above zero.

    References
    ----------
    M. A. Miner, "Cumulative damage in fatigue", J. Appl. Mech. 12, 1945, A159-A164.

    Examples
    --------
    >>> miner_sum([10.0, 5.0], [100.0, 50.0])
    0.2
    """
    n = require_range("counts", counts, low=0.0)
    n_f = np.asarray(cycles_to_failure, float)
    require_range("cycles_to_failure", np.where(n_f == np.inf, 1.0, n_f), low=0.0, low_open=True)
    return float(np.sum(n / n_f))
