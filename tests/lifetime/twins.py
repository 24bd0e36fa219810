"""The lifetime forms a second time, cycle by cycle.

Written as products of powers in decimal arithmetic, where the package adds logarithms of
arrays; the constants stand here once more, typed from the same publications (from memory).
"""

from decimal import Decimal as D
from decimal import localcontext

K_B, EV, R_GAS, ZERO = D("1.380649e-23"), D("1.602176634e-19"), D("1.380649e-23") * D("6.02214076e23"), D("273.15")


def _exact(function):
    def wrapped(*args, **named):
        with localcontext() as context:
            context.prec = 40
            return float(function(*(D(repr(float(a))) for a in args), **named))
    return wrapped


@_exact
def lesit_refit(range_k, mean_c):
    return D(302500) / range_k ** D("5.039") * (D("9.891e-20") / (K_B * (mean_c + ZERO))).exp()


@_exact
def lesit_print(range_k, mean_c):
    return D(640) / range_k**5 * (D(78000) / (R_GAS * (mean_c + ZERO))).exp()


@_exact
def bayerer(range_k, at_c, heating_s, amps_per_foot, volts_over_100, wire_um, k=9.34e14):
    return (D(repr(k)) / (range_k ** D("4.416") * heating_s ** D("0.463") * amps_per_foot ** D("0.716") * volts_over_100 ** D("0.761") * wire_um.sqrt())
            * (1285 / (at_c + ZERO)).exp())


@_exact
def sintered(range_k, mean_c, heating_s, aspect, diode=False):
    shape = aspect ** (D("1.942") - D("0.009012") * range_k)
    pulse = (D("1.434") + 1 / heating_s ** D("1.208")) / D("2.434")
    return D("3.4368e14") / range_k ** D("4.923") * shape * pulse * (D("0.06606") * EV / (K_B * (mean_c + ZERO))).exp() * D("0.6204" if diode else "1")


@_exact
def coffin_manson(range_k, a, n):
    return a / range_k**n
