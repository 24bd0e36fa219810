"""Searches for many rows at once. The functions searched are smooth or bent, and know no row but their own.

A function that is searched takes places of some rows and the numbers of those rows. ``load`` is the largest of wanted
over available (voltage, current ...); 1 or less fits, infinite stands for places that do not exist.
"""

from __future__ import annotations

import numpy as np

_GOLD = (np.sqrt(5.0) - 1.0) / 2.0


def close_in(excess, low, high):
    """Root between ``low`` (excess > 0) and ``high`` (excess <= 0, above low), from the side that fits.

    False position with the weight of a stuck end halved (Illinois), all rows at once.
    """
    f_low, f_high = excess(low), excess(high)
    side = np.zeros(low.shape, int)
    for _ in range(80):
        with np.errstate(divide="ignore", invalid="ignore"):
            x = (low * f_high - high * f_low) / (f_high - f_low)
        x = np.where((x > low) & (x < high), x, 0.5 * (low + high))
        f = excess(x)
        fits = f <= 0.0
        f_low = np.where(fits & (side == 1), 0.5 * f_low, f_low)
        f_high = np.where(~fits & (side == -1), 0.5 * f_high, f_high)
        high, f_high = np.where(fits, x, high), np.where(fits, f, f_high)
        low, f_low = np.where(fits, low, x), np.where(fits, f_low, f)
        side = np.where(fits, 1, -1)
        if ((high - low <= 4e-16 * np.abs(high)) | (f_high == 0.0)).all():
            break
    return high


def highest(score, low, high, steps=40):
    """Place and value of the highest score between ``low`` and ``high`` (golden section); one top is taken for granted."""
    a, b = np.array(low, float), np.array(high, float)
    c, d = b - _GOLD * (b - a), a + _GOLD * (b - a)
    f_c, f_d = score(c), score(d)
    for _ in range(steps):
        left = f_c > f_d
        a, b = np.where(left, a, c), np.where(left, d, b)
        new = np.where(left, b - _GOLD * (b - a), a + _GOLD * (b - a))
        f_new = score(new)
        c, f_c, d, f_d = np.where(left, new, d), np.where(left, f_new, f_d), np.where(left, c, new), np.where(left, f_c, f_new)
    return np.where(f_c > f_d, c, d), np.maximum(f_c, f_d)


def first_fit(load, n, parts=48):
    """First place on the way from 0 to 1 where the load is at most 1.

    The load need not fall all the way: the whole way is looked along, and where nothing
    fits the lowest place is looked at closely.

    Returns
    -------
    place : ndarray, shape (n,)
        NaN where nothing fits.
    least : ndarray, shape (n,)
        Load there; where nothing fits the smallest on the way.
    """
    every = np.arange(n)
    low, high = np.zeros(n), np.full(n, np.nan)
    best, least = np.zeros(n), load(np.zeros(n), every)
    high[least <= 1.0] = 0.0
    for k in range(1, parts + 1):
        place = np.full(n, k / parts)
        there = load(place, every)
        high = np.where(np.isnan(high) & (there <= 1.0), place, high)
        low = np.where(np.isnan(high), place, low)
        better = there < least
        best, least = np.where(better, place, best), np.where(better, there, least)
    missed = np.flatnonzero(np.isnan(high))
    if missed.size:
        # a window narrower than one part
        a, b = np.maximum(best[missed] - 1.0 / parts, 0.0), np.minimum(best[missed] + 1.0 / parts, 1.0)
        middle, negative = highest(lambda x: -load(x, missed), a, b)
        least[missed] = np.minimum(least[missed], -negative)
        fits = -negative <= 1.0
        high[missed[fits]], low[missed[fits]] = middle[fits], a[fits]
    found = np.flatnonzero(high > 0.0)
    if found.size:
        high[found] = close_in(lambda x: load(x, found) - 1.0, low[found], high[found])
    found = np.flatnonzero(~np.isnan(high))
    least[found] = load(high[found], found)
    return high, least


def most_torque(load, torque, low, high, top, parts=24):
    """Places (x, y) of the most torque whose load is at most 1; torque rises with y.

    For every x the largest y that fits, then the best x. The load of one x may fall before it rises.

    Parameters
    ----------
    load, torque : callable
        Of x, y and row numbers, arrays of one shape.
    low, high : ndarray, shape (n,)
        Ends of x.
    top : callable
        Of x and row numbers: an end of y.

    Returns
    -------
    x, y : ndarray, shape (n,)
        NaN where nothing fits.
    """

    def outermost(x, rows):
        y_top, inner = np.maximum(top(x, rows), 0.0), np.zeros(x.shape)
        least = load(x, inner, rows)
        off = np.flatnonzero(~(least <= 1.0))
        if off.size:
            inner[off], negative = highest(lambda y: -load(x[off], y, rows[off]), inner[off], y_top[off])
            least[off] = np.minimum(least[off], -negative)
        y = y_top.copy()
        cut = np.flatnonzero((least <= 1.0) & ~(load(x, y_top, rows) <= 1.0))
        if cut.size:
            way = (inner - y_top)[cut]
            y[cut] += way * close_in(lambda u: load(x[cut], y_top[cut] + u * way, rows[cut]) - 1.0, np.zeros(cut.size), np.ones(cut.size))
        return y, least

    def score(x, rows):
        y, least = outermost(x, rows)
        # outside, less load is nearer
        return np.where(least <= 1.0, torque(x, y, rows), -least)

    low, high = np.asarray(low, float), np.asarray(high, float)
    rows = np.arange(low.size)
    at = [low + (high - low) * (k / parts) for k in range(parts + 1)]
    scores = np.array([score(x, rows) for x in at])
    best = np.argmax(scores, axis=0)
    scanned = np.array(at)[best, rows]
    x, value = highest(lambda x: score(x, rows), np.array(at)[np.maximum(best - 1, 0), rows], np.array(at)[np.minimum(best + 1, parts), rows])
    x = np.where(value >= scores[best, rows], x, scanned)
    y, least = outermost(x, rows)
    lost = ~(least <= 1.0) | (high < low)
    return np.where(lost, np.nan, x), np.where(lost, np.nan, y)
