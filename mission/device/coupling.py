"""How one chip warms another on the way to the reference point of their data: mutual branches of a module file.

    [[coupling]]
    heated = "S-up"             # in every leg; "S-a-up" names one chip of a six-pack
    felt = "D-up"
    r_k_per_w = [-0.0008, 0.014]
    tau_s = [0.02, 0.3]
    source = "measured on the opened module"
"""

from __future__ import annotations

from typing import Annotated

import numpy as np
from pydantic import Field, model_validator

from ..errors import RangeError, near_match
from ..tomlfile import FileModel

#: A mutual curve may fall below zero by this share of its end: rounded branches do.
DIP_SHARE = 0.01


class Coupling(FileModel):
    """Rise of chip ``felt`` per watt in chip ``heated``, over the point where their own branches end; acts both ways.

    A mutual curve begins flat, because the heat must first arrive. Branches that show this have a resistance below zero
    among the fast ones; their sum is above zero.
    """

    heated: Annotated[str, Field(min_length=1)]
    felt: Annotated[str, Field(min_length=1)]
    r_k_per_w: tuple[Annotated[float, Field(strict=True)], ...]
    tau_s: tuple[Annotated[float, Field(strict=True, gt=0)], ...]
    source: Annotated[str, Field(min_length=1)] | None = None

    @model_validator(mode="after")
    def _sensible(self):
        check_mutual_branches(self.r_k_per_w, self.tau_s)
        return self


def check_mutual_branches(r_k_per_w, tau_s) -> None:
    """Refuse branches that no mutual step response has.

    Parameters
    ----------
    r_k_per_w : sequence of float
        Either sign [K/W].
    tau_s : sequence of float
        Above zero [s].

    Raises
    ------
    RangeError
        No branch, lengths that differ, a zero, time constants that do not rise, a sum that is not above zero, a curve that
        falls below zero.
    """
    if len(r_k_per_w) == 0:
        raise RangeError("r_k_per_w", "an empty list", "at least one branch", "enter the branches, or remove the coupling")
    if len(r_k_per_w) != len(tau_s):
        raise RangeError("tau_s", f"{len(tau_s)} values in tau_s beside {len(r_k_per_w)} in r_k_per_w", "one time constant for every resistance",
                         "complete the shorter list")
    if 0.0 in r_k_per_w:
        raise RangeError("r_k_per_w", f"0 K/W at branch {list(r_k_per_w).index(0.0) + 1}", "resistances other than zero", "remove the branch with its time constant")
    for k in range(1, len(tau_s)):
        if tau_s[k] <= tau_s[k - 1]:
            raise RangeError("tau_s", f"{tau_s[k]:g} s at branch {k + 1} after {tau_s[k - 1]:g} s", "time constants that rise from branch to branch",
                             "sort the branches from fast to slow, resistances along with them")
    total = float(np.sum(r_k_per_w))
    if total <= 0.0:
        raise RangeError("r_k_per_w", f"a sum of {total:.3g} K/W", "a sum above 0 K/W", "heat in one chip cools no other: check the signs")
    time = np.geomspace(1e-3 * tau_s[0], 10.0 * tau_s[-1], 400)
    rise = _rise_k_per_w(r_k_per_w, tau_s, time)
    if rise.min() < -DIP_SHARE * total:
        raise RangeError("r_k_per_w", f"branches whose curve falls to {rise.min():.3g} K/W at {time[rise.argmin()]:.2g} s",
                         f"a curve that stays above zero (to {DIP_SHARE:.0%} of its end)", "heat in one chip cools no other: fit the branches again")


def coupled_chips(module) -> dict[tuple[int, int], int]:
    """Pairs of chips that the file couples.

    Parameters
    ----------
    module : PowerModule

    Returns
    -------
    dict
        Chip numbers, lower first -> index of the entry in ``module.coupling``.

    Raises
    ------
    RangeError
        Unknown names, a chip coupled to itself, a pair given twice, or both ways with different numbers.
    """
    six_pack = module.arrangement == "six-pack"
    number = {name: k for k, name in enumerate(module.chip_names())}
    short = [f"{pair.name}-{side}" for pair in module.chip_pairs() for side in ("up", "lo")]
    found: dict[tuple[int, int], int] = {}
    given: dict[tuple[int, int], int] = {}
    for k, entry in enumerate(module.coupling):
        place = f"coupling[{k + 1}]"
        for key in ("heated", "felt"):
            name = getattr(entry, key)
            if name in number and not six_pack:
                raise RangeError(f"{place}.{key}", f"'{name}' with arrangement = '{module.arrangement}'", "names without a leg's letter",
                                 "each leg is a module of its own, and all three are alike: leave the letter out")
            if name not in number and name not in short:
                choices = [*short, *number] if six_pack else short
                raise RangeError(f"{place}.{key}", f"'{name}'", "one of " + ", ".join(short) + (", or one chip, as S-a-up" if six_pack else ""),
                                 near_match(name, choices) or "name a chip of the leg")
        if entry.heated == entry.felt:
            raise RangeError(f"{place}.felt", f"'{entry.felt}', which is the heated chip too", "another chip", "a chip's own rise stands in its thermal section")
        if (entry.heated in number) != (entry.felt in number):
            raise RangeError(f"{place}.felt", f"heated = '{entry.heated}' beside felt = '{entry.felt}'", "both with a leg's letter, or both without",
                             "without letters the coupling holds inside every leg")
        legs = [""] if entry.heated in number else ["a-", "b-", "c-"]
        for leg in legs:
            from_name, to_name = (f"{name.split('-')[0]}-{leg}{name.split('-', 1)[1]}" for name in (entry.heated, entry.felt))
            way = number[from_name], number[to_name]
            if way in given:
                raise RangeError(place, f"heat from {from_name} to {to_name}, which coupling[{given[way] + 1}] gives already", "one entry for two chips",
                                 "remove one; names without a leg's letter hold in all three legs")
            back = given.get(way[::-1])
            if back is not None and (entry.r_k_per_w, entry.tau_s) != (module.coupling[back].r_k_per_w, module.coupling[back].tau_s):
                raise RangeError(place, f"other branches from {from_name} to {to_name} than coupling[{back + 1}] has for the way back", "the same both ways",
                                 "a watt in one chip warms the other as much as a watt there warms the first: enter the mean of both once")
            given[way] = k
            found.setdefault((min(way), max(way)), k)
    return found


