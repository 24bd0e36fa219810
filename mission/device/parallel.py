"""How parallel chips of one position share the current when one of them drops less than the others."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..checks import require_range
from ..errors import RangeError
from .curves import on_state_voltage_v


@dataclass(frozen=True)
class CurrentSharing:
    """The favoured chip against its neighbours.

    Attributes
    ----------
    share : float
        Its current over an equal share (1.1: ten percent more).
    hotter_k : float
        How much hotter it is than the position's mean junction [K].
    settles : bool
        False where the hotter chip draws more and more current; share and temperature are then those after
        the last step.
    """

    share: float
    hotter_k: float
    settles: bool


def current_sharing(curves, chips: int, on_state_spread_v: float, *, current_a, t_vj_c, local_rise_k) -> CurrentSharing:
    """Sharing of a current at electrothermal balance.

    Parameters
    ----------
    curves : OnStateCurves
        Of the whole position.
    chips : int
        Parallel chips, at least 2; one of them is the favoured one.
    on_state_spread_v : float
        By how much its on-state voltage lies below that of the others at the same current a chip [V].
    current_a : float
        Current of the position [A].
    t_vj_c : float
        Mean junction temperature of the position [degC].
    local_rise_k : float
        Rise of the junctions over what all chips share (case or sink), at this load [K].

    Returns
    -------
    CurrentSharing

    Raises
    ------
    RangeError
        Fewer than two chips, negative current or spread.

    Notes
    -----
    Equal voltage over all chips, losses of a chip in proportion to its current (conduction at the
    common voltage, switching energies nearly linear in current), the rise over the common
    point in proportion to its losses. A positive temperature coefficient pulls the currents
    together, a negative one drives them apart.

    Examples
    --------
    >>> from mission.device import load_module
    >>> curves = load_module("heron-300").switch.on_state
    >>> s = current_sharing(curves, 2, 0.1, current_a=300.0, t_vj_c=125.0, local_rise_k=40.0)
    >>> round(s.share, 2), round(s.hotter_k, 1), s.settles
    (1.04, 1.8, True)
    """
    n = int(require_range("chips", chips, low=2.0))
    spread = float(require_range("on_state_spread_v", on_state_spread_v, low=0.0, unit="V"))
    i = float(require_range("current_a", current_a, low=0.0, unit="A"))
    t = float(require_range("t_vj_c", t_vj_c, unit="degC"))
    rise = float(require_range("local_rise_k", local_rise_k, low=0.0, unit="K"))
    if not np.isfinite([spread, i, t, rise]).all():
        raise RangeError("current_a", "a number without end", "finite numbers")
    if i == 0.0:
        return CurrentSharing(1.0, 0.0, True)
    share, hotter = 1.0, 0.0
    for _ in range(500):
        low, high = 0.0, float(n)
        for _ in range(60):
            middle = 0.5 * (low + high)
            # the favoured chip would drop more than the others: it takes less than this
            favoured = on_state_voltage_v(curves, middle * i, t + hotter) - spread
            too_much = favoured > on_state_voltage_v(curves, (n - middle) / (n - 1) * i, t - hotter / (n - 1))
            low, high = (low, middle) if too_much else (middle, high)
        new_share = 0.5 * (low + high)
        new_hotter = (new_share - 1.0) * rise
        if abs(new_share - share) < 1e-6 and abs(new_hotter - hotter) < 1e-4:
            return CurrentSharing(new_share, new_hotter, True)
        share, hotter = new_share, 0.5 * (hotter + new_hotter)
        if share > 0.999 * n and hotter > 0.99 * (n - 1.0) * rise:
            return CurrentSharing(share, (share - 1.0) * rise, False)
    return CurrentSharing(share, (share - 1.0) * rise, False)
