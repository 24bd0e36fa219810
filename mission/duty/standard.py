"""Duties and classes that standards define: duty types S1 to S10, classes of crane mechanisms, usage of lifts."""

from __future__ import annotations

from bisect import bisect_left
from dataclasses import dataclass
from typing import Annotated, Literal

from pydantic import Field, model_validator

from ..checks import require_range
from ..errors import RangeError
from ..tomlfile import FileModel
from .making import RAD_S_PER_RPM, NotNegative, Positive, Recipe, Rows
from .moves import ramp

# ------------------------------------------------------ IEC 60034-1 duty types
#: Length of a cycle where nothing else is stated [s]; IEC 60034-1 (from memory).
CYCLE_S = 600.0
#: Cyclic duration factors that are preferred; IEC 60034-1 (from memory).
DUTY_FACTORS = (0.15, 0.25, 0.40, 0.60)
#: Load times that are preferred for S2 [s]; IEC 60034-1 (from memory).
S2_TIMES_S = (600.0, 1800.0, 3600.0, 5400.0)

#: Type -> (fields that it needs, further fields that it may have).
_FIELDS = {
    "S1": (("torque_nm", "speed_rpm", "load_s"), ()),
    "S2": (("torque_nm", "speed_rpm", "load_s", "rest_s"), ()),
    "S3": (("torque_nm", "speed_rpm", "duty_factor"), ("cycle_s", "cycles")),
    "S4": (("torque_nm", "speed_rpm", "duty_factor", "inertia_kg_m2", "start_s"), ("cycle_s", "cycles")),
    "S5": (("torque_nm", "speed_rpm", "duty_factor", "inertia_kg_m2", "start_s", "brake_s"), ("cycle_s", "cycles")),
    "S6": (("torque_nm", "speed_rpm", "duty_factor"), ("no_load_torque_nm", "cycle_s", "cycles")),
    "S7": (("torque_nm", "speed_rpm", "inertia_kg_m2", "start_s", "brake_s"), ("cycle_s", "cycles")),
    "S8": (("step", "inertia_kg_m2", "change_s"), ("cycles",)),
    "S9": (("step", "inertia_kg_m2", "change_s"), ()),
    "S10": (("step",), ("cycles",)),
}
#: Largest number of discrete loads in S10; IEC 60034-1 (from memory).
_MOST_S10_LOADS = 4


class LoadStep(FileModel):
    """A constant load: torque and speed at the motor's shaft, and how long it lasts."""

    torque_nm: float
    speed_rpm: NotNegative
    lasts_s: Positive


