"""Four-point rainflow counting: plain arrays, no checks."""

from __future__ import annotations

from numba import njit

# columns of a point
VALUE, TIME, PHASE, HALF, RIPPLE = range(5)
# columns of a counted cycle
RANGE, MEAN, LOW, HIGH, HEATING, START, END, PEAK_PHASE = range(8)
#: A swing up to this much above the local ripple range is taken as ripple when its heating time is judged.
RIPPLE_REACH = 1.25


@njit(cache=True)
def _close(a, b, after, out):
    """The cycle between two points that ``after`` closes."""
    out[RANGE] = abs(b[VALUE] - a[VALUE])
    out[MEAN] = 0.5 * (a[VALUE] + b[VALUE])
    rising = b[VALUE] > a[VALUE]
    peak = b if rising else a
    out[LOW] = a[VALUE] if rising else b[VALUE]
    out[HIGH] = peak[VALUE]
    if peak[HALF] > 0.0 and out[RANGE] <= RIPPLE_REACH * peak[RIPPLE]:
        out[HEATING] = peak[HALF]
    elif rising:
        out[HEATING] = b[TIME] - a[TIME]
    else:
        # the rise that closes it, up to the level of the earlier peak
        out[HEATING] = (after[TIME] - b[TIME]) * (a[VALUE] - b[VALUE]) / (after[VALUE] - b[VALUE])
    out[START] = a[TIME]
    out[END] = b[TIME]
    out[PEAK_PHASE] = peak[PHASE]


@njit(cache=True)
def count(points, stack, depth, heading, out):
    """Push ``points`` (n, 5) onto the stack; its top is provisional until the direction turns.

    Returns (depth, heading, cycles closed). ``heading``: 0 level or empty, 1 rising, -1 falling.
    """
    closed = 0
    for j in range(points.shape[0]):
        value = points[j, VALUE]
        if depth > 0:
            top = stack[depth - 1, VALUE]
            if value == top:
                continue
            turn = 1 if value > top else -1
            if turn == heading:
                stack[depth - 1] = points[j]
            else:
                stack[depth] = points[j]
                depth += 1
            heading = turn
        else:
            stack[0] = points[j]
            depth = 1
        # the newest point closes what lies inside its branch, provisional or not: it can only grow
        while depth >= 4:
            a, b, c, d = stack[depth - 4, VALUE], stack[depth - 3, VALUE], stack[depth - 2, VALUE], stack[depth - 1, VALUE]
            inner = abs(c - b)
            if inner > abs(b - a) or inner > abs(d - c):
                break
            _close(stack[depth - 3], stack[depth - 2], stack[depth - 1], out[closed])
            closed += 1
            stack[depth - 3] = stack[depth - 1]
            depth -= 2
    return depth, heading, closed