def check_coupling(module) -> None:
    """Refuse couplings that no module can have, as far as the file alone tells.

    Where chips are given as layers their resistances are known to the thermal stage only, which checks then.

    Raises
    ------
    RangeError
        See :func:`coupled_chips` and :func:`check_mutual_resistances`; a mutual rise that is ever above the smaller own one;
        couplings beside a plate.
    """
    if module.coupling and module.plate is not None:
        raise RangeError("coupling", "couplings beside a section plate", "one of the two", "chips on a plate warm each other through it: remove the couplings")
    pairs, names = coupled_chips(module), module.chip_names()
    own = [pair.thermal for pair in module.chip_pairs() for _ in range(6)]
    if not any(thermal.layer for thermal in own):
        totals = {chips: sum(module.coupling[k].r_k_per_w) for chips, k in pairs.items()}
        check_mutual_resistances([sum(thermal.r_k_per_w) for thermal in own], totals, names, {chips: f"coupling[{k + 1}]" for chips, k in pairs.items()})
    for (i, j), k in pairs.items():
        if own[i].layer or own[j].layer:
            continue
        entry = module.coupling[k]
        time = np.geomspace(1e-2 * min(own[i].tau_s[0], own[j].tau_s[0], entry.tau_s[0]), 10.0 * entry.tau_s[-1], 400)
        least = np.minimum(*(_rise_k_per_w(own[chip].r_k_per_w, own[chip].tau_s, time) for chip in (i, j)))
        over = _rise_k_per_w(entry.r_k_per_w, entry.tau_s, time) > least * (1.0 + 1e-9)
        if over.any():
            raise RangeError(f"coupling[{k + 1}].tau_s", f"a mutual rise of {names[i]} and {names[j]} that is above the own rise of one of them {time[over][0]:.2g} s after switching on",
                             "a mutual rise below both own rises at all times", "no chip gets warmer from another's heat than that one itself: check time constants and their unit")


def check_mutual_resistances(self_k_per_w, mutual_k_per_w, names, places) -> None:
    """Refuse steady resistances that no body can have.

    Parameters
    ----------
    self_k_per_w : sequence of float, length n
        Own resistances to the reference point [K/W].
    mutual_k_per_w : dict
        (i, j) -> mutual resistance [K/W].
    names : sequence of str, length n
    places : dict
        (i, j) -> where it was given, for messages.

    Raises
    ------
    RangeError
        A mutual resistance above the smaller own one: the heated chip is always the warmest. A matrix that is not positive
        definite: heat would flow by itself from cold to warm.
    """
    matrix = np.diag(np.asarray(self_k_per_w, float))
    for (i, j), mutual in mutual_k_per_w.items():
        matrix[i, j] = matrix[j, i] = mutual
        if mutual > min(matrix[i, i], matrix[j, j]):
            raise RangeError(f"{places[i, j]}.r_k_per_w", f"a mutual resistance of {mutual:.4g} K/W between {names[i]} and {names[j]}, whose own are {matrix[i, i]:.4g} and {matrix[j, j]:.4g} K/W",
                             "at most the smaller of the two own ones", "no chip gets warmer from another's heat than that one itself: check the unit and the reference point")
    value, vector = np.linalg.eigh(matrix)
    if value[0] <= 1e-9 * value[-1]:
        involved = [name for name, share in zip(names, np.abs(vector[:, 0])) if share > 0.1 * np.abs(vector[:, 0]).max()]
        raise RangeError("coupling", f"mutual resistances of {', '.join(involved)} that together outweigh their own",
                         "a matrix of steady resistances that is positive definite", "each pair may pass by itself and all together not: heat would flow by itself from cold to warm; lower them")


def _rise_k_per_w(r_k_per_w, tau_s, time_s):
    return -np.expm1(-time_s[:, None] / np.asarray(tau_s)) @ np.asarray(r_k_per_w)