class DutyType(Recipe):
    """A duty type of IEC 60034-1 as a course of torque and speed.

    ========  ==========================================================================================
    type      course
    ========  ==========================================================================================
    S1        constant load for ``load_s``
    S2        constant load for ``load_s``, then rest for ``rest_s`` (until the motor is as cold as the coolant)
    S3        load and rest in turn; the start does not warm
    S4        start, load, rest
    S5        start, load, electric braking, rest
    S6        load and running without load in turn, never at standstill
    S7        start, load, electric braking, without rest
    S8        steps of load and speed that belong together, with the changes of speed between them, in turn
    S9        steps of load and speed, overloads among them, without period: once
    S10       up to four discrete constant loads, each with its speed; changes do not warm
    ========  ==========================================================================================

    Attributes
    ----------
    type : str
        "S1" to "S10".
    torque_nm, speed_rpm : float
        Of the load; ``no_load_torque_nm`` of S6 is 0 unless given.
    load_s, rest_s : float
        S1, S2.
    duty_factor : float
        Cyclic duration factor: the share of the cycle that is not rest (S3 to S5) or not without load (S6); start and
        braking count as load. 15, 25, 40 and 60 % are preferred.
    cycle_s, cycles : float, int
        Ten minutes, one cycle, unless given.
    inertia_kg_m2, start_s, brake_s, change_s : float
        All that turns, at the motor's shaft; times of start, braking and (S8, S9) change of speed, at constant acceleration.
        While the speed changes the load goes on and the inertia's torque adds to it. A change of S8 and S9 is the first part of its step.
    step : tuple of LoadStep
        S8, S9, S10.

    References
    ----------
    .. [1] IEC 60034-1, "Rotating electrical machines - Part 1: Rating and performance", duty types S1 to S10; cycle and duration factors,
       four loads of S10 and times of S2 from memory.

    Examples
    --------
    >>> duty = DutyType(recipe="duty-type", type="S3", torque_nm=80.0, speed_rpm=1500.0, duty_factor=0.40).profile()
    >>> duty.phases, duty.time_by_phase_s
    (('load', 'rest'), (240.0, 360.0))
    >>> DutyType(recipe="duty-type", type="S6", torque_nm=80.0, speed_rpm=1500.0, duty_factor=0.25).profile().time_by_phase_s
    (150.0, 450.0)
    """

    recipe: Literal["duty-type"]
    type: Literal["S1", "S2", "S3", "S4", "S5", "S6", "S7", "S8", "S9", "S10"]
    torque_nm: Positive | None = None
    no_load_torque_nm: NotNegative | None = None
    speed_rpm: Positive | None = None
    load_s: Positive | None = None
    rest_s: Positive | None = None
    duty_factor: Annotated[float, Field(gt=0, lt=1)] | None = None
    cycle_s: Positive | None = None
    cycles: Annotated[int, Field(ge=1, le=100_000)] | None = None
    inertia_kg_m2: NotNegative | None = None
    start_s: Positive | None = None
    brake_s: Positive | None = None
    change_s: Positive | None = None
    step: Annotated[tuple[LoadStep, ...], Field(min_length=2)] | None = None

    @model_validator(mode="after")
    def _sensible(self):
        needed, further = _FIELDS[self.type]
        for field in set().union(*(a + b for a, b in _FIELDS.values())) - {"recipe", "type"}:
            given = getattr(self, field) is not None
            if field in needed and not given:
                raise RangeError(field, "nothing", f"{', '.join(needed)}, which type = '{self.type}' needs", "add it")
            if given and field not in needed + further:
                raise RangeError(field, f"{field} with type = '{self.type}'", f"{', '.join(needed + further)} with it", "take it out, or choose another type")
        if self.type in ("S4", "S5", "S7"):
            other = self.cycle - self.rest - (self.start_s or 0.0) - (self.brake_s or 0.0)
            if other <= 0.0:
                raise RangeError("start_s", f"start and braking of {(self.start_s or 0.0) + (self.brake_s or 0.0):g} s in {self.cycle - self.rest:g} s that are not rest",
                                 "time left for the load", "shorten them, or take a longer cycle")
        if self.brake_s is not None and self._brake_torque_nm >= 0.0:
            raise RangeError("brake_s", f"{self.brake_s:g} s, in which the load brakes by itself ({self._brake_torque_nm:.4g} N m of driving left)",
                             f"below {self.inertia_kg_m2 * self._speed_rad_s / self.torque_nm:.4g} s", "brake in less time, or choose a type without electric braking")
        if self.change_s is not None:
            for k, s in enumerate(self.step, 1):
                if s.lasts_s <= self.change_s:
                    raise RangeError("step", f"lasts_s = {s.lasts_s:g} s at step {k}", f"above change_s = {self.change_s:g} s", "lengthen the step")
        if self.type == "S10" and len({(s.torque_nm, s.speed_rpm) for s in self.step if s.torque_nm or s.speed_rpm}) > _MOST_S10_LOADS:
            raise RangeError("step", "more than four different loads", "up to four of them", "use type = \"S9\", or join loads that are alike")
        return self

    @property
    def cycle(self) -> float:
        """Length of a cycle [s]."""
        return CYCLE_S if self.cycle_s is None else self.cycle_s

    @property
    def rest(self) -> float:
        """Rest (S6: running without load) in a cycle [s]."""
        return 0.0 if self.duty_factor is None else (1.0 - self.duty_factor) * self.cycle

    @property
    def _speed_rad_s(self):
        return self.speed_rpm * RAD_S_PER_RPM

    @property
    def _brake_torque_nm(self):
        return self.torque_nm - self.inertia_kg_m2 * self._speed_rad_s / self.brake_s

    def _rows(self, folder):
        one = Rows()
        if self.step is not None:
            self._add_steps(one)
        else:
            self._add_cycle(one)
        out = Rows()
        for _ in range(self.cycles or 1):
            out.extend(one)
        return out, (f"duty type {self.type} of IEC 60034-1" + (f", cyclic duration factor {100.0 * self.duty_factor:g} % of {self.cycle:g} s" if self.duty_factor else ""),
                     f"changes of speed in rows of up to {self.step_s:g} s, means of the speed; torques are constant over a change, so their peaks are exact")

    def _add_cycle(self, rows):
        speed, start, brake = self._speed_rad_s, self.start_s or 0.0, self.brake_s or 0.0
        load = self.load_s if self.load_s is not None else self.cycle - self.rest - start - brake
        if start:
            self._change(rows, 0.0, speed, start, self.torque_nm, "start")
        rows.add(load, self.torque_nm, speed, "load")
        if brake:
            self._change(rows, speed, 0.0, brake, self.torque_nm, "braking")
        if self.type == "S6":
            rows.add(self.rest, self.no_load_torque_nm or 0.0, speed, "no load")
        else:
            rows.add(self.rest if self.rest_s is None else self.rest_s, 0.0, 0.0, "rest")

    def _add_steps(self, rows):
        before = self.step[0 if self.type == "S9" else -1].speed_rpm * RAD_S_PER_RPM
        for k, s in enumerate(self.step, 1):
            speed, change = s.speed_rpm * RAD_S_PER_RPM, 0.0
            if self.change_s is not None and speed != before:
                change = self.change_s
                self._change(rows, before, speed, change, s.torque_nm, f"change to {k}")
            rows.add(s.lasts_s - change, s.torque_nm, speed, f"step {k}")
            before = speed

    def _change(self, rows, start, end, lasts_s, load_nm, word):
        dt, speed, acceleration, _ = ramp(start, end, abs(end - start) / lasts_s).rows(self.step_s)
        rows.add(dt, load_nm + self.inertia_kg_m2 * acceleration, speed, word)


