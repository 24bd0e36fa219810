"""The way of the heat of a study: from the losses of a mission through layers, plate, case and sink to the coolant.

Everything here is at rest. Losses are either the mission's means, chip by chip, or those of its hottest moment held for ever.
"""

from __future__ import annotations

import time
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from ..errors import InputError, NoStableTemperature, RangeError
from ..history.steady import BEYOND_C
from ..thermal import FourierStack, FullNetwork, LevelState, ReducedNetwork, SinkPath, plate_stack
from ..thermal.build import chip_ladder, full_and_reduced
from ..thermal.coupling import without_mutual
from .run import MissionResult

#: Step of a way: what modules before have warmed the coolant by.
WARMED_BEFORE = "coolant warmed before"


class HeatStep(NamedTuple):
    """One part of the way.

    Attributes
    ----------
    name : str
    upper_c, lower_c : float
        Temperatures of its hot and its cold face [degC].
    inside : bool
        Part of the module.
    heat_w, r_k_per_w : float
        Heat that goes through and the resistance that it meets; NaN where neighbours' heat joins on the way, so that no single number stands for it.
    """

    name: str
    upper_c: float
    lower_c: float
    inside: bool
    heat_w: float = np.nan
    r_k_per_w: float = np.nan

    @property
    def drop_k(self) -> float:
        return self.upper_c - self.lower_c


class LayerHeat(NamedTuple):
    """One layer under a chip, or of the plate.

    Attributes
    ----------
    part : str
        "chip" or "plate".
    material : str
    thickness_mm : float
    r_k_per_w : float
        Of a chip's layer; NaN for the plate's, where heat spreads and neighbours join.
    upper_c, lower_c : float
        Of its faces [degC]; for all layers of a plate those of the whole plate under the chip.
    k_w_per_m_k, k_there_w_per_m_k : float
        Conductivity that was reckoned with, and what the material's law says for the mean of the two faces; NaN without a law
        or where that mean lies outside its tested range.
    has_law : bool
    """

    part: str
    material: str
    thickness_mm: float
    r_k_per_w: float
    upper_c: float
    lower_c: float
    k_w_per_m_k: float
    k_there_w_per_m_k: float
    has_law: bool

    @property
    def mean_c(self) -> float:
        """Mean of the two faces [degC]."""
        return 0.5 * (self.upper_c + self.lower_c)

    @property
    def drop_k(self) -> float:
        return self.upper_c - self.lower_c

    @property
    def change_percent(self) -> float:
        """Change of the layer's resistance with the conductivity at its own temperature [%]."""
        return 100.0 * (self.k_w_per_m_k / self.k_there_w_per_m_k - 1.0)


@dataclass(frozen=True)
class ChipWay:
    """The way of the heat of one chip.

    Attributes
    ----------
    chip : int
    name, place : str
        Of the chip, and of its section in the module file.
    loss_w : float
    steps : tuple of HeatStep
        From the junction to the coolant at the inlet; they add up.
    layers : tuple of LayerHeat
        Empty where the module file gives branches.
    """

    chip: int
    name: str
    place: str
    loss_w: float
    steps: tuple[HeatStep, ...]
    layers: tuple[LayerHeat, ...]


@dataclass(frozen=True)
class PlateHeat:
    """The plate under the hottest chip, on a surface of one temperature.

    Attributes
    ----------
    stack : FourierStack
        Its coolant is the sink's surface; aged grease is in it.
    source : int
        Number of the hottest chip on it.
    power_w : ndarray, shape (n,)
        Losses of the chips on it.
    surface_c : float
    spreading : DataFrame
        Shortcuts beside the exact resistance of that chip over the surface, see :func:`mission.thermal.spreading.compare_spreading`.
    """

    stack: FourierStack
    source: int
    power_w: np.ndarray
    surface_c: float
    spreading: object


@dataclass(frozen=True)
class HeatReview:
    """The heat of a study at rest; n chips.

    Attributes
    ----------
    result : MissionResult
    held : bool
        Losses of the hottest moment held for ever, not means of the mission.
    level : int
        Of the cooling, from ``result.cooling.plan``.
    state : LevelState
        That level worked out.
    wavers : LevelState or None
        The level that the cooling would switch to and fro with, if it does not come to rest at one.
    coolant_c : float
        At the inlet [degC].
    loss_w, junction_c, case_c, surface_c, coolant_at_c : ndarray, shape (n,)
        Of every chip; the sink's surface under it, and the coolant where it reaches that sink.
    r_junction_k_per_w, r_case_k_per_w : ndarray, shape (n, n)
        Exact steady rise over the coolant at the inlet of junction and case point i per watt in chip j.
    full : FullNetwork or None
        None where the sink is driven by the losses at once.
    network : ReducedNetwork
        As the march uses it at this level.
    wall_s : float
        Time to build and reduce it.
    ways : tuple of ChipWay
        The hottest chip of each kind.
    plate : PlateHeat or None
    """

    result: MissionResult
    held: bool
    level: int
    state: LevelState
    wavers: LevelState | None
    coolant_c: float
    loss_w: np.ndarray
    junction_c: np.ndarray
    case_c: np.ndarray
    surface_c: np.ndarray
    coolant_at_c: np.ndarray
    r_junction_k_per_w: np.ndarray
    r_case_k_per_w: np.ndarray
    full: FullNetwork | None
    network: ReducedNetwork
    wall_s: float
    ways: tuple[ChipWay, ...]
    plate: PlateHeat | None

    @property
    def chips(self) -> tuple[str, ...]:
        """Names of the chips."""
        return self.result.history.chips

    @property
    def hottest(self) -> int:
        """Number of the chip with the highest junction temperature."""
        return int(np.argmax(self.junction_c))


