"""Duties made from what the machine does: hoist, lift, road vehicle, pump, fan, conveyor.

Every recipe gives torque and speed at the motor's shaft. A gear takes its part from whichever side the power comes: driving
divides by the efficiency, being driven multiplies (one constant value; common practice). Masses behind the gear are
accelerated through it, ``inertia_kg_m2`` sits on the motor's shaft in front of it.
"""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, Literal

import numpy as np
from pydantic import Field, model_validator

from ..errors import InputError, RangeError
from ..tomlfile import FileModel
from .making import (
    FULL_LOAD,
    GRAVITY_M_PER_S2,
    RAD_S_PER_RPM,
    Efficiency,
    LoadShare,
    NotNegative,
    Positive,
    Recipe,
    Rows,
    check_spectrum,
    loads_in_turn,
    whole_number,
)
from .moves import FALL, RISE, ramp, s_curve
from .reading import table_reader
from .spec import ColumnSpec, TableFile
from .standard import lift_usage

_DAY_S = 86400.0


def shaft_torque_nm(force_n, speed_m_per_s, way_per_rad_m, efficiency):
    """Torque at the motor for a force behind a gear [N m].

    Parameters
    ----------
    force_n, speed_m_per_s : array_like
        Force in the direction of positive speed, and speed of what is moved.
    way_per_rad_m : float
        Way for a radian of the motor, > 0.
    efficiency : float
        Of gear, drum and rope; above 0, up to 1.

    Returns
    -------
    ndarray
        Force times way over efficiency where the motor drives (force times speed not negative), times efficiency where it is
        driven. At standstill, force times way: friction can then help or hinder, and the true torque lies between the two.

    Examples
    --------
    >>> shaft_torque_nm(1000.0, [1.0, -1.0, 0.0], 0.05, 0.8).tolist()
    [62.5, 40.0, 50.0]
    """
    power = np.multiply(force_n, speed_m_per_s)
    return np.multiply(force_n, way_per_rad_m) * np.where(power > 0.0, 1.0 / efficiency, np.where(power < 0.0, efficiency, 1.0))


def _sampling_note(step_s):
    return (f"rows of up to {step_s:g} s while the speed changes, means of speed and acceleration: ways are exact, an acceleration that is held too; "
            "one that only touches its top is lower by up to half a row times the jerk")


def _times_text(factor, what):
    return f"{factor:,} {what}{'' if factor == 1 else 's'}"


class _Moving(Recipe):
    """Limits of a move from rest to rest; without a jerk the acceleration jumps."""

    speed_m_per_s: Positive
    acceleration_m_per_s2: Positive
    jerk_m_per_s3: Positive | None = None

    def _move(self, way_m):
        return s_curve(way_m, self.speed_m_per_s, self.acceleration_m_per_s2, self.jerk_m_per_s3)


