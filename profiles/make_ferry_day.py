"""Make the demo duty: one day of a cable ferry's winch drive.

The river Quellow, the ferry "Patient Margit" and the Quellow Rope Ferry Trust
that runs her are invented. So is every number below; each is typical of its kind.

The ferry pulls herself along a rope that crosses the river at a slant: eastbound
works against part of the stream, westbound goes with it. A synchronous motor turns
the rope drum through a gear. The motion is planned (S-shaped ramps, a fixed rope
length), the rope force follows from mass, water, wind and friction, the motor torque
from gear and efficiency, and the current from the motor's dq equations.

Run ``python make_ferry_day.py [FOLDER]``: it writes ``ferry_day.csv`` and
``ferry_hour.csv`` (a busy hour cut from that day) beside itself or into FOLDER.
Needs NumPy only. The seed is fixed and no clock is read, so the files are always the same.

Columns
-------
time_s
    Start of the row. A row holds until the next one; the last row only closes the day.
    Steps: 0.25 s where the drive breaks away, creeps or changes its standstill torque,
    1 s in service, 30 s while the ferry is laid up at night.
current_a_rms
    Phase current, rms. Positive: motoring, negative: generating. At standstill no power
    flows; there the sign is that of the torque (negative: pulling west).
speed_rpm
    Motor speed. Positive: eastbound, negative: westbound.
coolant_c
    Coolant at the inlet of the inverter's plate.
phase
    What the ferry is doing.
"""

import csv
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np

SEED = 20_480
DAY_S = 86_400
CELL_S = 0.25  # the physics is computed on this grid, and rows are means over whole cells
CELLS_PER_S = 4

# --- river and rope -------------------------------------------------------------------
WATER_KG_PER_M3 = 1000.0
AIR_KG_PER_M3 = 1.2
ROPE_LENGTH_M = 560.0
STREAM_MAX_M_PER_S = 1.5  # in midstream; a parabola that ends at zero on both banks
SLANT_DEG = 18.0  # rope against the straight way across
STREAM_NOISE_M_PER_S, STREAM_NOISE_TAU_S = 0.07, 15.0
WIND_GUST_M_PER_S, WIND_GUST_TAU_S = 3.2, 25.0  # along the rope, about the slow wind of the day

# --- ferry ----------------------------------------------------------------------------
EMPTY_KG, FULL_LOAD_KG = 320e3, 90e3
ADDED_MASS_SHARE = 0.08  # water that is accelerated with the hull
DRAG_AREA_ALONG_M2 = 11.0  # drag coefficient times area, along the rope
DRAG_AREA_ACROSS_M2 = 37.0
DRAG_AREA_WIND_M2 = 105.0
DRAG_AREA_RAFT_M2 = 88.0  # drift timber caught on hull and rope
ROPE_FRICTION_N = 2500.0  # rope bending over drum and sheaves
GUIDE_FRICTION = 0.06  # sheave friction, of the sideways stream force
GROUNDED_N, GROUNDED_PER_LOAD_N = 41.0e3, 9.0e3  # to break the hull off the slip: empty, and added at full load
GROUNDED_LENGTH_M = 0.40  # way on which the hull floats free

# --- drive ----------------------------------------------------------------------------
ROPE_PER_RAD_M = 0.0334  # drum radius over gear ratio: 0.60 m / 17.96
GEAR_EFFICIENCY = 0.92  # drum, gear and bearings, in either direction of power
ROTATING_KG_M2 = 9.0  # motor, brake and gear at the motor shaft
RATED_CURRENT_A = 200.0  # rms
CURRENT_LIMIT_A = 280.0  # rms
DC_VOLTAGE_V = 600.0
PHASE_VOLTAGE_MAX_V = DC_VOLTAGE_V / np.sqrt(3.0)  # peak, space-vector modulation
POLE_PAIRS = 6
R_S_OHM = 0.018
L_D_H = 1.10e-3
L_Q_H = 1.90e-3
PSI_PM_WB = 0.74

# --- coolant --------------------------------------------------------------------------
COLDEST_C, COLDEST_AT_S = 6.0, 5.0 * 3600
HOTTEST_C, HOTTEST_AT_S = 39.5, 15.5 * 3600
LOSS_W_PER_A = 10.0  # inverter loss, near enough for the warming of the coolant
WARMING_K_PER_W, WARMING_TAU_S = 2.2e-3, 420.0

