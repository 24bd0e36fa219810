"""What conducts and what switches in a leg: rules that every other part of this stage reads.

A leg has pairs of chips (upper, lower); position = 2 pair + (0 upper, 1 lower). A
conduction rule says which position carries the current, on which curve, for which
sign of the current and for which share of the time. A switching rule says which
position takes which energy. All of it is data, so that a new leg is a new table.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..device import EnergyCurves, OnStateCurves, PowerModule, on_state_voltage_v
from ..device.curves import broken_line

# shares of the time
P, Z, N = 0, 1, 2  # at the upper rail, at the midpoint, at the lower rail
P_GATED, N_GATED, DEAD = 3, 4, 5  # freewheeling at a rail less the dead time; the dead time itself
# where switching rules hold
ANY, ABOVE, BELOW = 0, 1, 2  # reference: any, positive, negative
ON, OFF = 0, 1  # at edges that take the current over (turn-on, recovery), and at edges that give it up
FLOW_OUT, FLOW_IN = 0, 1  # current positive (out of the leg), negative


@dataclass(frozen=True)
class LegPlan:
    """One leg of a bridge as rules.

    Attributes
    ----------
    positions : tuple of str
        Names, e.g. S-up, S-lo, D-up, D-lo.
    voltages : tuple of OnStateCurves or ChannelWithBody
    energies : tuple of EnergyCurves
    energy_places : tuple of str
        Where the energies stand in the module file.
    conduction : ndarray of int, shape (c, 4)
        Position, voltage curve, flow, share.
    switching : ndarray of int, shape (s, 5)
        Position, energy curve, flow, side of the reference, kind of edge.
    levels : int
    """

    positions: tuple[str, ...]
    voltages: tuple[OnStateCurves, ...]
    energies: tuple[EnergyCurves, ...]
    energy_places: tuple[str, ...]
    conduction: np.ndarray
    switching: np.ndarray
    levels: int

    @property
    def flows(self) -> np.ndarray:
        """Which signs of the current load a position: 0 positive only, 1 negative only, 2 both; shape (positions,)."""
        out = []
        for position in range(len(self.positions)):
            seen = set(self.conduction[self.conduction[:, 0] == position, 2]) | set(self.switching[self.switching[:, 0] == position, 2])
            out.append(2 if len(seen) == 2 else int(seen.pop()))
        return np.array(out)


def leg_plan(module: PowerModule) -> LegPlan:
    """The rules of a module's leg."""
    voltages: list = []
    energies: list = []
    places: list[str] = []

    def energy(place, curves):
        if curves is None:
            return None
        energies.append(curves)
        places.append(place)
        return len(energies) - 1

    def switch(name):
        part = getattr(module, name)
        voltages.append(part.on_state)
        return len(voltages) - 1, energy(f"{name}.turn_on", part.turn_on), energy(f"{name}.turn_off", part.turn_off)

    def diode(name):
        part = getattr(module, name)
        voltages.append(part.on_state)
        return len(voltages) - 1, energy(f"{name}.recovery", part.recovery)

    s, e_on, e_off = switch("switch")
    d, e_rec = diode("diode")
    if module.levels == 2:
        other = 0 if module.one_chip else 2  # where the diodes' positions begin
        if module.kind == "mosfet":
            voltages.append(module.switch.reverse or ChannelWithBody(module.switch.on_state, module.diode.on_state))
            r = len(voltages) - 1
            conduction = _mirrored([(0, s, FLOW_OUT, P), (1, r, FLOW_OUT, N_GATED), (1, d, FLOW_OUT, DEAD)])
        else:
            conduction = _mirrored([(0, s, FLOW_OUT, P), (other + 1, d, FLOW_OUT, N)])
        switching = [(0, e_on, FLOW_OUT, ANY, ON), (0, e_off, FLOW_OUT, ANY, OFF), (other + 1, e_rec, FLOW_OUT, ANY, ON)]
        return _plan(module, voltages, energies, places, conduction, _mirrored(switching))
    si, ei_on, ei_off = switch("inner_switch")
    di, ei_rec = diode("inner_diode")
    # positions: 0, 1 outer switches; 2, 3 inner switches; 4, 5 outer diodes; 6, 7 inner diodes; 8, 9 clamp diodes
    if module.clamp_diode is not None:
        dc, ec_rec = diode("clamp_diode")
        conduction = [(0, s, FLOW_OUT, P), (2, si, FLOW_OUT, P), (8, dc, FLOW_OUT, Z), (2, si, FLOW_OUT, Z), (7, di, FLOW_OUT, N), (5, d, FLOW_OUT, N)]
        blocks_above = (8, ec_rec)
    else:
        conduction = [(0, s, FLOW_OUT, P), (2, si, FLOW_OUT, Z), (7, di, FLOW_OUT, Z), (5, d, FLOW_OUT, N)]
        blocks_above = (7, ei_rec)
    switching = [(0, e_on, FLOW_OUT, ABOVE, ON), (0, e_off, FLOW_OUT, ABOVE, OFF), (*blocks_above, FLOW_OUT, ABOVE, ON),
                 (2, ei_on, FLOW_OUT, BELOW, ON), (2, ei_off, FLOW_OUT, BELOW, OFF), (5, e_rec, FLOW_OUT, BELOW, ON)]
    return _plan(module, voltages, energies, places, _mirrored(conduction), _mirrored(switching))