# ------------------------------------------------------------------ hoist
class Hoist(_Moving):
    """Hoist or winch: lift a load, pause, lower it, pause.

    Attributes
    ----------
    load_kg, hook_kg : float
        Largest load, and what always hangs on the rope.
    drum_radius_m, falls, gear_ratio : float, int, float
        ``falls``: ropes that carry the load for each that runs onto the drum; ``gear_ratio``: turns of the motor for one of the drum.
    efficiency : float
        Of gear, drum, rope and sheaves together, in either direction of power.
    inertia_kg_m2 : float
        Motor, brake and gear at the motor's shaft.
    speed_m_per_s, acceleration_m_per_s2, jerk_m_per_s3 : float
        Of the hook; up to seven pieces of constant jerk, see ``moves.s_curve``.
    lift_height_m, pause_top_s : float
        Way of the hook, and how long it waits up there.
    hold : "brake" or "electric"
        Who holds the load at the top: the brake (no torque), or the drive at standstill (torque of the weight without
        efficiency: friction can help or hinder).
    lowers : "load" or "hook"
        What comes down again; ``"hook"``: the load is set down above.
    cycles_per_hour, hours : float
        Cycles begin at even intervals; together a whole number of them. At the bottom the load stands, and the drive rests.
    spectrum : tuple of LoadShare
        Loads as shares of ``load_kg`` and their shares of the cycles, mixed evenly.

    Examples
    --------
    >>> winch = Hoist(recipe="hoist", load_kg=1000.0, drum_radius_m=0.2, falls=2, gear_ratio=20.0, efficiency=0.85, speed_m_per_s=0.5,
    ...               acceleration_m_per_s2=0.25, jerk_m_per_s3=0.5, lift_height_m=10.0, pause_top_s=5.0, cycles_per_hour=12, hours=1)
    >>> duty = winch.profile()
    >>> duty.duration_s, duty.phases
    (3600.0, ('lift start', 'lift', 'lift stop', 'held', 'lower start', 'lower', 'lower stop', 'rest'))
    >>> round(duty.ranges["speed_rad_s"][1], 9)  # 0.5 m/s x 2 falls x 20 / 0.2 m
    100.0
    """

    recipe: Literal["hoist"]
    load_kg: Positive
    hook_kg: NotNegative = 0.0
    drum_radius_m: Positive
    falls: Annotated[int, Field(ge=1, le=32)] = 1
    gear_ratio: Positive
    efficiency: Efficiency
    inertia_kg_m2: NotNegative = 0.0
    lift_height_m: Positive
    pause_top_s: NotNegative = 0.0
    hold: Literal["brake", "electric"] = "brake"
    lowers: Literal["load", "hook"] = "load"
    cycles_per_hour: Positive
    hours: Positive = 1.0
    spectrum: Annotated[tuple[LoadShare, ...], Field(min_length=1)] = FULL_LOAD

    @model_validator(mode="after")
    def _sensible(self):
        if self.acceleration_m_per_s2 >= GRAVITY_M_PER_S2:
            raise RangeError("acceleration_m_per_s2", f"{self.acceleration_m_per_s2:g} m/s2", f"below {GRAVITY_M_PER_S2:g} m/s2", "above it the rope goes slack")
        check_spectrum(self.spectrum)
        whole_number("hours", self.cycles_per_hour * self.hours, "cycles", "change hours or cycles_per_hour")
        busy, period = 2.0 * self._move(self.lift_height_m).duration_s + self.pause_top_s, 3600.0 / self.cycles_per_hour
        if busy > period:
            raise RangeError("cycles_per_hour", f"{self.cycles_per_hour:g} cycles of {busy:.6g} s", f"at most {3600.0 / busy:.6g} cycles an hour",
                             "fewer cycles, a shorter pause or a faster hook")
        return self

    @property
    def way_per_rad_m(self) -> float:
        """Way of the hook for a radian of the motor [m]."""
        return self.drum_radius_m / (self.falls * self.gear_ratio)

    def _rows(self, folder):
        one = [self._cycle(s.load * self.load_kg) for s in self.spectrum]
        count = round(self.cycles_per_hour * self.hours)
        out, period = Rows(), 3600.0 / self.cycles_per_hour
        for k, which in enumerate(loads_in_turn(self.spectrum, count), 1):
            out.extend(one[which])
            out.rest_until(k * period, "rest")
        held = "held by the brake" if self.hold == "brake" else "held by the drive at standstill, the weight without efficiency"
        return out, (f"{_times_text(count, 'cycle')}, {held}; efficiency {self.efficiency:g} divides when lifting and multiplies when lowering",
                     _sampling_note(self.step_s))

    def _cycle(self, load_kg):
        rows, full = Rows(), load_kg + self.hook_kg
        self._add_move(rows, full, 1.0, "lift")
        rows.add(self.pause_top_s, full * GRAVITY_M_PER_S2 * self.way_per_rad_m if self.hold == "electric" else 0.0, 0.0, "held")
        self._add_move(rows, full if self.lowers == "load" else self.hook_kg, -1.0, "lower")
        return rows

    def _add_move(self, rows, mass_kg, sign, word):
        dt, speed, acceleration, part = self._move(sign * self.lift_height_m).rows(self.step_s)
        way = self.way_per_rad_m
        torque = shaft_torque_nm(mass_kg * (GRAVITY_M_PER_S2 + acceleration), speed, way, self.efficiency) + self.inertia_kg_m2 * acceleration / way
        rows.add(dt, torque, speed / way, np.where(part == RISE, f"{word} start", np.where(part == FALL, f"{word} stop", word)).tolist())