# --- timetable ------------------------------------------------------------------------
SERVICE_START_S, LAST_DEPARTURE_S = 6 * 3600, 22 * 3600
RUSH_S = [(6.75 * 3600, 9 * 3600), (11.5 * 3600, 13.5 * 3600), (15.5 * 3600, 18.5 * 3600)]
AWAKE_S, LAID_UP_S = 20_700, 80_700  # between these two times rows are never longer than 1 s
DEBRIS_AFTER_S = 16.5 * 3600  # the first eastbound crossing after this meets drift timber
HOUR_START_S = 59_520  # 16:32, the ferry lies at the quay; an hour later she does again


# ======================================================================================
# Motor
# ======================================================================================
def torque_nm(i_d, i_q):
    """Air-gap torque of the synchronous machine (peak-phase dq currents)."""
    return 1.5 * POLE_PAIRS * (PSI_PM_WB + (L_D_H - L_Q_H) * i_d) * i_q


def voltage_v(i_d, i_q, omega):
    """Peak phase voltage at electrical angular speed ``omega``."""
    return np.hypot(R_S_OHM * i_d - omega * L_Q_H * i_q, R_S_OHM * i_q + omega * (L_D_H * i_d + PSI_PM_WB))


def mtpa_i_d(i_q):
    """Direct current that gives the most torque per ampere beside ``i_q``."""
    a = PSI_PM_WB / (2.0 * (L_Q_H - L_D_H))
    return a - np.sqrt(a * a + i_q * i_q)


def current_a_rms(torque, speed_rad_s):
    """Phase current (rms, >= 0) for torque and speed, each signed, shape (n,).

    Most torque per ampere; where that asks for more voltage than the inverter has, the
    same torque with more negative direct current (field weakening).
    """
    # A machine that turns backwards is the mirror image of one that turns forwards.
    torque = torque * np.where(speed_rad_s < 0, -1.0, 1.0)
    omega = POLE_PAIRS * np.abs(speed_rad_s)

    size, low, high = np.abs(torque), np.zeros_like(torque), np.full_like(torque, 1000.0)
    for _ in range(60):
        middle = 0.5 * (low + high)
        enough = torque_nm(mtpa_i_d(middle), middle) >= size
        low, high = np.where(enough, low, middle), np.where(enough, middle, high)
    i_q = np.sign(torque) * high
    i_d = mtpa_i_d(i_q)

    weak = voltage_v(i_d, i_q, omega) > PHASE_VOLTAGE_MAX_V
    if weak.any():

        def i_q_on_torque(d):
            return torque[weak] / (1.5 * POLE_PAIRS * (PSI_PM_WB + (L_D_H - L_Q_H) * d))

        low, high = np.full(weak.sum(), -PSI_PM_WB / L_D_H), i_d[weak]
        for _ in range(60):
            middle = 0.5 * (low + high)
            fits = voltage_v(middle, i_q_on_torque(middle), omega[weak]) <= PHASE_VOLTAGE_MAX_V
            low, high = np.where(fits, middle, low), np.where(fits, high, middle)
        i_d[weak], i_q[weak] = low, i_q_on_torque(low)
        if (voltage_v(i_d, i_q, omega) > PHASE_VOLTAGE_MAX_V * (1 + 1e-9)).any():
            raise SystemExit("a row asks for more voltage than the inverter has: change the machine or the speeds")
    return np.hypot(i_d, i_q) / np.sqrt(2.0)


def rated_torque_nm():
    """Torque at rated current, most torque per ampere."""
    beta = np.linspace(0.0, 0.5 * np.pi, 20_001)
    peak = RATED_CURRENT_A * np.sqrt(2.0)
    return float(torque_nm(-peak * np.sin(beta), peak * np.cos(beta)).max())


# ======================================================================================
# Weather, from one fixed stream of random numbers
# ======================================================================================
def bell(rng, n):
    """Bell-shaped noise of variance 1 from plain uniform numbers (their stream does not change between releases)."""
    return rng.random((n, 12)).sum(axis=1) - 6.0