# ------------------------------------------------ crane and hoist mechanisms
#: Classes of total use, T1 to T8: hours at most.
_T_HOURS = (400.0, 800.0, 1600.0, 3200.0, 6300.0, 12500.0, 25000.0, 50000.0)
#: Mean use a day, at 250 days a year: hours at most; T8 has no end.
_T_HOURS_PER_DAY = (0.25, 0.5, 1.0, 2.0, 4.0, 8.0, 16.0)
#: Group of T1 to T8 (rows) by spectrum L1 to L4: the number after the M, 0 for none.
_GROUPS = ((0, 1, 2, 3), (1, 2, 3, 4), (2, 3, 4, 5), (3, 4, 5, 6), (4, 5, 6, 7), (5, 6, 7, 8), (6, 7, 8, 0), (7, 8, 0, 0))
_FEM_NAMES = ("1Dm", "1Cm", "1Bm", "1Am", "2m", "3m", "4m", "5m")
#: Largest spectrum factor of L1 to L4; ISO 4301-1 (from memory).
_SPECTRUM_FACTORS = (0.125, 0.25, 0.5, 1.0)
#: Cycles at most of the structure classes U0 to U8; U0 to U2, U7 and U8 from memory.
_U_CYCLES = (16_000, 32_000, 63_000, 125_000, 250_000, 500_000, 1_000_000, 2_000_000, 4_000_000)