# ------------------------------------------------------------------- lift
class Lift(_Moving):
    """Traction lift with a counterweight: pairs of an up and a down trip, spread evenly over the service hours of each day.

    Both trips of a pair carry the same load. Ropes and their compensation are left out, as is the door's drive; the brake
    holds at the landings. Positive speed is up.

    Attributes
    ----------
    rated_load_kg, car_kg, counterweight_share : float
        The counterweight is the car and this share of the rated load (0.4 to 0.5 is common practice).
    height_m : float
        From the lowest to the highest landing.
    usage_category : int
        1 to 6 of ISO 25745-2: sets the trips a day and the average way, see ``standard.LIFT_USAGE``.
    trips_per_day, travel_share : float
        In its place: trips, and way of a trip as a share of the height.
    days, service_hours : int, float
        The mission's days, and the hours of each in which the trips lie.
    sheave_radius_m, roping, gear_ratio, efficiency, inertia_kg_m2
        ``roping`` 2 is 2:1; ``inertia_kg_m2`` at the motor's shaft.
    spectrum : tuple of LoadShare
        Loads as shares of ``rated_load_kg``.

    Examples
    --------
    >>> lift = Lift(recipe="lift", rated_load_kg=630.0, car_kg=900.0, height_m=20.0, usage_category=3, sheave_radius_m=0.2, efficiency=0.85,
    ...             speed_m_per_s=1.0, acceleration_m_per_s2=0.8, jerk_m_per_s3=1.0, spectrum=[LoadShare(share=1.0, load=0.0)])
    >>> duty = lift.profile()
    >>> duty.duration_s, duty.ranges["speed_rad_s"], lift.trips
    (86400.0, (-5.0, 5.0), 300)
    """

    recipe: Literal["lift"]
    rated_load_kg: Positive
    car_kg: Positive
    counterweight_share: Annotated[float, Field(ge=0, le=1)] = 0.5
    height_m: Positive
    usage_category: Annotated[int, Field(ge=1, le=6)] | None = None
    trips_per_day: Positive | None = None
    travel_share: Annotated[float, Field(gt=0, le=1)] | None = None
    days: Annotated[int, Field(ge=1, le=366)] = 1
    service_hours: Annotated[float, Field(gt=0, le=24)] = 24.0
    sheave_radius_m: Positive
    roping: Annotated[int, Field(ge=1, le=8)] = 1
    gear_ratio: Positive = 1.0
    efficiency: Efficiency
    inertia_kg_m2: NotNegative = 0.0
    spectrum: Annotated[tuple[LoadShare, ...], Field(min_length=1)]

    @model_validator(mode="after")
    def _sensible(self):
        check_spectrum(self.spectrum)
        for field in ("trips_per_day", "travel_share"):
            given = getattr(self, field) is not None
            if given == (self.usage_category is not None):
                raise RangeError(field, f"{field} beside usage_category" if given else "nothing", "usage_category, or trips_per_day and travel_share",
                                 "take one of the two out" if given else "add it, or a usage_category from 1 to 6")
        trips = whole_number("trips_per_day", self._per_day * self.days, "trips", "change trips_per_day or days")
        if trips % 2:
            raise RangeError("days", f"{trips} trips in {self.days} days", "an even number of trips, up and down in turn", f"set days = {2 * self.days}")
        busy, period = self._trip(1.0).duration_s, 3600.0 * self.service_hours / self._per_day
        if busy > period:
            raise RangeError("service_hours", f"{self._per_day:g} trips of {busy:.6g} s in {self.service_hours:g} h",
                             f"at least {self._per_day * busy / 3600.0:.4g} h", "fewer trips, or more hours")
        if trips % (2 * self.days) and self.service_hours < 24.0:
            raise RangeError("service_hours", f"{self.service_hours:g} h with half a pair of trips a day", "24 h, or an even number of trips a day",
                             "a day must end where it began, unless trips go on through the night")
        return self

    @property
    def _per_day(self):
        return self.trips_per_day if self.usage_category is None else lift_usage(self.usage_category).trips_per_day

    @property
    def trips(self) -> int:
        """Trips of the mission, up and down."""
        return round(self._per_day * self.days)

    @property
    def way_m(self) -> float:
        """Way of a trip [m]."""
        return self.height_m * (self.travel_share if self.usage_category is None else lift_usage(self.usage_category).travel_share)

    @property
    def way_per_rad_m(self) -> float:
        """Way of the car for a radian of the motor [m]."""
        return self.sheave_radius_m / (self.roping * self.gear_ratio)

    def _trip(self, sign):
        return self._move(sign * self.way_m)

    def _rows(self, folder):
        pairs = []
        for s in self.spectrum:
            pair = [Rows(), Rows()]
            for rows, sign, word in zip(pair, (1.0, -1.0), ("up", "down")):
                self._add_trip(rows, s.load * self.rated_load_kg, sign, word)
            pairs.append(pair)
        turns = loads_in_turn(self.spectrum, self.trips // 2)
        out, period = Rows(), 3600.0 * self.service_hours / self._per_day
        for k in range(self.trips):
            day, of_day = divmod(k, self._per_day) if self.service_hours < 24.0 else (0, k)
            out.rest_until(_DAY_S * day + period * of_day, "landing")
            out.extend(pairs[turns[k // 2]][k % 2])
        out.rest_until(_DAY_S * self.days, "landing")
        return out, (f"{_times_text(self.trips, 'trip')} of {self.way_m:.4g} m in {_times_text(self.days, 'day')}; counterweight: car and {self.counterweight_share:g} of the rated load; "
                     f"efficiency {self.efficiency:g} divides when driving and multiplies when driven; the brake holds at the landings", _sampling_note(self.step_s))

    def _add_trip(self, rows, load_kg, sign, word):
        dt, speed, acceleration, part = self._trip(sign).rows(self.step_s)
        way, balance = self.way_per_rad_m, self.counterweight_share * self.rated_load_kg
        force = (load_kg - balance) * GRAVITY_M_PER_S2 + (load_kg + 2.0 * self.car_kg + balance) * acceleration
        torque = shaft_torque_nm(force, speed, way, self.efficiency) + self.inertia_kg_m2 * acceleration / way
        rows.add(dt, torque, speed / way, np.where(part == RISE, f"{word} start", np.where(part == FALL, f"{word} stop", word)).tolist())


# ---------------------------------------------------------------- vehicle
class TraceColumns(FileModel):
    """Columns of a speed trace: time (s, ms, min, h, d, datetime), road_speed (m/s, km/h, mph)."""

    time: ColumnSpec
    road_speed: ColumnSpec


class Grade(FileModel):
    """A stretch of the road: its end, from the start of the trace, and its grade (rise over level way, 0.05 is 5 %)."""

    to_m: Positive
    grade: Annotated[float, Field(ge=-0.5, le=0.5)]


class Vehicle(Recipe, TableFile):
    """Road vehicle on a speed trace.

    The trace comes from a file with ``columns``, or from ``time_s`` and ``speed_m_per_s``; between its points the speed is a
    straight line. Rows are means over at most ``step_s`` (1 s unless given), so ways and changes of speed are exact; the drag
    is that of a row's mean speed (its mean over a row in which the speed changes by d is larger by air x area x d^2 / 24).

    Attributes
    ----------
    mass_kg, rotating_mass_factor : float
        What is accelerated is their product: the factor, at least 1, adds wheels, gear and rotor (no inertia besides).
    drag_area_m2, rolling_coefficient, air_kg_per_m3 : float
        Drag coefficient times frontal area; rolling resistance over weight on the level; density of the air.
    grade : float
        Constant, rise over level way; or ``route``: stretches with their own.
    wheel_radius_m, gear_ratio, efficiency : float
        ``gear_ratio``: turns of the motor for one of the wheel.
    electric_braking_share : float
        Share of the braking at the wheels that the drive does (0 to 1); friction brakes do the rest, and hold at standstill.
    repeats : int
        How often the trace is driven, the route anew each time.

    References
    ----------
    .. [1] M. Mitschke, H. Wallentowitz, "Dynamik der Kraftfahrzeuge", 5th ed., Springer, 2014, driving resistances (from memory).

    Examples
    --------
    >>> bus = Vehicle(recipe="vehicle", mass_kg=1000.0, drag_area_m2=0.0, rolling_coefficient=0.0, wheel_radius_m=0.5, gear_ratio=10.0, efficiency=0.8,
    ...               electric_braking_share=0.5, time_s=[0.0, 10.0, 20.0, 30.0], speed_m_per_s=[0.0, 10.0, 10.0, 0.0], step_s=5.0)
    >>> frame = bus.profile().to_frame()
    >>> frame.torque_nm.tolist()  # 1000 N x 0.05 m / 0.8; half of 1000 N x 0.05 m x 0.8
    [62.5, 62.5, 0.0, 0.0, -20.0, -20.0]
    >>> frame.speed_rad_s.tolist()
    [50.0, 150.0, 200.0, 200.0, 150.0, 50.0]
    """

    recipe: Literal["vehicle"]
    step_s: Annotated[float, Field(gt=0, le=60)] = 1.0
    mass_kg: Positive
    rotating_mass_factor: Annotated[float, Field(ge=1, le=2)] = 1.0
    drag_area_m2: NotNegative
    rolling_coefficient: Annotated[float, Field(ge=0, le=0.5)]
    air_kg_per_m3: Annotated[float, Field(ge=0, le=2)] = 1.2
    grade: Annotated[float, Field(ge=-0.5, le=0.5)] | None = None
    route: tuple[Grade, ...] | None = None
    wheel_radius_m: Positive
    gear_ratio: Positive
    efficiency: Efficiency
    electric_braking_share: Annotated[float, Field(ge=0, le=1)]
    file: Annotated[str, Field(min_length=1)] | None = None
    columns: TraceColumns | None = None
    time_s: tuple[float, ...] | None = None
    speed_m_per_s: tuple[NotNegative, ...] | None = None
    repeats: Annotated[int, Field(ge=1, le=10000)] = 1

    @model_validator(mode="after")
    def _sensible(self):
        if (self.file is None) != (self.columns is None):
            raise RangeError("columns" if self.columns is None else "file", "nothing", "file and columns together", "name the file, and its columns for time and road_speed")
        given = [self.time_s is not None, self.speed_m_per_s is not None]
        if self.file is not None and any(given):
            raise RangeError("file", "a file beside time_s or speed_m_per_s", "one trace", "take one of the two out")
        if self.file is None and not all(given):
            raise RangeError("file", "no speed trace", "file and columns, or time_s and speed_m_per_s", "name the file with the trace")
        if self.time_s is not None:
            self._check_arrays()
        if self.grade is not None and self.route is not None:
            raise RangeError("route", "a route beside a constant grade", "one of the two", "take one out")
        if self.route is not None:
            ends = [0.0, *(g.to_m for g in self.route)]
            if not self.route:
                raise RangeError("route", "an empty list", "at least one stretch")
            for k, (a, b) in enumerate(zip(ends, ends[1:]), 1):
                if b <= a:
                    raise RangeError("route", f"to_m = {b:g} m at stretch {k} after {a:g} m", "ends that rise from stretch to stretch", "sort the stretches")
        return self

    def _check_arrays(self):
        if len(self.time_s) < 2 or len(self.time_s) != len(self.speed_m_per_s):
            raise RangeError("time_s", f"{len(self.time_s)} values beside {len(self.speed_m_per_s)} in speed_m_per_s", "at least two values, and a speed for each",
                             "complete the shorter list")
        for k, (a, b) in enumerate(zip(self.time_s, self.time_s[1:]), 2):
            if not 0.0 < b - a <= self.longest_step_s * (1.0 + 1e-9):
                raise RangeError("time_s", f"{b:g} s at point {k} after {a:g} s", f"times that rise, by at most {self.longest_step_s:g} s",
                                 "sort the points, or allow the gap with longest_step_s")
        for k, v in enumerate(self.speed_m_per_s, 1):
            if v > 150.0:
                raise RangeError("speed_m_per_s", f"{v:g} m/s at point {k}", "at most 150 m/s", "check the unit")

    @property
    def way_per_rad_m(self) -> float:
        """Way of the vehicle for a radian of the motor [m]."""
        return self.wheel_radius_m / self.gear_ratio

    def trace(self, folder="."):
        """Times from the start [s] and speeds [m/s] of the trace's points, two arrays (n,)."""
        if self.file is None:
            time, speed = np.array(self.time_s), np.array(self.speed_m_per_s)
        else:
            table = table_reader(Path(folder) / self.file, self, {"time": self.columns.time, "road_speed": self.columns.road_speed}).whole()
            time, speed = table["time"], table["road_speed"]
        if speed[0] != speed[-1] and self.repeats > 1:
            raise InputError("field duty.repeats", f"{self.repeats} repeats of a trace that begins at {speed[0]:g} and ends at {speed[-1]:g} m/s",
                             "a trace that ends at the speed at which it begins", "complete the trace, or drive it once")
        return time - time[0], speed

    def _rows(self, folder):
        time, speed = self.trace(folder)
        dt, mean_speed, acceleration, way = self._held(time, speed)
        slope, level = self._road(way)
        moving = mean_speed > 0.0
        force = (self.mass_kg * (GRAVITY_M_PER_S2 * (slope + self.rolling_coefficient * level) + self.rotating_mass_factor * acceleration)
                 + 0.5 * self.air_kg_per_m3 * self.drag_area_m2 * mean_speed**2)
        force = np.where(moving, force, 0.0)  # at standstill the friction brakes hold
        share = np.where(force < 0.0, self.electric_braking_share, 1.0)
        torque = share * shaft_torque_nm(force, mean_speed, self.way_per_rad_m, self.efficiency)
        one, out = Rows(), Rows()
        one.add(dt, torque, mean_speed / self.way_per_rad_m, np.where(~moving, "stand", np.where(force < 0.0, "brake", "drive")).tolist())
        for _ in range(self.repeats):
            out.extend(one)
        way_m = float(way[-1]) * self.repeats
        return out, (f"speed trace of {way_m / 1000.0:.6g} km"
                     + (f" from {self.file}" if self.file is not None else "") + (f", driven {self.repeats} times" if self.repeats > 1 else "")
                     + f"; {self.electric_braking_share:.0%} of the braking is the drive's, efficiency {self.efficiency:g} divides when driving and multiplies when braking",
                     f"rows of up to {self.step_s:g} s, means of a speed that is straight between the points of the trace: a peak of speed is lower by up to half a row's change")

    def _held(self, time, speed):
        """Rows: lengths, mean speeds, mean accelerations, and ways at their ends (n + 1)."""
        step = np.diff(time)
        count = np.maximum(np.ceil(step / self.step_s - 1e-9), 1).astype(int)
        k = np.repeat(np.arange(step.size), count)
        dt = (step / count)[k]
        acceleration = (np.diff(speed) / step)[k]
        middle = dt * (np.arange(k.size) - (np.cumsum(count) - count)[k] + 0.5)
        mean = speed[:-1][k] + acceleration * middle
        return dt, mean, acceleration, np.concatenate([[0.0], np.cumsum(mean * dt)])

    def _road(self, way):
        """Sine and cosine of the road's angle, means over the way of each row; those of the place where a row stands."""
        if self.route is None:
            level = 1.0 / np.hypot(1.0, self.grade or 0.0)
            return np.full(way.size - 1, (self.grade or 0.0) * level), np.full(way.size - 1, level)
        ends = np.array([0.0, *(g.to_m for g in self.route)])
        if way[-1] > ends[-1] * (1.0 + 1e-9):
            raise InputError("field duty.route", f"a route of {ends[-1]:.6g} m for a trace of {way[-1]:.6g} m", "a route as long as the trace",
                             "add stretches; the last one is not taken to go on")
        grades = np.array([g.grade for g in self.route])
        level = 1.0 / np.hypot(1.0, grades)
        driven = np.diff(way)
        out = []
        for per_m in (grades * level, level):
            total = np.interp(way, ends, np.concatenate([[0.0], np.cumsum(per_m * np.diff(ends))]))
            out.append(np.divide(np.diff(total), driven, out=np.zeros(driven.size), where=driven > 0.0))
        return out


# ----------------------------------------------------------- pump and fan
class Demand(FileModel):
    """Flow from an hour of the day on, as a share of the rated flow."""

    at_h: Annotated[float, Field(ge=0, lt=24)]
    flow: Annotated[float, Field(ge=0, le=1.5)]


class _Turbo(Recipe):
    """What pump and fan share: rated point, day of demand, ramps of constant angular acceleration (the flow follows at once)."""

    rated_speed_rpm: Positive
    rated_torque_nm: Positive
    inertia_kg_m2: NotNegative = 0.0
    ramp_s: Positive
    demand: Annotated[tuple[Demand, ...], Field(min_length=1)]

    @model_validator(mode="after")
    def _sensible(self):
        hours = [d.at_h for d in self.demand]
        if hours[0] != 0.0:
            raise RangeError("demand", f"at_h = {hours[0]:g} at point 1", "0, the day's start", "say what flows after midnight")
        for k, (a, b) in enumerate(zip(hours, hours[1:]), 2):
            if b <= a:
                raise RangeError("demand", f"at_h = {b:g} at point {k} after {a:g}", "hours that rise from point to point", "sort the points")
        share = self._speed_shares()
        for k, (begin, end, old, new) in enumerate(zip(hours, [*hours[1:], 24.0], np.roll(share, 1), share), 1):
            if self.ramp_s * abs(new - old) > 3600.0 * (end - begin):
                raise RangeError("ramp_s", f"a change of speed of {self.ramp_s * abs(new - old):.4g} s at point {k} of the demand",
                                 f"at most {3600.0 * (end - begin):.6g} s, when the demand changes again", "a shorter ramp")
        return self

    def _speed_shares(self):
        return self.speed_share([d.flow for d in self.demand])

    def _rows(self, folder):
        rated = self.rated_speed_rpm * RAD_S_PER_RPM
        share, rows = self._speed_shares(), Rows()
        hours = [d.at_h for d in self.demand] + [24.0]
        for k, d in enumerate(self.demand):
            change = ramp(share[k - 1] * rated, share[k] * rated, rated / self.ramp_s)  # k = 0: from the evening before
            dt, speed, acceleration, part = change.rows(self.step_s)
            if dt.size:
                rows.add(dt, self.rated_torque_nm * self.torque_share(speed / rated) + self.inertia_kg_m2 * acceleration, speed,
                         "run up" if part[0] == RISE else "run down")
            torque = self.rated_torque_nm * float(self.torque_share(share[k]))
            rows.add(3600.0 * hours[k + 1] - rows.duration_s, torque, share[k] * rated, f"flow {100.0 * d.flow:g} %" if d.flow > 0.0 else "off")
        return rows, (*self._law_notes(), f"{len(self.demand)} flows in a day; ramps in rows of up to {self.step_s:g} s, means of the speed: the steepest torque of a ramp is "
                      "lower by up to half a row's change")


class Pump(_Turbo):
    """Centrifugal pump whose speed follows the flow.

    With q, h, n, t for flow, head, speed and torque over their rated values: the system asks for h = s + (1 - s) q^2, the
    pump gives h = c n^2 - (c - 1) q^2 by the affinity laws, so n^2 = (s + (c - s) q^2) / c; its torque is
    t = n^2 (z + (1 - z) q / n). Below the speed at which it reaches the static head nothing flows.

    Attributes
    ----------
    rated_speed_rpm, rated_torque_nm : float
        At rated flow.
    static_head_share : float
        s, head without flow over rated head; 0 up to, not including, 1.
    shutoff_head_share : float
        c, the pump's head without flow at rated speed over its rated head; above 1 (1.2 is common practice).
    shutoff_torque_share : float
        z, its torque likewise; 1 (the default) makes the torque go with the square of the speed, which a radial pump does not exceed.
    inertia_kg_m2, ramp_s : float
        At the motor's shaft; time from standstill to rated speed.
    demand : tuple of Demand
        Flow from an hour on; the first at 0, the last up to 24. No flow: switched off.

    References
    ----------
    .. [1] J. F. Guelich, "Centrifugal Pumps", 3rd ed., Springer, 2014, similarity laws and system curves (from memory).

    Examples
    --------
    >>> pump = Pump(recipe="pump", rated_speed_rpm=1500.0, rated_torque_nm=100.0, static_head_share=0.0, ramp_s=10.0,
    ...             demand=[Demand(at_h=0.0, flow=0.5), Demand(at_h=6.0, flow=1.0)])
    >>> float(pump.speed_share(0.5)), float(pump.torque_share(0.5))  # no static head: speed as flow, torque as its square
    (0.5, 0.25)
    >>> pump.profile().phases
    ('run down', 'flow 50 %', 'run up', 'flow 100 %')
    """

    recipe: Literal["pump"]
    static_head_share: Annotated[float, Field(ge=0, lt=1)]
    shutoff_head_share: Annotated[float, Field(gt=1, le=3)] = 1.2
    shutoff_torque_share: Annotated[float, Field(gt=0, le=1)] = 1.0

    def speed_share(self, flow):
        """Speed over rated speed for a flow over rated flow; without flow the pump stands."""
        q = np.asarray(flow, float)
        s, c = self.static_head_share, self.shutoff_head_share
        return np.where(q > 0.0, np.sqrt((s + (c - s) * q * q) / c), 0.0)

    def flow_share(self, speed):
        """Flow over rated flow for a speed over rated speed."""
        n = np.asarray(speed, float)
        s, c = self.static_head_share, self.shutoff_head_share
        return np.sqrt(np.maximum(c * n * n - s, 0.0) / (c - s))

    def torque_share(self, speed):
        """Torque over rated torque for a speed over rated speed."""
        n, z = np.asarray(speed, float), self.shutoff_torque_share
        return z * n * n + (1.0 - z) * n * self.flow_share(n)

    def _law_notes(self):
        return (f"affinity laws, static head {self.static_head_share:.0%} of the rated head; the flow follows the speed at once",)


class Fan(_Turbo):
    """Fan on a duct without static pressure: flow as speed, torque as its square.

    Fields as for ``Pump``, without its heads.

    Examples
    --------
    >>> fan = Fan(recipe="fan", rated_speed_rpm=960.0, rated_torque_nm=50.0, ramp_s=20.0, demand=[Demand(at_h=0.0, flow=0.2)])
    >>> [round(x, 9) for x in fan.profile().ranges["torque_nm"]]
    [2.0, 2.0]
    """

    recipe: Literal["fan"]

    def speed_share(self, flow):
        """Speed over rated speed for a flow over rated flow."""
        return np.asarray(flow, float)

    def torque_share(self, speed):
        """Torque over rated torque for a speed over rated speed."""
        return np.asarray(speed, float) ** 2

    def _law_notes(self):
        return ("affinity laws, no static pressure; the flow follows the speed at once",)


# ------------------------------------------------------ conveyor and mill
class Run(FileModel):
    """A stretch of the day in which the conveyor runs, start and stop included."""

    at_h: Annotated[float, Field(ge=0)]
    lasts_h: Positive


class Jam(FileModel):
    """A jam: the motor gives ``torque_nm``, while the speed falls within ``slows_s`` to ``speed_share`` of its usual one and stays there for ``lasts_s``."""

    at_h: Annotated[float, Field(ge=0)]
    lasts_s: Positive
    torque_nm: Positive
    speed_share: Annotated[float, Field(ge=0, lt=1)] = 0.0
    slows_s: Positive = 1.0


class Conveyor(Recipe):
    """Conveyor or mill: starts, steady load, jams.

    Attributes
    ----------
    torque_nm, speed_rpm : float
        Steady load at the motor's shaft.
    start_load_share : float
        Load while the speed rises, over the steady one (a full belt breaks away at 1.2 to 1.5: common practice).
    inertia_kg_m2, start_s, stop_s : float
        All that turns, at the motor's shaft; times from standstill to full speed and back, at constant acceleration.
    runs : tuple of Run
    jams : tuple of Jam
        Each within a run, from ``at_h`` on; afterwards the speed rises as in a start.
    hours : float
        Length of the mission.

    Examples
    --------
    >>> mill = Conveyor(recipe="conveyor", torque_nm=200.0, speed_rpm=960.0, inertia_kg_m2=3.0, start_s=6.0, stop_s=4.0, hours=1.0,
    ...                 runs=[Run(at_h=0.1, lasts_h=0.8)], jams=[Jam(at_h=0.5, lasts_s=8.0, torque_nm=420.0)])
    >>> duty = mill.profile()
    >>> [(p, round(t, 6)) for p, t in zip(duty.phases, duty.time_by_phase_s)]
    [('rest', 720.0), ('start', 6.0), ('run', 2855.0), ('jam', 9.0), ('restart', 6.0), ('stop', 4.0)]
    """

    recipe: Literal["conveyor"]
    torque_nm: Positive
    speed_rpm: Positive
    start_load_share: Annotated[float, Field(ge=0, le=5)] = 1.0
    inertia_kg_m2: NotNegative = 0.0
    start_s: Positive
    stop_s: Positive
    runs: Annotated[tuple[Run, ...], Field(min_length=1)]
    jams: tuple[Jam, ...] = ()
    hours: Annotated[float, Field(gt=0, le=8784)] = 24.0

    @model_validator(mode="after")
    def _sensible(self):
        end = 0.0
        for k, run in enumerate(self.runs, 1):
            if run.at_h < end - 1e-9:
                raise RangeError("runs", f"at_h = {run.at_h:g} at run {k}, before the run before it ends at {end:g} h", "runs one after the other", "sort or shorten them")
            end = run.at_h + run.lasts_h
            if end > self.hours * (1.0 + 1e-12):
                raise RangeError("runs", f"run {k} ends at {end:g} h", f"at most hours = {self.hours:g} h", "shorten the run")
            if 3600.0 * run.lasts_h < self.start_s + self.stop_s:
                raise RangeError("runs", f"run {k} of {3600.0 * run.lasts_h:g} s", f"at least {self.start_s + self.stop_s:g} s, start and stop", "lengthen the run")
        last = -1.0
        for k, jam in enumerate(self.jams, 1):
            begin = 3600.0 * jam.at_h
            if begin < last:
                raise RangeError("jams", f"at_h = {jam.at_h:g} at jam {k}, before full speed is reached again after the one before", "jams one after the other", "sort them, or move it")
            last = begin + jam.slows_s + jam.lasts_s + (1.0 - jam.speed_share) * self.start_s
            if not any(3600.0 * r.at_h + self.start_s <= begin + 1e-6 and last <= 3600.0 * (r.at_h + r.lasts_h) - self.stop_s + 1e-6 for r in self.runs):
                raise RangeError("jams", f"jam {k}, from {jam.at_h:g} h to full speed again at {last / 3600.0:.6g} h", "within the full speed of one run", "move it, or lengthen the run")
        return self

    def _rows(self, folder):
        full, rows = self.speed_rpm * RAD_S_PER_RPM, Rows()
        for run in self.runs:
            begin, end = 3600.0 * run.at_h, 3600.0 * (run.at_h + run.lasts_h)
            rows.rest_until(begin, "rest")
            self._rise(rows, 0.0, "start")
            for jam in self.jams:
                if begin <= 3600.0 * jam.at_h < end:
                    rows.add(3600.0 * jam.at_h - rows.duration_s, self.torque_nm, full, "run")
                    dt, speed, _, _ = ramp(full, jam.speed_share * full, (1.0 - jam.speed_share) * full / jam.slows_s).rows(self.step_s)
                    rows.add(dt, jam.torque_nm, speed, "jam")
                    rows.add(jam.lasts_s, jam.torque_nm, jam.speed_share * full, "jam")
                    self._rise(rows, jam.speed_share * full, "restart")
            rows.add(end - self.stop_s - rows.duration_s, self.torque_nm, full, "run")
            dt, speed, acceleration, _ = ramp(full, 0.0, full / self.stop_s).rows(self.step_s)
            rows.add(dt, self.torque_nm + self.inertia_kg_m2 * acceleration, speed, "stop")
        rows.rest_until(3600.0 * self.hours, "rest")
        return rows, (f"{_times_text(len(self.runs), 'run')} and {_times_text(len(self.jams), 'jam')} in {self.hours:g} h; in a jam the motor gives the torque that is stated",
                      f"ramps in rows of up to {self.step_s:g} s, means of the speed; torques are constant over a ramp, so their peaks are exact")

    def _rise(self, rows, start, word):
        full = self.speed_rpm * RAD_S_PER_RPM
        dt, speed, acceleration, _ = ramp(start, full, full / self.start_s).rows(self.step_s)
        rows.add(dt, self.start_load_share * self.torque_nm + self.inertia_kg_m2 * acceleration, speed, word)