def _mirrored(rules):
    """The rules of the positive current and the same ones for the negative: upper and lower change places."""
    swap = {P: N, N: P, Z: Z, P_GATED: N_GATED, N_GATED: P_GATED, DEAD: DEAD}
    side = {ANY: ANY, ABOVE: BELOW, BELOW: ABOVE}
    out = []
    for rule in rules:
        position, curve, flow, where = rule[:4]
        if curve is None:  # a diode without recovery
            continue
        out.append(rule)
        if len(rule) == 4:
            out.append((position ^ 1, curve, 1 - flow, swap[where]))
        else:
            out.append((position ^ 1, curve, 1 - flow, side[where], rule[4]))
    return np.array(out, np.int64)


def _plan(module, voltages, energies, places, conduction, switching):
    names = tuple(f"{pair.name}-{side}" for pair in module.chip_pairs() for side in ("up", "lo"))
    return LegPlan(names, tuple(voltages), tuple(energies), tuple(places), conduction, switching, module.levels)


def voltage_v(curves, current_a, t_vj_c: float):
    """On-state voltage of one entry of ``LegPlan.voltages`` at one temperature [V]."""
    if isinstance(curves, ChannelWithBody):
        return curves.voltage_v(current_a, t_vj_c)
    return on_state_voltage_v(curves, current_a, t_vj_c)


def current_knots_a(curves, t_vj_c) -> np.ndarray:
    """Currents where a voltage or energy curve has a corner, at the given temperatures [A]."""
    if isinstance(curves, ChannelWithBody):
        return np.unique(np.concatenate([curves.at(t)[0] for t in np.unique(t_vj_c)]))
    return np.unique(np.concatenate([c.current_a for c in curves.points]))


@dataclass(frozen=True)
class ChannelWithBody:
    """A channel with its body diode beside it: at every voltage the two currents add, at the temperature of the chip.

    Each of the two follows its own curves over temperature; the sum is not straight over it.
    The diode carries nothing below the voltage at which its curve starts.
    """

    channel: OnStateCurves
    body: OnStateCurves

    @property
    def points(self):
        """The curves behind it."""
        return self.channel.points + self.body.points

    @property
    def t_vj_c(self) -> np.ndarray:
        """Temperatures of all curves [degC]."""
        return np.unique(np.concatenate([self.channel.t_vj_c, self.body.t_vj_c]))

    def at(self, t_vj_c: float):
        """Currents and voltages of the broken line at one temperature."""
        i_c, i_d = (np.unique(np.concatenate([[0.0], *(c.current_a for c in curves.points)])) for curves in (self.channel, self.body))
        v_c, v_d = on_state_voltage_v(self.channel, i_c, t_vj_c), on_state_voltage_v(self.body, i_d, t_vj_c)
        start = v_d[0]
        v = np.unique(np.concatenate([v_c, v_d]))
        total = _current_at(i_c, v_c, v) + np.where(v > start, _current_at(i_d, v_d, v), 0.0)
        rising = np.concatenate([[True], np.diff(total) > 0.0])
        return total[rising], v[rising]

    def voltage_v(self, current_a, t_vj_c: float):
        """Voltage at a current [A] and one temperature."""
        i, v = self.at(t_vj_c)
        return broken_line(i, v, np.asarray(current_a, float))


def _current_at(current, voltage, v):
    """Inverse of a broken line, its end pieces extended, never below zero."""
    keep = np.concatenate([[True], np.diff(voltage) > 0.0])
    x, y = voltage[keep], current[keep]
    if x.size < 2:
        return np.zeros_like(v)
    return broken_line(x, y, v)
