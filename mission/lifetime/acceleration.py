"""Acceleration of joint tests, and board-level solder; small closed formulas."""

from __future__ import annotations

import math

from ..checks import require_range

#: Swing exponent, frequency exponent, temperature constant [K].
NORRIS_LANDZBERG_SNPB = (1.9, 1.0 / 3.0, 1414.0)
NORRIS_LANDZBERG_SAC = (2.65, 0.136, 2185.0)


def norris_landzberg_factor(test_k, use_k, test_per_day, use_per_day, test_max_c, use_max_c, constants=NORRIS_LANDZBERG_SNPB) -> float:
    """How many cycles in use one test cycle stands for.

    AF = (dT_test/dT_use)^n (f_use/f_test)^m exp(E (1/T_max,use - 1/T_max,test)), temperatures in kelvin.

    Parameters
    ----------
    test_k, use_k : float
        Swings [K].
    test_per_day, use_per_day : float
        Cycles a day.
    test_max_c, use_max_c : float
        Highest temperatures [degC].
    constants : tuple
        ``NORRIS_LANDZBERG_SNPB`` (default) or ``NORRIS_LANDZBERG_SAC`` (from memory of Pan et al. 2005;
        other authors differ a lot).

    Returns
    -------
    float

    Raises
    ------
    RangeError
        A swing or frequency not above zero, a temperature below absolute zero.

    References
    ----------
    K. C. Norris, A. H. Landzberg, "Reliability of controlled collapse interconnections",
    IBM J. Res. Dev. 13(3), 1969, 266-271.

    Examples
    --------
    >>> round(norris_landzberg_factor(100, 60, 24, 1, 100, 80), 6)
    1.134079
    """
    for name, value in (("test_k", test_k), ("use_k", use_k), ("test_per_day", test_per_day), ("use_per_day", use_per_day)):
        require_range(name, value, low=0.0, low_open=True)
    for name, value in (("test_max_c", test_max_c), ("use_max_c", use_max_c)):
        require_range(name, value, low=-273.15, low_open=True, unit="degC")
    n, m, e = constants
    return float((test_k / use_k) ** n * (use_per_day / test_per_day) ** m * math.exp(e * (1.0 / (use_max_c + 273.15) - 1.0 / (test_max_c + 273.15))))


def board_solder_term(cycles, phase_h, heating_h, swing_k, max_c) -> float:
    """Thermo-mechanical term of a reliability handbook for solder on boards.

    (12 N/t) (min(theta, 2)/2)^(1/3) (dT/20)^1.9 exp(1414 (1/313 - 1/(T_max + 273))), after the FIDES guide.

    Parameters
    ----------
    cycles, phase_h : float
        N cycles in a phase of t hours.
    heating_h : float
        Duration theta of a cycle [h]; beyond 2 h it does no more harm.
    swing_k : float
        [K]
    max_c : float
        Highest temperature [degC].

    Returns
    -------
    float
        Factor on the failure rate of the joint.

    Raises
    ------
    RangeError
        A negative number, a phase of no length, a temperature below absolute zero.

    References
    ----------
    FIDES guide 2009, thermal cycling of solder joints (formula as transcribed in secondary literature).
    The guide rounds 0 degC to 273 K.

    Examples
    --------
    >>> round(board_solder_term(2, 24.0, 4.0, 40.0, 60.0), 6)
    4.895445
    """
    for name, value in (("cycles", cycles), ("heating_h", heating_h), ("swing_k", swing_k)):
        require_range(name, value, low=0.0)
    require_range("phase_h", phase_h, low=0.0, low_open=True, unit="h")
    require_range("max_c", max_c, low=-273.0, low_open=True, unit="degC")
    return float(12.0 * cycles / phase_h * (min(heating_h, 2.0) / 2.0) ** (1.0 / 3.0) * (swing_k / 20.0) ** 1.9
                 * math.exp(1414.0 * (1.0 / 313.0 - 1.0 / (max_c + 273.0))))
