"""Four-point rainflow counting: plain arrays, no checks."""

from __future__ import annotations

from numba import njit

# columns of a point
VALUE, TIME, PHASE, HALF, RIPPLE = range(5)
# columns of a counted cycle
RANGE, MEAN, LOW, HIGH, HEATING, START, END, PEAK_PHASE = range(8)
#: A swing up to this much above the local ripple range is taken as ripple when its heating time is judged.
RIPPLE_REACH = 1.25


@njit(cache=True, inline="always")
def _close(stack, first, value_before, time_before, out, row):
    """The cycle between points ``first`` and ``first + 1`` of the stack, which the point after them closes.

    ``value_before``, ``time_before``: the sample before that point.
    """
    value_a, value_b = stack[first, VALUE], stack[first + 1, VALUE]
    time_a, time_b = stack[first, TIME], stack[first + 1, TIME]
    rising = value_b > value_a
    peak = first + 1 if rising else first
    size = value_b - value_a if rising else value_a - value_b
    if stack[peak, HALF] > 0.0 and size <= RIPPLE_REACH * stack[peak, RIPPLE]:
        heating = stack[peak, HALF]
    elif rising:
        heating = time_b - time_a
    else:
        # the rise that closes it, up to the level of the earlier peak, which lies between the last two samples
        share = (value_a - value_before) / (stack[first + 2, VALUE] - value_before)
        heating = time_before + share * (stack[first + 2, TIME] - time_before) - time_b
    out[row, RANGE] = size
    out[row, MEAN] = 0.5 * (value_a + value_b)
    out[row, LOW] = value_a if rising else value_b
    out[row, HIGH] = value_b if rising else value_a
    out[row, HEATING] = heating
    out[row, START] = time_a
    out[row, END] = time_b
    out[row, PEAK_PHASE] = stack[peak, PHASE]


@njit(cache=True)
def count(value, time, phase, half, ripple, stack, depth, heading, latest_s, out):
    """Push points (n,) onto the stack; its top is provisional until the direction turns.

    ``phase``, ``half`` and ``ripple`` may have a single entry, which then holds for all points.
    Returns (depth, heading, latest_s, cycles closed). ``heading``: 0 level or empty, 1 rising, -1 falling.
    ``latest_s``: time of the latest point; the top of the stack has its value.
    """
    closed = 0
    many_phase, many_half, many_ripple = phase.size > 1, half.size > 1, ripple.size > 1
    value_before, time_before = 0.0, latest_s
    for j in range(value.size):
        v = value[j]
        time_before, latest_s = latest_s, time[j]
        if depth > 0:
            top = stack[depth - 1, VALUE]
            if v == top:
                continue
            value_before = top
            turn = 1 if v > top else -1
            if turn != heading:
                if turn == 1:
                    # a rise begins where a level valley ends
                    stack[depth - 1, TIME] = time_before
                depth += 1
            heading = turn
        else:
            depth = 1
        stack[depth - 1, VALUE] = v
        stack[depth - 1, TIME] = time[j]
        stack[depth - 1, PHASE] = phase[j] if many_phase else phase[0]
        stack[depth - 1, HALF] = half[j] if many_half else half[0]
        stack[depth - 1, RIPPLE] = ripple[j] if many_ripple else ripple[0]
        # the newest point closes what lies inside its branch, provisional or not: it can only grow
        while depth >= 4:
            inner = abs(stack[depth - 2, VALUE] - stack[depth - 3, VALUE])
            if inner > abs(stack[depth - 3, VALUE] - stack[depth - 4, VALUE]) or inner > abs(stack[depth - 1, VALUE] - stack[depth - 2, VALUE]):
                break
            _close(stack, depth - 3, value_before, time_before, out, closed)
            closed += 1
            # of equal peaks the first stays: there the rise has done its heating
            if heading != 1 or stack[depth - 1, VALUE] != stack[depth - 3, VALUE]:
                for k in range(5):
                    stack[depth - 3, k] = stack[depth - 1, k]
            depth -= 2
    return depth, heading, latest_s, closed