def first_order_noise(rng, n, tau_s):
    """Random process of first order, variance 1, at 1 s steps: exact for any tau."""
    keep = np.exp(-1.0 / tau_s)
    kick = np.sqrt(1.0 - keep * keep) * bell(rng, n)
    out = np.empty(n)
    state = kick[0] / np.sqrt(1.0 - keep * keep)
    for k in range(n):
        state = keep * state + kick[k]
        out[k] = state
    return out


def on_cells(per_second):
    """Values at whole seconds, drawn out to the cells in straight lines."""
    n = per_second.size
    return np.interp((np.arange(n * CELLS_PER_S) + 0.5) * CELL_S, np.arange(n), per_second)


# ======================================================================================
# One crossing
# ======================================================================================
@dataclass
class Leg:
    """A stretch of one crossing: speed goes from ``v0`` to ``v1`` in an S (half a cosine wave)."""

    phase: str
    seconds: int
    v0: float = 0.0
    v1: float = 0.0
    raft: float = 0.0  # share of the drift timber that hangs on at the end of the leg
    stand: float | None = None  # standstill legs: share of the rated torque the drive settles at

    def speed(self):
        s = (np.arange(self.seconds * CELLS_PER_S) + 0.5) / (self.seconds * CELLS_PER_S)
        return self.v0 + (self.v1 - self.v0) * 0.5 * (1.0 - np.cos(np.pi * s))

    def metres(self):
        return 0.5 * (self.v0 + self.v1) * self.seconds


def ramp_seconds(dv, a_max):
    """Whole seconds that an S ramp over ``dv`` needs with at most ``a_max``."""
    return int(np.ceil(0.5 * np.pi * abs(dv) / a_max))


def creep_m_per_s(frequency_hz):
    """Rope speed at an output frequency."""
    return 2.0 * np.pi * frequency_hz / POLE_PAIRS * ROPE_PER_RAD_M


def plan_crossing(rng, eastbound, rush, debris):
    """The legs of one crossing; their way adds up to the rope length."""
    cruise = (2.1 if eastbound else 2.3) * (1.04 if rush else 1.0) * (1.0 + 0.02 * (2 * rng.random() - 1.0))
    creep = creep_m_per_s(0.25 + 0.3 * rng.random())
    slide = 0.11  # the last metre onto the slip
    near = 0.82 * cruise
    up, down = 0.058, 0.105  # m/s2

    start = [
        Leg("load check", 4 + int(3 * rng.random()), stand=0.60 + 0.28 * rng.random()),
        Leg("breakaway", 2, 0.0, creep),
        Leg("breakaway", 4 + int(4 * rng.random()), creep, creep),
        Leg("ramp up", ramp_seconds(cruise - creep, up), creep, cruise),
    ]
    end = [
        Leg("approach", ramp_seconds(cruise - near, 0.03), cruise, near),
        Leg("docking", ramp_seconds(near - slide, down), near, slide),
        Leg("docking", 5, slide, slide),
        Leg("docking", 5, slide, 0.0),
        Leg("quay hold", 14 + int(8 * rng.random()), stand=0.42 + 0.15 * rng.random()),
        Leg("quay hold", 1, stand=0.0),
    ]
    middle = []
    if debris:
        crawl = creep_m_per_s(0.35)
        middle = [
            Leg("debris stop", ramp_seconds(cruise, down), cruise, 0.0),
            Leg("debris hold", 2, raft=1.0),
            Leg("debris hold", 10, raft=1.0),
            Leg("debris restart", 1, 0.0, crawl, raft=1.0),
            Leg("debris restart", 6, crawl, crawl, raft=0.9),
            Leg("ramp up", ramp_seconds(cruise - crawl, up), crawl, cruise),
        ]
    # What the other legs leave of the rope is cruised in whole seconds, at a speed trimmed to fit.
    parts = [0.52, 0.48] if debris else [1.0]
    left = ROPE_LENGTH_M - sum(leg.metres() for leg in start + middle + end)
    cruises = [Leg("cruise", round(p * left / cruise), cruise, cruise) for p in parts]
    legs = start + cruises[:1] + middle + cruises[1:] + end

    # Every leg's way is linear in the cruise speed, so one step of the secant rule is exact.
    def at(v):
        return [
            Leg(g.phase, g.seconds, *(x * v / cruise if x >= near - 1e-9 else x for x in (g.v0, g.v1)), g.raft, g.stand)
            for g in legs
        ]

    def way(v):
        return sum(g.metres() for g in at(v))

    slope = (way(cruise) - way(0.99 * cruise)) / (0.01 * cruise)
    return at(cruise + (ROPE_LENGTH_M - way(cruise)) / slope)


