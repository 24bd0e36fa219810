"""What flows through a sink: properties of air and coolants, and friction and heat transfer in rectangular channels.

Properties come from CoolProp, the pressure of the atmosphere and the correlations from ``fluids``
and ``ht`` wherever they have them. The libraries are imported where they are used, so that
importing this module costs nothing. Correlations that the libraries lack stand here with their source.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache

from ..checks import require_range
from ..errors import InputError, RangeError, near_match

#: Flow in ducts is laminar below the first and turbulent above the second Reynolds number; between them nothing is sure.
RE_LAMINAR, RE_TURBULENT = 2300.0, 4000.0

#: Pressure at which liquids are taken [Pa]; their properties hardly depend on it.
LIQUID_PRESSURE_PA = 2e5

def need_libraries() -> None:
    """Refuse in words where the libraries of fluid properties and correlations are not installed.

    Raises
    ------
    InputError
        Names the missing one.
    """
    from importlib.util import find_spec

    for name in ("ht", "fluids", "CoolProp"):
        if find_spec(name) is None:
            raise InputError("computed cooling", f"no library {name}", "the libraries ht, fluids and CoolProp", 'install them: pip install "kelvinledger[cooling]"')


#: Names of liquid coolants, and the CoolProp fluid behind each.
LIQUIDS = {"water": "Water", "water-glycol": "INCOMP::MEG", "water-propylene-glycol": "INCOMP::MPG"}

SOURCE_SHAH_LONDON = ("R. K. Shah, A. L. London, Laminar Flow Forced Convection in Ducts, 1978 (fully developed laminar flow, "
                      "walls all round heated evenly along the flow)")
SOURCE_APPARENT = ("Y. S. Muzychka, M. M. Yovanovich, J. Fluids Eng. 131, 2009, 111105 (friction of developing laminar flow, within about 10 %; "
                   "coefficients from memory)")
SOURCE_COMBINED = ("Y. S. Muzychka, M. M. Yovanovich, J. Heat Transfer 126, 2004, 54-61 (heat transfer where velocity and temperature both develop, "
                   "within about 15 %; coefficients from memory)")
SOURCE_GNIELINSKI = (
    "V. Gnielinski, Int. Chem. Eng. 16, 1976, 359-368, with friction after Petukhov (smooth duct, hydraulic diameter, about 10 to 15 %)"
)
SOURCE_BAND = "V. Gnielinski, Int. J. Heat Mass Transfer 63, 2013, 134-140 (straight line between Reynolds 2300 and 4000)"
SOURCE_AIR = "dry air from CoolProp; pressure over altitude from the U.S. Standard Atmosphere 1976 (library fluids)"
SOURCE_LIQUID = "coolant properties from CoolProp"


@dataclass(frozen=True)
class FluidState:
    """Properties of a fluid at one temperature and pressure.

    Attributes
    ----------
    t_c, p_pa : float
        Temperature [degC], pressure [Pa].
    rho_kg_per_m3, cp_j_per_kg_k, k_w_per_m_k, mu_pa_s : float
        Density, specific heat, conductivity, dynamic viscosity.
    """

    t_c: float
    p_pa: float
    rho_kg_per_m3: float
    cp_j_per_kg_k: float
    k_w_per_m_k: float
    mu_pa_s: float

    @property
    def nu_m2_per_s(self) -> float:
        """Kinematic viscosity [m2/s]."""
        return self.mu_pa_s / self.rho_kg_per_m3

    @property
    def pr(self) -> float:
        """Prandtl number."""
        return self.cp_j_per_kg_k * self.mu_pa_s / self.k_w_per_m_k


def air_pressure_pa(altitude_m: float) -> float:
    """Pressure of the standard atmosphere [Pa] at -400 to 6000 m.

    Source: U.S. Standard Atmosphere 1976, by the library ``fluids``.

    Raises
    ------
    RangeError
        Altitude outside the range.

    Examples
    --------
    >>> round(air_pressure_pa(0.0)), round(air_pressure_pa(2000.0))
    (101325, 79501)
    """
    from fluids.atmosphere import ATMOSPHERE_1976

    require_range("altitude_m", altitude_m, low=-400.0, high=6000.0, unit="m")
    return float(ATMOSPHERE_1976(float(altitude_m)).P)


@lru_cache(maxsize=4096)
def air_state(t_c: float, p_pa: float = 101325.0) -> FluidState:
    """Dry air at -60 to 400 degC [degC] and 30 to 120 kPa [Pa]; humidity is left out (below 1 % on the density up to 30 degC).

    Source: CoolProp.

    Raises
    ------
    RangeError
        Temperature or pressure outside the range.

    Examples
    --------
    >>> air = air_state(25.0)
    >>> round(air.rho_kg_per_m3, 3), round(air.pr, 2)
    (1.184, 0.71)
    """
    require_range("air temperature", t_c, low=-60.0, high=400.0, unit="degC")
    require_range("air pressure", p_pa, low=30e3, high=120e3, unit="Pa")
    return _state("Air", t_c, p_pa)


@lru_cache(maxsize=4096)
def coolant_state(name: str, t_c: float, glycol_mass_share: float = 0.0) -> FluidState:
    """A liquid coolant at 2 bar.

    Parameters
    ----------
    name : str
        ``water``, ``water-glycol`` (ethylene glycol) or ``water-propylene-glycol``.
    t_c : float
        Temperature [degC]: water 0.1 to 115, mixtures from their freezing point to 100.
    glycol_mass_share : float
        Mass of glycol over mass of the mixture, 0.1 to 0.6; 0 for water.

    Raises
    ------
    InputError
        Unknown coolant.
    RangeError
        Temperature or share outside the range, or the coolant would be frozen.

    Notes
    -----
    Source: CoolProp (water: IAPWS equation of state; mixtures: fits for incompressible fluids, to within about 2 % of other collections).

    Examples
    --------
    >>> c = coolant_state("water-glycol", 65.0, 0.5)
    >>> round(c.rho_kg_per_m3), round(c.cp_j_per_kg_k), round(c.pr, 1)
    (1037, 3524, 10.6)
    """
    if name not in LIQUIDS:
        raise InputError("coolant", f"'{name}'", "one of " + ", ".join(LIQUIDS), near_match(name, LIQUIDS))
    if name == "water":
        require_range("coolant temperature (water)", t_c, low=0.1, high=115.0, unit="degC")
        return _state("Water", t_c, LIQUID_PRESSURE_PA)
    require_range("glycol_mass_share", glycol_mass_share, low=0.1, high=0.6)
    freezing_c = _freezing_c(name, glycol_mass_share)
    if t_c <= freezing_c:
        raise RangeError(
            "coolant temperature",
            f"{t_c:g} degC",
            f"above {freezing_c:.1f} degC, where {name} of mass share {glycol_mass_share:g} freezes",
            "take more glycol, or a warmer coolant",
        )
    require_range(f"coolant temperature ({name})", t_c, high=100.0, unit="degC")
    return _state(f"{LIQUIDS[name]}[{glycol_mass_share}]", t_c, LIQUID_PRESSURE_PA)


@lru_cache(maxsize=64)
def _freezing_c(name: str, share: float) -> float:
    from CoolProp.CoolProp import PropsSI

    return PropsSI("T_freeze", "T", 330.0, "P", LIQUID_PRESSURE_PA, f"{LIQUIDS[name]}[{share}]") - 273.15


def _state(fluid: str, t_c: float, p_pa: float) -> FluidState:
    from CoolProp.CoolProp import PropsSI

    try:
        return FluidState(t_c, p_pa, *(float(PropsSI(key, "T", t_c + 273.15, "P", p_pa, fluid)) for key in ("D", "C", "L", "V")))
    except ValueError as err:
        raise RangeError("fluid temperature", f"{t_c:g} degC", f"a temperature at which CoolProp knows {fluid}", str(err)) from None


@dataclass(frozen=True)
class RectChannel:
    """A rectangular channel; sides and length in metres [m]."""

    width_m: float
    height_m: float
    length_m: float

    @property
    def area_m2(self) -> float:
        """Cross section [m2]."""
        return self.width_m * self.height_m

    @property
    def hydraulic_m(self) -> float:
        """Hydraulic diameter, four times the area over the perimeter [m]."""
        return 2.0 * self.area_m2 / (self.width_m + self.height_m)

    @property
    def aspect(self) -> float:
        """Short over long side, 0 to 1."""
        return min(self.width_m, self.height_m) / max(self.width_m, self.height_m)


def fanning_f_re(aspect: float) -> float:
    """Fanning friction factor times Reynolds number of fully developed laminar flow in a rectangular duct.

    Source: Shah and London 1978 (polynomial, within 0.1 %); ``aspect`` = short over long side, 0 (two plates) to 1 (square).

    Examples
    --------
    >>> round(fanning_f_re(1.0), 3), round(fanning_f_re(0.25), 3)
    (14.23, 18.234)
    """
    a = float(require_range("aspect", aspect, low=0.0, high=1.0))
    return 24.0 * (1.0 + a * (-1.3553 + a * (1.9467 + a * (-1.7012 + a * (0.9564 - 0.2537 * a)))))


def nusselt_developed(aspect: float) -> float:
    """Nusselt number (on the hydraulic diameter) of fully developed laminar flow in a rectangular duct.

    Heat flow constant along the duct, wall temperature even around it. Source: Shah and London 1978, by the library ``ht``.

    Examples
    --------
    >>> round(nusselt_developed(0.5), 3)
    4.126
    """
    from ht.conv_internal import Nu_laminar_rectangular_Shan_London

    require_range("aspect", aspect, low=0.0, high=1.0)
    return float(Nu_laminar_rectangular_Shan_London(float(aspect)))


def nusselt_laminar(re: float, pr: float, channel: RectChannel) -> float:
    """Mean Nusselt number (on the hydraulic diameter) of laminar flow that enters a rectangular channel unheated and even.

    Joins fully developed flow, the thermal entrance (Leveque) and the boundary layers at the very edge; heat flow constant
    along the channel. Tends to :func:`nusselt_developed` for a long channel.

    Source: Muzychka and Yovanovich 2004; for Pr above 0.1, within about 15 %. The fully developed end is that of Shah and London.
    """
    z = channel.length_m / (channel.hydraulic_m * re * pr)
    edge = 2.0 * 0.886 / (1.0 + (1.909 * pr ** (1 / 6)) ** 4.5) ** (2 / 9) / math.sqrt(z)
    entrance = 1.5 * 0.501 * (fanning_f_re(channel.aspect) / z) ** (1 / 3)
    inner = (entrance**5 + nusselt_developed(channel.aspect) ** 5) ** 0.2
    m = 2.27 + 1.65 * pr ** (1 / 3)
    top = max(edge, inner)  # keeps the powers from overflowing at high Pr
    return top * ((edge / top) ** m + (inner / top) ** m) ** (1 / m)


def darcy_laminar(re: float, channel: RectChannel) -> float:
    """Mean Darcy friction factor of laminar flow that enters a rectangular channel evenly, the growth of its momentum included.

    Source: Muzychka and Yovanovich 2009, within about 10 %; long channels end at Shah and London.
    """
    x = channel.length_m / (channel.hydraulic_m * re)
    return 4.0 * math.hypot(3.44 / math.sqrt(x), fanning_f_re(channel.aspect)) / re


def darcy_turbulent(re: float) -> float:
    """Darcy friction factor of turbulent flow in a smooth duct after Petukhov, for 3000 < Re < 5e6.

    Examples
    --------
    >>> round(darcy_turbulent(1e4), 7)
    0.0314798
    """
    return (0.79 * math.log(re) - 1.64) ** -2


def nusselt_turbulent(re: float, pr: float, diameter_over_length: float = 0.0) -> float:
    """Mean Nusselt number of turbulent flow in a smooth duct after Gnielinski (library ``ht``), with his factor for the entrance.

    For 0.5 < Pr < 2000 and 2300 < Re < 5e6; with 0 for ``diameter_over_length`` the duct is long.

    Examples
    --------
    >>> round(nusselt_turbulent(1e4, 0.7), 4)
    29.8174
    """
    from ht.conv_internal import turbulent_Gnielinski

    return float(turbulent_Gnielinski(re, pr, darcy_turbulent(re))) * (1.0 + diameter_over_length ** (2 / 3))


def by_band(re: float, laminar: Callable[[float], float], turbulent: Callable[[float], float]) -> tuple[float, str]:
    """A quantity of duct flow at any Reynolds number, and the name of the band.

    Below 2300 laminar; from 4000 turbulent; a straight line over the Reynolds number in between (Gnielinski 2013).
    Boundary layers that grow from the edge of a short channel do not stop at 2300: above it the larger of the two holds.

    Returns
    -------
    float, str
        Value, and ``laminar``, ``transition``, ``turbulent``, or ``edge`` (above 2300, with the laminar edge the larger).
    """
    if re <= RE_LAMINAR:
        return laminar(re), "laminar"
    if re < RE_TURBULENT:
        share = (re - RE_LAMINAR) / (RE_TURBULENT - RE_LAMINAR)
        value, word = (1.0 - share) * laminar(RE_LAMINAR) + share * turbulent(RE_TURBULENT), "transition"
    else:
        value, word = turbulent(re), "turbulent"
    edge = laminar(re)
    return (edge, "edge") if edge > value else (value, word)


def channel_pressure_pa(mass_flow_kg_per_s: float, channel: RectChannel, fluid: FluidState, loss_coefficient: float = 0.0) -> float:
    """Pressure drop along one channel [Pa] for its mass flow [kg/s], with ``loss_coefficient`` dynamic pressures for its ends.

    Source and validity: :func:`darcy_laminar`, :func:`darcy_turbulent`, :func:`by_band`. Zero flow gives zero.
    """
    if mass_flow_kg_per_s <= 0.0:
        return 0.0
    speed = mass_flow_kg_per_s / (fluid.rho_kg_per_m3 * channel.area_m2)
    re = speed * channel.hydraulic_m / fluid.nu_m2_per_s
    darcy, _ = by_band(re, lambda r: darcy_laminar(r, channel), darcy_turbulent)
    return (darcy * channel.length_m / channel.hydraulic_m + loss_coefficient) * 0.5 * fluid.rho_kg_per_m3 * speed**2
