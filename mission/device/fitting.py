"""Foster branches fitted to a thermal impedance curve.

A data sheet draws the temperature rise of the junction per watt after a step
of power. As a sum of branches, Z(t) = sum r (1 - exp(-t/tau)), it can be
marched and joined to a sink.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..checks import require_range
from ..errors import InputError

#: A fit counts as good within this share of the curve, at every point.
GOOD = 0.01
#: Numbers of branches tried in turn; those beyond the sixth only where six leave more than GOOD.
FEWEST, USUAL_MOST, MOST = 3, 6, 8
#: So much below an earlier point a single point is a slip, and the median of five a falling curve; less is noise.
_FALL_ONE, _FALL = 0.10, 0.03
#: No network rises faster than in proportion to time; so much more is noise.
_STEEPER = 1.15
#: Points the fit looks at; more of them are averaged in classes of even width in log time.
_POINTS = 400
#: Slowest branch looked for, over the last time of the curve.
_SLOWEST = 3.0


@dataclass(frozen=True)
class FosterFit:
    """A Foster network and how well it meets its curve.

    Attributes
    ----------
    r_k_per_w, tau_s : tuple of float
        Branches from fast to slow [K/W], [s].
    residual_relative : float
        Largest |network - curve| / curve over all points with t > 0.
    residual_at_s : float
        Where that is [s].
    rms : float
        Root mean square of the relative residuals.
    n_branches : int
    message : str
        One sentence that says all this, and what stands out.
    """

    r_k_per_w: tuple[float, ...]
    tau_s: tuple[float, ...]
    residual_relative: float
    residual_at_s: float
    rms: float
    n_branches: int
    message: str

    @property
    def r_total_k_per_w(self) -> float:
        """Sum of the branches, the thermal resistance at rest [K/W]."""
        return float(sum(self.r_k_per_w))

    def z_th_k_per_w(self, time_s):
        """Thermal impedance of the network.

        Parameters
        ----------
        time_s : array_like
            Time since the step [s], >= 0.

        Returns
        -------
        ndarray
            [K/W], in the shape of ``time_s``.
        """
        return foster_z_th_k_per_w(time_s, self.r_k_per_w, self.tau_s)


def foster_z_th_k_per_w(time_s, r_k_per_w, tau_s):
    """Thermal impedance of Foster branches, sum r (1 - exp(-t/tau)).

    Parameters
    ----------
    time_s : array_like
        Time since the step of power [s], >= 0.
    r_k_per_w, tau_s : array_like, shape (m,)
        Branches [K/W], [s].

    Returns
    -------
    ndarray
        [K/W], in the shape of ``time_s``.

    Raises
    ------
    RangeError
        A negative or infinite time.

    Examples
    --------
    >>> float(foster_z_th_k_per_w(1e9, [0.01, 0.1], [1e-3, 0.2]).round(6))
    0.11
    """
    t = require_range("time_s", time_s, low=0.0, unit="s")
    return -np.expm1(-t[..., None] / np.asarray(tau_s, float)) @ np.asarray(r_k_per_w, float)


def fit_foster(time_s, z_th_k_per_w, *, branches=None, good=GOOD, smallest_ratio=1.5, where="z_th curve") -> FosterFit:
    """Fit Foster branches to the step response of a chip.

    The sum of squared relative residuals is made small, every stretch of log time counting
    alike however densely it was digitised. Resistances are never negative. Of 3, 4, 5 and 6
    branches the fewest that keep every point within ``good`` are taken; where six do not,
    seven and eight are tried. Where none does, the points are noisier than ``good`` or no
    network made them: then the fewest branches are taken that are as good as any.

    Parameters
    ----------
    time_s : array_like, shape (n,)
        Time since the step of power [s], rising. A point at t = 0 is left out.
    z_th_k_per_w : array_like, shape (n,)
        Temperature rise per watt [K/W].
    branches : int, optional
        Number of branches, 1 to 8, instead of the search. Branches that turn out empty are left out.
    good : float
        Relative residual that is good enough.
    smallest_ratio : float
        Neighbouring time constants are at least this far apart.
    where : str
        Name of the curve for messages.

    Returns
    -------
    FosterFit

    Raises
    ------
    InputError
        Too few points, times that do not rise, values not above zero, or a curve that is no
        step response: it falls, hardly rises, starts on a level, or rises faster than in
        proportion to time.
    RangeError
        NaN or infinity, ``branches`` or ``smallest_ratio`` out of range.

    Examples
    --------
    >>> t = np.geomspace(1e-5, 10, 60)
    >>> fit = fit_foster(t, foster_z_th_k_per_w(t, [0.01, 0.04, 0.06], [1e-3, 2e-2, 3e-1]))
    >>> [round(r, 4) for r in fit.r_k_per_w], [round(x, 4) for x in fit.tau_s]
    ([0.01, 0.04, 0.06], [0.001, 0.02, 0.3])
    """
    t, z = _checked(time_s, z_th_k_per_w, where)
    require_range("good", good, low=0.0, high=1.0, low_open=True)
    require_range("smallest_ratio", smallest_ratio, low=1.0, low_open=True, high=10.0)
    if branches is not None and (isinstance(branches, bool) or branches not in range(1, MOST + 1)):
        raise InputError("branches", f"value {branches!r}", f"a whole number, 1 to {MOST}", "three to six are usual")
    numbers = (int(branches),) if branches is not None else tuple(range(FEWEST, MOST + 1))
    at, of, weight = _classes(t, z)
    spectrum = _spectrum(at, of, weight)
    # no more unknowns than points
    numbers = [n for n in numbers if 2 * n <= t.size] or [max(1, t.size // 2)]
    tried: list[tuple] = []
    for n in numbers:
        r, tau = _fit(at, of, weight, n, spectrum, smallest_ratio, good)
        r, tau = _rounded(r), _rounded(tau)
        relative = np.abs(foster_z_th_k_per_w(t, r, tau) / z - 1.0)
        k = int(np.argmax(relative))
        # as the fit sees it: far points count by their distance, not by its square
        scatter = float(np.sqrt(np.mean(2.0 * (2.0 * good) ** 2 * (np.sqrt(1.0 + (relative / (2.0 * good)) ** 2) - 1.0))))
        tried.append((r, tau, float(relative[k]), float(t[k]), float(np.sqrt(np.mean(relative**2))), scatter))
        if relative[k] <= good:
            break
    chosen = tried[-1]
    if chosen[2] > good:
        # more branches that do not help only follow the noise
        best = min(x[5] for x in tried)
        chosen = next(x for x in tried if x[5] <= 1.1 * best)
    r, tau, largest, at_s, rms, _ = chosen
    message = _words(t, z, r, tau, largest, at_s, rms, good, branches)
    return FosterFit(tuple(r.tolist()), tuple(tau.tolist()), largest, at_s, rms, len(r), message)


def _checked(time_s, z_th_k_per_w, where):
    t = require_range("time_s", time_s, low=0.0, unit="s")
    z = require_range("z_th_k_per_w", z_th_k_per_w, unit="K/W")
    if t.ndim != 1 or z.shape != t.shape:
        raise InputError(
            where, f"time_s of shape {t.shape} and z_th_k_per_w of shape {z.shape}", "two lists of one length", "give one value for every time"
        )
    step = "the answer to a step of power: it rises from nothing, ever more slowly, to the thermal resistance"
    if t.size and t[0] == 0.0:
        if abs(z[0]) > 0.02 * np.max(np.abs(z)):
            raise InputError(where, f"{z[0]:g} K/W at 0 s", step, "leave the point out, or subtract the offset of the drawing")
        t, z = t[1:], z[1:]
    if t.size < 4:
        raise InputError(
            where,
            f"{t.size} point{'' if t.size == 1 else 's'} after 0 s",
            "at least 4 points",
            "digitise more of the curve; three for each decade of time are good",
        )
    not_rising = np.flatnonzero(np.diff(t) <= 0.0)
    if not_rising.size:
        k = int(not_rising[0]) + 1
        raise InputError(f"{where}, point {k + 1}", f"{t[k]:g} s after {t[k - 1]:g} s", "times that rise", "sort the points and remove doubles")
    if (z <= 0.0).any():
        k = int(np.flatnonzero(z <= 0.0)[0])
        raise InputError(f"{where}, point {k + 1}", f"{z[k]:g} K/W at {t[k]:g} s", "values above 0 K/W", "correct the point, or leave it out")
    for smooth, limit in ((z, _FALL_ONE), (_median_of_five(z), _FALL)):
        top = np.maximum.accumulate(smooth)
        drop = 1.0 - smooth / top
        if drop.max() <= limit:
            continue
        k = int(np.argmax(drop))
        raise InputError(
            f"{where}, point {k + 1}",
            f"a curve that falls from {top[k]:g} to {smooth[k]:g} K/W at {t[k]:g} s",
            step,
            "check the point; a curve for repeated pulses or for cooling down is not the one",
        )
    if z[-1] < 1.3 * z[0]:
        raise InputError(
            where, f"a curve that hardly rises, from {z[0]:g} to {z[-1]:g} K/W", step, "digitise the curve of the single pulse from its beginning"
        )
    reach = t <= 10.0 * t[0]
    start = np.max(z[reach])
    if z[0] > 0.05 * z[-1] and reach.sum() > 1 and t[reach][-1] > 5.0 * t[0] and start < 1.04 * z[0]:
        raise InputError(
            where,
            f"a curve that starts on a level ({z[0]:g} K/W at {t[0]:g} s, {start:g} K/W ten times later)",
            step,
            "curves for repeated pulses start so: take the one of the single pulse (duty zero)",
        )
    # Z/t falls in every network of one heated point; a curve that is steeper is not the response at the place of the heat
    slope = z / t
    least = np.minimum.accumulate(slope)
    if (slope > _STEEPER * least).any():
        k = int(np.argmax(slope / least))
        j = int(np.argmin(slope[: k + 1]))
        raise InputError(
            f"{where}, point {k + 1}",
            f"a rise from {z[j]:g} K/W at {t[j]:g} s to {z[k]:g} K/W at {t[k]:g} s, faster than in proportion to time",
            step,
            "check the points and the unit of the time; a curve of a neighbour that warms up later has no Foster branches of this kind",
        )
    return t, z


def _median_of_five(z):
    padded = np.pad(z, 2, mode="reflect")
    return np.median(np.lib.stride_tricks.sliding_window_view(padded, 5), axis=1)


def _rounded(values):
    """Five significant digits: what is written is what was judged."""
    return np.array([float(f"{v:.5g}") for v in values])


def _classes(t, z):
    """Times, values and weights that the fit looks at."""
    log_t = np.log(t)
    if t.size > _POINTS:
        edges = np.linspace(log_t[0], log_t[-1], _POINTS + 1)
        which = np.clip(np.searchsorted(edges, log_t, side="right") - 1, 0, _POINTS - 1)
        count = np.bincount(which, minlength=_POINTS)
        full = count > 0
        t, z = (np.exp(np.bincount(which, np.log(x), _POINTS)[full] / count[full]) for x in (t, z))
        log_t = np.log(t)
    # the stretch of log time that a point stands for, none less than a tenth of the mean: close points are not worthless
    width = np.gradient(log_t)
    width = np.clip(width, 0.1 * width.mean(), 4.0 * width.mean())
    return t, z, np.sqrt(width / width.mean())


def _basis(t, tau):
    return -np.expm1(-t[:, None] / tau[None, :])


def _spectrum(t, z, weight):
    """Resistances on a dense grid of time constants, the non-negative least squares of all of them."""
    from scipy.optimize import nnls

    tau = np.geomspace(t[0] / 5.0, _SLOWEST * t[-1], max(24, int(12 * np.log10(15.0 * t[-1] / t[0]))))
    a = _basis(t, tau) * (weight / z)[:, None]
    r, _ = nnls(a, weight, maxiter=50 * tau.size)
    return tau, r


def _starts(spectrum, n, t, ratio):
    """Sets of time constants to start from: even steps, equal shares and the strongest lines of the spectrum."""
    tau, r = spectrum
    yield np.geomspace(1.5 * t[0], 0.5 * t[-1], n) if n > 1 else np.array([np.sqrt(t[0] * t[-1])])
    held = r > 1e-6 * r.sum()
    lines, size = np.log(tau[held]), np.log1p(r[held] / r.sum() * 1e3)
    # neighbours of the grid are one line
    groups = np.split(np.arange(lines.size), np.flatnonzero(np.diff(lines) > 0.35) + 1)
    centres = np.array([np.average(lines[g], weights=r[held][g]) for g in groups])
    sizes = np.array([size[g].sum() for g in groups])
    while centres.size > n:
        # the closest pair becomes one
        k = int(np.argmin(np.diff(centres)))
        merged = np.average(centres[k : k + 2], weights=sizes[k : k + 2])
        centres = np.concatenate([centres[:k], [merged], centres[k + 2 :]])
        sizes = np.concatenate([sizes[:k], [sizes[k : k + 2].sum()], sizes[k + 2 :]])
    while centres.size < n:
        ends = np.concatenate([[np.log(t[0])], centres, [np.log(t[-1])]])
        k = int(np.argmax(np.diff(ends)))
        centres = np.insert(centres, k, 0.5 * (ends[k] + ends[k + 1]))
    yield np.exp(np.sort(centres))
    even = np.geomspace(1.5 * t[0], 0.5 * t[-1], n) if n > 1 else np.array([t[-1]])
    yield even**0.5 * np.exp(np.sort(centres)) ** 0.5


def _fit(t, z, weight, n, spectrum, ratio, good):
    """Best branches of all starts; where they nearly keep ``good``, once more for the largest residual."""
    from scipy.optimize import least_squares, nnls

    low, high = np.log(t[0] / 10.0), np.log(_SLOWEST * t[-1])
    gap = np.log(ratio)
    if (n - 1) * gap >= 0.98 * (high - low):
        n = max(1, int(0.9 * (high - low) / gap))
    top = np.log(10.0 * z[-1])

    def unpack(p):
        return np.exp(p[:n]), np.exp(np.cumsum(p[n:]))

    # unknowns: log r, log of the first time constant, logs of the ratios from branch to branch
    lower = np.concatenate([np.full(n, np.log(1e-7 * z[-1])), [low], np.full(n - 1, gap)])
    upper = np.concatenate([np.full(n, top), [high], np.full(n - 1, high - low)])

    def residual(p, power=1):
        r, tau = unpack(p)
        e = _basis(t, tau) @ r / z - 1.0
        return weight * e if power == 1 else np.sign(e) * np.abs(e / good) ** power

    def jacobian(p, power=1):
        r, tau = unpack(p)
        b = _basis(t, tau)
        x = t[:, None] / tau[None, :]
        d_tau = -(np.exp(-x) * x * r) / z[:, None]  # by the log of each time constant
        d_step = np.cumsum(d_tau[:, ::-1], axis=1)[:, ::-1]  # a step moves all slower branches too
        out = np.concatenate([b * r / z[:, None], d_step], axis=1)
        if power == 1:
            return weight[:, None] * out
        e = b @ r / z - 1.0
        return (power * np.abs(e / good) ** (power - 1) / good)[:, None] * out

    best, best_cost = None, np.inf
    for start in _starts(spectrum, n, t, ratio):
        log_tau = np.clip(np.log(start), low, high - 1e-6)
        steps = np.maximum(np.diff(log_tau), gap * 1.01)
        first = min(log_tau[0], high - steps.sum() - 1e-6)
        tau = np.exp(np.cumsum(np.concatenate([[max(first, low + 1e-9)], steps])))
        r, _ = nnls(_basis(t, tau) * (weight / z)[:, None], weight)
        p = np.concatenate([np.log(np.maximum(r, 1e-3 * z[-1])), [np.log(tau[0])], np.diff(np.log(tau))])
        p = np.clip(p, lower + 1e-9, upper - 1e-9)
        # far points pull less than in plain least squares: one slip of the hand shall not bend the rest
        found = least_squares(
            residual,
            p,
            jacobian,
            bounds=(lower, upper),
            loss="soft_l1",
            f_scale=2.0 * good,
            x_scale=1.0,
            max_nfev=300,
            xtol=1e-12,
            ftol=1e-12,
            gtol=1e-12,
        )
        if found.cost < best_cost:
            best, best_cost = found.x, found.cost
    largest = np.abs(residual(best) / weight).max()
    if good < largest < 2.5 * good:
        sharper = least_squares(
            residual, np.clip(best, lower + 1e-12, upper - 1e-12), jacobian, bounds=(lower, upper), args=(3,), kwargs={}, max_nfev=200
        )
        if np.abs(residual(sharper.x) / weight).max() <= good:
            best = sharper.x
    r, tau = unpack(best)
    # an empty branch is none; nor is one beyond the slowest looked for
    held = (r > 1e-5 * z[-1]) & (tau <= 1.0001 * _SLOWEST * t[-1])
    return r[held], tau[held]


def _words(t, z, r, tau, largest, at_s, rms, good, branches) -> str:
    number = f"{len(r)} branch meets" if len(r) == 1 else f"{len(r)} branches meet"
    text = f"{number} {t.size} points from {t[0]:.3g} to {t[-1]:.3g} s within {_percent(largest)} (largest, at {at_s:.3g} s; rms {_percent(rms)})"
    if largest > good and branches is None:
        text += f"; that is more than {_percent(good)}, and more branches do no better: "
        text += "the points scatter, or they are not the answer at the place of the heat"
    elif largest > good:
        text += f"; that is more than {_percent(good)} with the number of branches asked for"
    elif len(r) > USUAL_MOST:
        text += f"; {USUAL_MOST} branches left more than {_percent(good)}"
    if branches is not None and len(r) < branches:
        text += f"; {branches} were asked for, the others came out empty"
    total = float(r.sum())
    if total > 1.02 * z[-1]:
        text += f"; the curve still rises at its end: of {total:.4g} K/W in all the last point shows {z[-1]:.4g} K/W, the rest is the fit's"
    unseen = float(r[tau < 0.5 * t[0]].sum())
    if unseen > 0.02 * total:
        text += (
            f"; {unseen:.3g} K/W of it have risen before the first point: digitise earlier, and make sure that it is the curve of the single pulse"
        )
    return text


def _percent(share) -> str:
    return f"{100.0 * share:.2g} %"