def crossing(legs, eastbound, load, stream_noise, wind):
    """Torque and speed of one crossing on the cell grid, positive in the direction of travel.

    Parameters
    ----------
    legs : list of Leg
    eastbound : bool
    load : float
        0 (empty) to 1 (deck full).
    stream_noise, wind : ndarray, shape (at least the crossing's cells,)
        Stream disturbance, and wind along the rope (positive: blows east). [m/s]

    Returns
    -------
    torque_nm, speed_rad_s : ndarray, shape (cells,)
    """
    heading = 1.0 if eastbound else -1.0
    v = np.concatenate([leg.speed() for leg in legs])
    n = v.size
    way = np.cumsum(v) * CELL_S - 0.5 * v * CELL_S
    a = np.gradient(v, CELL_S)
    stream_noise, wind = stream_noise[:n], wind[:n]

    # Water. The stream meets the hull at a slant: one part along the rope, one part across it.
    at = way / ROPE_LENGTH_M
    profile = 4.0 * at * (1.0 - at)
    stream = np.clip(profile, 0.0, None) * (STREAM_MAX_M_PER_S + stream_noise)
    along = v + heading * stream * np.sin(np.radians(SLANT_DEG))
    across = stream * np.cos(np.radians(SLANT_DEG))
    half_rho = 0.5 * WATER_KG_PER_M3
    hull = half_rho * DRAG_AREA_ALONG_M2 * np.abs(along) * along
    moving = np.tanh(v / 0.02)  # friction comes in with the first centimetres a second
    friction = moving * (ROPE_FRICTION_N + GUIDE_FRICTION * half_rho * DRAG_AREA_ACROSS_M2 * across**2)

    # Drift timber drifts with the stream, whole speed, and pulls along the rope by its share.
    hangs = np.concatenate([raft_share(legs, k) for k in range(len(legs))])
    raft = hangs * half_rho * DRAG_AREA_RAFT_M2 * np.hypot(along, across) * along

    # Wind meets the deck at the apparent speed. While the hull is aground the slip carries it.
    meets = v - heading * wind
    air = 0.5 * AIR_KG_PER_M3 * DRAG_AREA_WIND_M2 * np.abs(meets) * meets

    # The slip: lets go slowly at departure; takes the bow again, more gently, on arrival.
    grounded = GROUNDED_N + GROUNDED_PER_LOAD_N * load
    to_go = ROPE_LENGTH_M - way
    slip = grounded * (np.exp(-((way / GROUNDED_LENGTH_M) ** 2)) + 0.55 * np.exp(-((to_go / GROUNDED_LENGTH_M) ** 2)))
    air = air * (1.0 - np.exp(-((way / 5.0) ** 2)) - np.exp(-((to_go / 5.0) ** 2)))

    mass = (EMPTY_KG + FULL_LOAD_KG * load) * (1.0 + ADDED_MASS_SHARE)
    force = mass * a + hull + friction + raft + air + slip

    # Rope to motor. The gear takes its part from whichever side the power comes.
    lever = ROPE_PER_RAD_M
    torque = np.where(force >= 0.0, force * lever / GEAR_EFFICIENCY, force * lever * GEAR_EFFICIENCY)
    torque = torque + ROTATING_KG_M2 * a / lever

    # At the quay the brake or the slip holds the ferry: the drive sets the torque, up or down in one second.
    first, before = 0, 0.0
    for leg in legs:
        cells = leg.seconds * CELLS_PER_S
        if leg.stand is not None:
            goal = leg.stand * rated_torque_nm()
            rise = np.minimum(np.arange(1, cells + 1) / CELLS_PER_S, 1.0)
            torque[first : first + cells] = before + (goal - before) * rise
        elif leg.phase == "breakaway" and leg.v0 == 0.0:
            # From the torque of the load check up to what the slip asks for, also in one second.
            rise = np.minimum(np.arange(1, cells + 1) / CELLS_PER_S, 1.0)
            torque[first : first + cells] = before + (torque[first : first + cells] - before) * rise
        first += cells
        before = torque[first - 1]
    return torque, v / lever