def review_heat(result: MissionResult, *, held: bool = False) -> HeatReview:
    """Follow the heat of a result from the junctions to the coolant.

    Parameters
    ----------
    result : MissionResult
        Of a whole mission.
    held : bool
        Take the hottest point of the mission as if it lasted for ever (losses by the temperatures it settles at, without ripple), in place of
        the mean loss of each chip.

    Returns
    -------
    HeatReview

    Raises
    ------
    InputError
        A result that was stopped early.
    NoStableTemperature
        The hottest point has none if it lasts for ever.

    Notes
    -----
    Means start with the level of the cooling that held longest and the mean temperature of the coolant, the hottest point with its own. Where
    the temperature of the sink chooses among levels, the one is taken at which it comes to rest. Resistances do not depend on temperature
    within a level, so with means the temperatures are means too wherever the cooling keeps one level.
    """
    if not result.complete:
        raise InputError("result", f"a run that was stopped at {result.history.duration_s:.6g} s", "a whole mission", "run it to its end")
    study, plan, history = result.study, result.cooling.plan, result.history
    if held:
        point, network = result.hot_point, result.network
        start, coolant = point.level, point.coolant_c
        base = plan.state(start).r_th_k_per_w

        def losses(k):
            at = point.held(result.tables, network)
            # all chips stand on one surface where it chooses, so another film adds the same to every entry
            at.r_k_per_w = at.r_k_per_w + (plan.state(k).r_th_k_per_w - base)
            return at.settle(coolant).loss_w
    else:
        start, coolant = result.cooling.used[0].level, float(history.coolant_c.mean())  # stretches of one length
        mean = history.energy_j / history.duration_s

        def losses(k):
            return mean
    level, other = _resting_level(plan, start, coolant, losses)
    state, materials = plan.state(level), study.materials()
    begin = time.perf_counter()
    full, network = full_and_reduced(study.module, state.path, materials=materials, relative_tolerance=study.spec.march.network_tolerance)
    wall = time.perf_counter() - begin
    if held:
        at = point.held(result.tables, network)
        steady = at.settle(coolant)
        if not steady.exists:
            edge = at.runaway_coolant_c(coolant)
            why = "" if edge is None else f"; losses run away with a coolant above {edge:.0f} degC (now {coolant:.0f} degC)"
            raise NoStableTemperature(
                f"{study.source}: no stable temperature below {BEYOND_C:g} degC exists if the hottest moment of the mission, at {point.end_s:.6g} s, "
                f"lasts for ever{why}; cooling: {state.words}, {1000.0 * state.r_th_k_per_w:.4g} K/kW")
        loss = steady.loss_w
    else:
        loss = mean
    r_junction, r_case = _steady(full, network)
    junction, case = coolant + r_junction @ loss, coolant + r_case @ loss
    surface, coolant_at = _surfaces(state.path, loss, coolant)
    groups = np.arange(loss.size).reshape(-1, 6)
    chips = [int(g[np.argmax(junction[g])]) for g in groups]
    ways = tuple(_way(study.module, materials, state.path, chip, loss, (junction[chip], case[chip], surface[chip], coolant_at[chip], coolant))
                 for chip in chips)
    hot = int(np.argmax(junction))
    plate = None if study.module.plate is None else _plate(study.module, materials, state.path, hot, loss, surface[hot])
    return HeatReview(result, held, level, state, None if other is None else plan.state(other), coolant, loss, junction, case, surface, coolant_at,
                      r_junction, r_case, full, network, wall, ways, plate)


def _resting_level(plan, start, coolant_c, losses):
    """Level of the group of ``start`` at which the surface rests; and another one where there is no rest between the two."""
    group = next(g for g in plan.groups if start in g.levels)
    k, seen = group.levels.index(start), set()
    while True:
        level = group.levels[k]
        rise = plan.state(level).r_th_k_per_w * losses(level).sum()
        low, high = group.allowed(coolant_c + (np.inf if np.isnan(rise) else rise), coolant_c)  # NaN: no stable temperature
        step = 1 if k < low else -1 if k > high else 0
        if step == 0:
            return level, None
        if k + step in seen:
            return group.levels[max(k, k + step)], group.levels[min(k, k + step)]
        seen.add(k)
        k += step


