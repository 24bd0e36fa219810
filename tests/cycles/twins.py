"""Rainflow written another way: lists, no kernels, cycles taken out one by one."""

from __future__ import annotations


def reversals(series):
    """Ends and turning points, by looking at each value's neighbours once plateaus are gone."""
    flat = [series[0]] if len(series) else []
    for value in series:
        if value != flat[-1]:
            flat.append(value)
    return [x for k, x in enumerate(flat) if k in (0, len(flat) - 1) or (x - flat[k - 1]) * (flat[k + 1] - x) < 0]


def four_point(series):
    """Closed cycles (low, high) and residue: the first inner pair that fits is taken out, then the search begins anew."""
    points = reversals(series)
    cycles = []
    while True:
        for k in range(len(points) - 3):
            a, b, c, d = points[k:k + 4]
            if abs(b - c) <= abs(a - b) and abs(b - c) <= abs(c - d):
                cycles.append((min(b, c), max(b, c)))
                del points[k + 1:k + 3]
                break
        else:
            return cycles, points


def closed_loop(series):
    """Full cycles of the endlessly repeated series: cut at its highest point, every swing closes."""
    points = reversals(series)
    top = points.index(max(points))
    loop = points[top:] + points[:top] + [points[top]]
    cycles, rest = four_point(loop)
    assert len(rest) in (1, 3), rest
    if len(rest) == 3:
        cycles.append((rest[1], rest[0]))
    return cycles


def closed_with_attributes(values, times, phases):
    """Closed cycles (low, high, phase at the peak, start, end, heating time), instants looked up in the raw samples.

    A peak stands at its first sample, a valley at its last; values of different levels must differ.
    """
    place = [k for k, x in enumerate(values) if x in reversals(values)]
    first, last = {}, {}
    for k in place:
        first.setdefault(values[k], k)
        last[values[k]] = k
    out = []
    for low, high in four_point(values)[0]:
        valley, peak = last[low], first[high]
        if valley < peak:
            heating = times[peak] - times[valley]
            ends = times[valley], times[peak]
        else:
            after = next(k for k in range(valley, len(values)) if values[k] >= high)
            slope = (values[after] - values[after - 1]) / (times[after] - times[after - 1])
            heating = times[after - 1] + (high - values[after - 1]) / slope - times[valley]
            ends = times[peak], times[valley]
        out.append((low, high, phases[peak], *ends, heating))
    return out