def raft_share(legs, k):
    """Share of the drift timber that hangs on through leg ``k``, per cell."""
    leg, n = legs[k], legs[k].seconds * CELLS_PER_S
    before = legs[k - 1].raft if k else 0.0
    if leg.phase == "ramp up" and before > 0.0:
        return before * np.exp(-(((np.arange(n) + 0.5) * CELL_S / 2.0) ** 2))  # poled clear, gone in seconds
    return before + (leg.raft - before) * (np.arange(n) + 0.5) / n


# ======================================================================================
# The day
# ======================================================================================
def departures(rng):
    """Planned departures with up to a minute of delay; an even number, so that she sleeps where she woke."""
    out, t = [], float(SERVICE_START_S)
    while t <= LAST_DEPARTURE_S:
        rush = any(a <= t < b for a, b in RUSH_S)
        out.append((int(t + 60 * rng.random()), rush))
        t += 900.0 if rush else 1200.0
    return out[: len(out) // 2 * 2]


def day_on_cells():
    """The whole day on the cell grid.

    Returns
    -------
    dict of ndarray, shape (345600,)  (a cell each)
        ``torque_nm`` and ``speed_rad_s`` (positive: east) and ``phase`` (text); ``crossings`` is a list of
        dicts instead: ``start_s``, ``end_s``, ``eastbound``, ``load``.
    """
    rng = np.random.Generator(np.random.PCG64(SEED))
    n = DAY_S * CELLS_PER_S
    second = np.arange(DAY_S)
    slow_wind = 1.0 + 2.5 * np.sin(np.pi * np.clip((second - 28_800) / 43_200, 0.0, 1.0))  # a sea breeze by day
    wind = on_cells(slow_wind + WIND_GUST_M_PER_S * first_order_noise(rng, DAY_S, WIND_GUST_TAU_S))
    stream_noise = on_cells(STREAM_NOISE_M_PER_S * first_order_noise(rng, DAY_S, STREAM_NOISE_TAU_S))

    torque, speed = np.zeros(n), np.zeros(n)
    phase = np.full(n, "laid up", dtype="<U16")
    phase[AWAKE_S * CELLS_PER_S : LAID_UP_S * CELLS_PER_S] = "idle"
    crossings, debris_due, free_from = [], True, 0
    for k, (start_s, rush) in enumerate(departures(rng)):
        eastbound = k % 2 == 0
        load = 0.5 + 0.5 * rng.random() if rush else 0.1 + 0.6 * rng.random()
        debris = debris_due and eastbound and start_s > DEBRIS_AFTER_S
        debris_due = debris_due and not debris
        legs = plan_crossing(rng, eastbound, rush, debris)
        if start_s < free_from:
            raise SystemExit("the timetable is too tight: a crossing starts before the last one has ended")
        first = start_s * CELLS_PER_S
        m, w = crossing(legs, eastbound, load, stream_noise[first:], wind[first:])
        span = slice(first, first + m.size)
        sign = 1.0 if eastbound else -1.0
        torque[span], speed[span] = sign * m, sign * w
        phase[span] = np.concatenate([np.full(g.seconds * CELLS_PER_S, g.phase, dtype="<U16") for g in legs])
        free_from = start_s + m.size // CELLS_PER_S
        crossings.append({"start_s": start_s, "end_s": free_from, "eastbound": eastbound, "load": load})
    return {"torque_nm": torque, "speed_rad_s": speed, "phase": phase, "crossings": crossings}


def coolant_c(current_rms_per_second):
    """Coolant per second: the weather's slow wave and the warming by the drive's own loss."""
    t = np.arange(DAY_S + 1.0)
    rise_s = HOTTEST_AT_S - COLDEST_AT_S
    up = (t - COLDEST_AT_S) / rise_s
    down = np.mod(t - HOTTEST_AT_S, DAY_S) / (DAY_S - rise_s)
    warm = np.where((up >= 0) & (up <= 1), 0.5 - 0.5 * np.cos(np.pi * up), 0.5 + 0.5 * np.cos(np.pi * down))
    out = COLDEST_C + (HOTTEST_C - COLDEST_C) * warm
    keep, rise = np.exp(-1.0 / WARMING_TAU_S), 0.0
    for k in range(DAY_S):
        rise = keep * rise + (1.0 - keep) * WARMING_K_PER_W * LOSS_W_PER_A * current_rms_per_second[k]
        out[k + 1] += rise
    return out


def row_starts(cells):
    """Cells at which a row starts: see the steps under Columns."""
    torque = cells["torque_nm"].reshape(DAY_S, CELLS_PER_S)
    speed = cells["speed_rad_s"].reshape(DAY_S, CELLS_PER_S)
    slow = np.abs(speed).min(axis=1) < 2.0 * np.pi * 3.0 / POLE_PAIRS  # below 3 Hz at the output
    changes = (np.ptp(speed, axis=1) > 0) | (np.ptp(torque, axis=1) > 0)
    creeps = (np.abs(speed).max(axis=1) > 0) & slow
    fine = (slow & changes) | creeps
    second = np.arange(DAY_S)
    awake = (second >= AWAKE_S) & (second < LAID_UP_S)
    starts = np.zeros((DAY_S, CELLS_PER_S), bool)
    starts[:, 0] = awake | (second % 30 == 0)
    starts[fine, :] = True
    return np.flatnonzero(starts)


def rows_of_day():
    """All rows of the day: (time_s, current_a_rms, speed_rpm, coolant_c, phase) as arrays, closing row included."""
    cells = day_on_cells()
    starts = row_starts(cells)
    count = np.diff(np.append(starts, cells["torque_nm"].size))
    torque = np.add.reduceat(cells["torque_nm"], starts) / count
    speed = np.add.reduceat(cells["speed_rad_s"], starts) / count
    amount = current_a_rms(torque, speed)
    if amount.max() > CURRENT_LIMIT_A:
        raise SystemExit(f"the drive would need {amount.max():.0f} A, its limit is {CURRENT_LIMIT_A:.0f} A")
    # Turning: the sign of the power. Standing: the sign of the torque.
    current = amount * np.sign(np.where(speed != 0.0, torque * speed, torque))

    time_s = starts * CELL_S
    per_cell = np.repeat(amount, count)
    coolant = coolant_c(per_cell.reshape(DAY_S, CELLS_PER_S).mean(axis=1))
    coolant = np.interp(np.append(time_s, DAY_S), np.arange(DAY_S + 1), coolant)
    speed_rpm = speed * 30.0 / np.pi
    return (
        np.append(time_s, float(DAY_S)),
        np.append(current, 0.0),
        np.append(speed_rpm, 0.0),
        coolant,
        np.append(cells["phase"][starts], "laid up"),
    )


def text(value, digits):
    """Number as short text: 12.50 -> 12.5, -0.0 -> 0."""
    out = f"{value:.{digits}f}".rstrip("0").rstrip(".")
    return "0" if out in ("-0", "") else out


def write(path, rows):
    """Write one CSV; the line ends are the same on every system."""
    with open(path, "w", newline="", encoding="utf-8") as file:
        out = csv.writer(file, lineterminator="\n")
        out.writerow(["time_s", "current_a_rms", "speed_rpm", "coolant_c", "phase"])
        for t, i, n, c, what in zip(*rows, strict=True):
            out.writerow([text(t, 2), text(i, 1), text(n, 1), text(c, 1), what])


def make(folder):
    """Write both files into ``folder``."""
    folder = Path(folder)
    day = rows_of_day()
    write(folder / "ferry_day.csv", day)
    inside = (day[0] >= HOUR_START_S) & (day[0] <= HOUR_START_S + 3600)
    hour = [column[inside] for column in day]
    if hour[1][0] != 0.0 or hour[1][-1] != 0.0 or hour[0][-1] != HOUR_START_S + 3600:
        raise SystemExit("the hour must begin and end at rest, on rows of the day")
    hour[0] = hour[0] - HOUR_START_S
    write(folder / "ferry_hour.csv", hour)


if __name__ == "__main__":
    make(sys.argv[1] if len(sys.argv) > 1 else Path(__file__).parent)