@dataclass(frozen=True)
class MechanismGroup:
    """Class of a crane's mechanism: of its use, of its loads, and the group that they make.

    Attributes
    ----------
    use : "T1" to "T8"
    spectrum : "L1" (light) to "L4" (very heavy)
    group : "M1" to "M8"
    fem_name : the group's name in FEM section 9, "1Dm" to "5m"
    """

    use: str
    spectrum: str
    group: str
    fem_name: str


def mechanism_group(spectrum, *, total_hours=None, hours_per_day=None) -> MechanismGroup:
    """Group of a crane's mechanism from its loads and its use.

    Parameters
    ----------
    spectrum : "L1", "L2", "L3" or "L4"
        Light to very heavy; see ``load_spectrum``.
    total_hours : float
        Running hours over the mechanism's life, > 0 to 50 000.
    hours_per_day : float
        In its place: mean running hours of a working day (250 a year), > 0 to 24. A limit belongs to the lower class.

    Returns
    -------
    MechanismGroup

    Raises
    ------
    RangeError
        Both or neither given, hours out of range, or a pair for which the table has no group (T1 with L1; T7 with L4; T8 with L3, L4).

    References
    ----------
    .. [1] ISO 4301-1, "Cranes and lifting appliances - Classification", mechanisms; names after FEM 9.511 "Rules for the design of
       serial lifting equipment; classification of mechanisms". Another edition prints 12 000 h for T6 and M3 in the low corner.

    Examples
    --------
    >>> mechanism_group("L2", total_hours=5000)
    MechanismGroup(use='T5', spectrum='L2', group='M5', fem_name='2m')
    >>> mechanism_group("L3", hours_per_day=1.5).group
    'M5'
    """
    names = ("L1", "L2", "L3", "L4")
    if spectrum not in names:
        raise RangeError("spectrum", f"{spectrum!r}", "one of " + ", ".join(names))
    if (total_hours is None) == (hours_per_day is None):
        raise RangeError("total_hours", "neither total_hours nor hours_per_day" if total_hours is None else "both total_hours and hours_per_day", "one of them")
    if total_hours is not None:
        k = bisect_left(_T_HOURS, float(require_range("total_hours", total_hours, low=0.0, low_open=True, high=_T_HOURS[-1], unit="h")))
    else:
        k = bisect_left(_T_HOURS_PER_DAY, float(require_range("hours_per_day", hours_per_day, low=0.0, low_open=True, high=24.0, unit="h")))
    group = _GROUPS[k][names.index(spectrum)]
    if group == 0:
        raise RangeError("spectrum", f"{spectrum} with T{k + 1}", "a pair for which the table has a group",
                         "M1 is the lowest group: use it" if k == 0 else "beyond M8: shorten the use, or lighten the loads")
    return MechanismGroup(f"T{k + 1}", spectrum, f"M{group}", _FEM_NAMES[group - 1])


def load_spectrum(spectrum) -> tuple[float, str]:
    """Spectrum factor and class of loads: sum of share times the cube of the load over the largest load.

    Parameters
    ----------
    spectrum : sequence of LoadShare or of (share, load)
        Shares of the running time, which add up to 1; loads, of which the largest counts as 1.

    Returns
    -------
    factor : float
        Above 0, up to 1.
    name : str
        "L1" up to 0.125, "L2" up to 0.25, "L3" up to 0.5, "L4" above.

    Raises
    ------
    RangeError
        Shares that are not above 0 or do not add up to 1; loads that are negative or all zero.

    References
    ----------
    .. [1] ISO 4301-1, nominal load spectrum factors (from memory).

    Examples
    --------
    >>> load_spectrum([(0.5, 1.0), (0.5, 0.5)])
    (0.5625, 'L4')
    """
    pairs = [(s.share, s.load) if hasattr(s, "share") else (float(s[0]), float(s[1])) for s in spectrum]
    require_range("share", [p[0] for p in pairs], low=0.0, low_open=True, high=1.0)
    require_range("load", [p[1] for p in pairs], low=0.0)
    total, top = sum(p[0] for p in pairs), max((p[1] for p in pairs), default=0.0)
    if abs(total - 1.0) > 1e-6:
        raise RangeError("spectrum", f"shares that add up to {total:g}", "shares that add up to 1", "complete the spectrum")
    if top == 0.0:
        raise RangeError("spectrum", "no load above zero", "at least one load")
    factor = sum(share * (load / top) ** 3 for share, load in pairs)
    return factor, f"L{min(bisect_left(_SPECTRUM_FACTORS, factor * (1.0 - 1e-9)), 3) + 1}"


