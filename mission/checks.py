"""Checks of numbers at the doors of public functions."""

from __future__ import annotations

import numpy as np

from .errors import RangeError


def require_range(name, values, *, low=None, high=None, low_open=False, high_open=False, unit="", nan_ok=False):
    """Raise ``RangeError`` naming the first value outside ``[low, high]``.

    Parameters
    ----------
    name : str
        Name of the argument as the caller knows it.
    values : array_like
        Numbers to look at, any shape.
    low, high : float, optional
        Bounds; ``low_open`` and ``high_open`` exclude the bound itself.
    unit : str
        Unit for the message.
    nan_ok : bool
        Let NaN pass (it then gives NaN at that sample only).

    Returns
    -------
    ndarray of float

    Examples
    --------
    >>> require_range("mod_index", [0.2, 0.9], low=0.0, high=1.0).tolist()
    [0.2, 0.9]
    >>> require_range("mod_index", [0.2, 1.9], low=0.0, high=1.0)
    Traceback (most recent call last):
    ...
    mission.errors.RangeError: mod_index[1]: found 1.9; allowed: 0 to 1.
    """
    a = np.asarray(values, dtype=float)
    bad = np.zeros(a.shape, bool) if nan_ok else ~np.isfinite(a)
    with np.errstate(invalid="ignore"):
        if low is not None:
            bad |= (a <= low) if low_open else (a < low)
        if high is not None:
            bad |= (a >= high) if high_open else (a > high)
    if bad.any():
        index = np.argwhere(np.atleast_1d(bad))[0]
        value = np.atleast_1d(a)[tuple(index)]
        place = name if a.ndim == 0 else f"{name}[{', '.join(str(int(k)) for k in index)}]"
        raise RangeError(place, f"{value:g}{(' ' + unit) if unit else ''}", _range_text(low, high, low_open, high_open, unit))
    return a


def _range_text(low, high, low_open, high_open, unit):
    tail = f" {unit}" if unit else ""
    if low is not None and high is not None:
        ends = []
        if low_open:
            ends.append(f"without {low:g}")
        if high_open:
            ends.append(f"without {high:g}")
        return f"{low:g} to {high:g}{tail}" + (f" ({', '.join(ends)})" if ends else "")
    if low is not None:
        return f"{'above' if low_open else 'at least'} {low:g}{tail}"
    if high is not None:
        return f"{'below' if high_open else 'at most'} {high:g}{tail}"
    return "a finite number"