def _steady(full, network):
    """Steady resistances of junctions and case points: exact, where there is a full network, with what was put beside it."""
    if full is None:
        return network.r_th_k_per_w(), network.r_case_k_per_w()
    plain = without_mutual(network)
    rises = np.linalg.solve(full.g_w_per_k, full.out_junction.T)
    return (full.out_junction @ rises + network.r_th_k_per_w() - plain.r_th_k_per_w(),
            full.out_case @ rises + network.r_case_k_per_w() - plain.r_case_k_per_w())


def _surfaces(path: SinkPath, loss, coolant_c):
    """Sink surface under every chip and coolant at its sink: at rest all heat of the chips on a sink goes through it."""
    sink = np.zeros(loss.size, int) if len(path.ladders) == 1 else (np.arange(loss.size) % 6) // 2
    heat = np.bincount(sink, loss)
    coolant, before = np.full(heat.size, coolant_c), 0.0
    for k in path.first_to_last:
        coolant[k] += path.coolant_rise_k_per_w * before
        before += heat[k]
    return (coolant + heat * np.array(path.r_th_k_per_w))[sink], coolant[sink]


def _way(module, materials, path, chip, losses_w, temperatures_c) -> ChipWay:
    junction, case, surface, coolant_at, inlet = temperatures_c
    loss, leg = losses_w[chip], (chip % 6) // 2
    of_leg = losses_w[(np.arange(losses_w.size) % 6) // 2 == leg].sum()
    pair = module.chip_pairs()[chip // 6]
    thermal, under = pair.thermal, module.case_to_sink
    if thermal.layer:
        shares = chip_ladder(thermal, materials, f"{pair.place}.thermal").r_layers_k_per_w
        own = [(f"{layer.material}, {layer.thickness_mm:g} mm", r) for layer, r in zip(thermal.layer, shares)]
    else:
        own = [(f"junction to {'sink' if under is None else 'case'}", sum(thermal.r_k_per_w))]
    steps, face = [], junction
    for name, r in own:
        steps.append(HeatStep(name, face, face - loss * r, True, loss, r))
        face = steps[-1].lower_c
    if module.plate is not None or module.coupling:
        steps.append(HeatStep("heat of other chips" if module.plate is None else "plate", face, case, True))
    if module.plate is not None:
        steps.append(HeatStep("case to sink", case, surface, False))
    elif under is not None:
        if under.per == "module":
            heat, r = losses_w.sum() if module.arrangement == "six-pack" else of_leg, under.r_th_k_per_w
        else:
            heat, r = loss, under.r_th_diode_k_per_w if pair.is_diode else under.r_th_switch_k_per_w
        steps.append(HeatStep("case to sink", case, surface, False, heat, path.paste * r))
    heat, r = (losses_w.sum(), path.r_th_k_per_w[0]) if len(path.ladders) == 1 else (of_leg, path.r_th_k_per_w[leg])
    steps.append(HeatStep("sink to coolant", surface, coolant_at, False, heat, r))
    if coolant_at > inlet:
        steps.append(HeatStep(WARMED_BEFORE, coolant_at, inlet, False))
    layers = [_layer("chip", layer, step.r_k_per_w, step[1:3], materials) for layer, step in zip(thermal.layer, steps)]
    if module.plate is not None:
        layers += [_layer("plate", layer, np.nan, (face, case), materials) for layer in module.plate.layer]
    return ChipWay(chip, module.chip_names()[chip], pair.place, float(loss), tuple(steps), tuple(layers))


def _layer(part, layer, r, faces_c, materials) -> LayerHeat:
    material, there = materials[layer.material], np.nan
    if material.k_over_t is not None:
        try:
            there = material.at(0.5 * sum(faces_c)).k_w_per_m_k
        except RangeError:
            pass  # said where it is shown
    return LayerHeat(part, layer.material, layer.thickness_mm, r, *faces_c, material.k_w_per_m_k, there, material.k_over_t is not None)


def _plate(module, materials, path, hot, loss, surface_c) -> PlateHeat:
    from ..thermal.spreading import compare_spreading

    chips = np.arange(loss.size)
    if module.arrangement != "six-pack":
        chips = chips[(chips % 6) // 2 == (hot % 6) // 2]
    stack = plate_stack(module, SinkPath((0.0,), paste=path.paste), materials=materials)
    source = int(np.flatnonzero(chips == hot)[0])
    return PlateHeat(stack, source, loss[chips], float(surface_c), compare_spreading(stack, source))