def structure_class(cycles) -> str:
    """Class of a crane's structure by its number of cycles: "U0" to "U9".

    Parameters
    ----------
    cycles : float
        Lifting cycles over its life, > 0.

    Returns
    -------
    str
        The lowest class that covers them; more than 4 000 000 are U9.

    Raises
    ------
    RangeError
        A number that is not above zero.

    References
    ----------
    .. [1] ISO 4301-1, classes of utilisation (U0 to U2 and U7 to U9 from memory).

    Examples
    --------
    >>> structure_class(125_000), structure_class(600_000)
    ('U3', 'U6')
    """
    return f"U{bisect_left(_U_CYCLES, float(require_range('cycles', cycles, low=0.0, low_open=True)))}"


# ------------------------------------------------------------ usage of lifts
@dataclass(frozen=True)
class LiftUsage:
    """A usage category of ISO 25745-2.

    Attributes
    ----------
    category : 1 to 6
    trips_per_day : typical number of trips
    travel_share : average way of a trip over the lift's height
    load_share : average load over the rated load, for rated loads up to 800 kg
    travel_hours : hours of travel a day of the category with this number in VDI 4707-1; None for 6
    """

    category: int
    trips_per_day: int
    travel_share: float
    load_share: float
    travel_hours: float | None


#: Category -> usage. ISO 25745-2:2015: 300 trips a day of category 3 after published environmental declarations, all others from memory;
#: travel hours of VDI 4707-1 from memory.
LIFT_USAGE = {u.category: u for u in (
    LiftUsage(1, 50, 0.49, 0.075, 0.2), LiftUsage(2, 125, 0.49, 0.075, 0.5), LiftUsage(3, 300, 0.49, 0.075, 1.5),
    LiftUsage(4, 750, 0.44, 0.09, 3.0), LiftUsage(5, 1500, 0.39, 0.16, 6.0), LiftUsage(6, 2500, 0.32, 0.20, None))}
#: Trips a day at which categories 3 to 6 begin (exclusive); category 2 begins at 75 (inclusive).
_TRIP_LIMITS = (200.0, 500.0, 1000.0, 2000.0)


def lift_usage(category) -> LiftUsage:
    """Usage category of a lift by its number.

    Examples
    --------
    >>> lift_usage(3).trips_per_day
    300
    """
    if isinstance(category, bool) or category not in LIFT_USAGE:
        raise RangeError("usage_category", f"{category!r}", "a whole number from 1 to 6")
    return LIFT_USAGE[category]


def lift_usage_of_trips(trips_per_day) -> LiftUsage:
    """Usage category of a lift by its trips a day.

    Parameters
    ----------
    trips_per_day : float
        Not negative. Bands: below 75, 75 to 200, up to 500, 1000, 2000, above; a limit belongs to the lower band, except 75.

    Returns
    -------
    LiftUsage

    Raises
    ------
    RangeError
        A negative number.

    Examples
    --------
    >>> lift_usage_of_trips(74).category, lift_usage_of_trips(75).category, lift_usage_of_trips(2001).category
    (1, 2, 6)
    """
    trips = float(require_range("trips_per_day", trips_per_day, low=0.0))
    return LIFT_USAGE[1 if trips < 75.0 else 2 + bisect_left(_TRIP_LIMITS, trips)]
