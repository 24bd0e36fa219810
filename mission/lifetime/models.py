"""Lifetime models: cycles in, numbers of cycles to failure out.

Four forms share one call. Their numbers are data (``coefficients/*.toml``); a
user's own set is a file of the same form.
"""

from __future__ import annotations

import math
from functools import lru_cache
from pathlib import Path
from typing import Annotated, Any, Literal

import numpy as np
from pydantic import Field, model_validator

from ..checks import require_range
from ..errors import InputError, RangeError, near_match
from ..tomlfile import FileModel, parse_model, read_toml

BOLTZMANN_J_PER_K = 1.380649e-23
ELECTRONVOLT_J = 1.602176634e-19
ZERO_C_K = 273.15
_FOLDER = Path(__file__).with_name("coefficients")
_CYCLE_QUANTITIES = ("range_k", "mean_c", "min_c", "max_c", "heating_s")
_UNITS = {"range_k": "K", "mean_c": "degC", "min_c": "degC", "max_c": "degC", "heating_s": "s"}
#: The heating time of a swing caught as a step [s]; no form is asked for a shorter one.
_SHORTEST_S = 1e-6
#: Reference and reach [s] of the quoted extension N(t)/N(1.5 s) = (t/1.5)^-0.3.
_EXTENSION_S, _EXTENSION_FROM_S, _EXTENSION_TO_S = 1.5, 0.1, 60.0

_Number = Annotated[float, Field(strict=True)]
_Positive = Annotated[float, Field(strict=True, gt=0)]
_Negative = Annotated[float, Field(strict=True, lt=0)]


class SwingAndMean(FileModel):
    """N_f = a dT^exponent exp(activation / (k_B T_mean)), T_mean in kelvin."""

    a: _Positive
    exponent: _Negative
    activation_j: _Positive


class MultiParameter(FileModel):
    """N_f = k dT^beta1 exp(beta2/T) t_on^beta3 I^beta4 V^beta5 D^beta6, T in kelvin."""

    k: _Positive
    beta1: _Negative
    beta2_k: _Number
    beta3: _Number
    beta4: _Number
    beta5: _Number
    beta6: _Number


class Sintered(FileModel):
    """N_f = a dT^alpha ar^(beta1 dT + beta0) (c + t_on^gamma)/(c + 1) exp(activation/(k_B T_mean)) f_diode."""

    a: _Positive
    alpha: _Negative
    beta0: _Number
    beta1_per_k: _Number
    c: _Positive
    gamma: _Number
    activation_ev: _Positive
    diode_factor: _Positive


class PowerLaw(FileModel):
    """N_f = a dT^-n; both may be left to the options."""

    a: _Positive | None = None
    n: _Positive | None = None


class _SetBase(FileModel):
    format: Literal[1]
    name: str = Field(min_length=1)
    life_means: str = Field(min_length=1)
    source: str = Field(min_length=1)
    page_or_clause: str
    technology: str
    tested_range: dict[str, tuple[_Number, _Number]]

    @model_validator(mode="after")
    def _ranges(self):
        known = _CYCLE_QUANTITIES + _TESTED_OPTIONS.get(self.kind, ())
        for name, (low, high) in self.tested_range.items():
            if name not in known:
                raise RangeError("tested_range", f"a range for '{name}'", "ranges for " + ", ".join(known), near_match(name, known))
            if low >= high:
                raise RangeError("tested_range", f"{name} = [{low:g}, {high:g}]", "the lower value first")
        return self


class SwingAndMeanSet(_SetBase):
    """Coefficient file of that form."""

    kind: Literal["swing-and-mean"]
    coefficients: SwingAndMean


class MultiParameterSet(_SetBase):
    """Coefficient file of that form."""

    kind: Literal["multi-parameter"]
    coefficients: MultiParameter


class SinteredSet(_SetBase):
    """Coefficient file of that form."""

    kind: Literal["sintered"]
    coefficients: Sintered


class PowerLawSet(_SetBase):
    """Coefficient file of that form."""

    kind: Literal["power-law"]
    coefficients: PowerLaw


_ALLOWED_OPTIONS = {
    "swing-and-mean": (),
    "multi-parameter": ("temperature", "heating_outside", "current_per_foot_a", "diode_current_per_foot_a", "v_class", "wire_diameter_um"),
    "sintered": ("aspect_ratio",),
    "power-law": ("a", "n", "tested_range_k"),
}
#: Options that are numbers and may have a tested range of their own.
_TESTED_OPTIONS = {"multi-parameter": ("current_per_foot_a", "v_class", "wire_diameter_um"), "sintered": ("aspect_ratio",)}
_CHOICES = {"temperature": ("minimum", "maximum"), "heating_outside": ("clamp", "extrapolate", "power-0.3")}
#: What a user may leave out, with what is then taken.
_DEFAULT_OPTIONS = {"multi-parameter": {"temperature": "minimum", "heating_outside": "clamp"}}


#: What each rule does, as a result must say it.
_HEATING_WORDS = {
    "clamp": "heating time outside {low:g} to {high:g} s: held at the nearer end",
    "extrapolate": "heating time outside {low:g} to {high:g} s: the fitted exponent is used on",
    "power-0.3": "heating time: N(t)/N(1.5 s) = (t/1.5 s)^-0.3 from 0.1 to 60 s, also inside {low:g} to {high:g} s (often quoted; from memory)",
}


class CoefficientFile(FileModel):
    """Any coefficient file."""

    content: Annotated[SwingAndMeanSet | MultiParameterSet | SinteredSet | PowerLawSet, Field(discriminator="kind")]


@lru_cache
def shipped_sets() -> tuple[str, ...]:
    """Names of the coefficient sets that come with the package.

    Examples
    --------
    >>> "sintered-2013" in shipped_sets()
    True
    """
    return tuple(sorted(p.stem for p in _FOLDER.glob("*.toml")))


def load_set(name_or_path, folder=None):
    """Read a coefficient set: a shipped name, or a TOML file of the user's (a relative path counts from ``folder``)."""
    text = str(name_or_path)
    if text in shipped_sets():
        return _shipped_set(text)
    if text.endswith(".toml"):
        path = Path(text) if Path(text).is_absolute() or folder is None else Path(folder) / text
        return _read_set(path, str(path))
    names = shipped_sets()
    raise InputError("lifetime model", f"'{text}'", "one of " + ", ".join(names) + ", or the path of a .toml file",
                     near_match(text, names) or "choose one of them")


@lru_cache
def _shipped_set(name):
    return _read_set(_FOLDER / f"{name}.toml", f"{name}.toml")


def _read_set(path, label):
    try:
        return parse_model({"content": read_toml(path)}, CoefficientFile, label).content
    except InputError as err:
        # the reader sees the file's own fields, not our wrapper
        raise InputError(err.where.replace("field content.", "field ").replace("field content", "the file"), err.found, err.allowed, err.advice) from None


class LifetimeModel:
    """A coefficient set with its options, ready to be asked.

    Attributes
    ----------
    name, source, life_means : str
    options : dict
        Every option in force, defaults included.
    tested_range : dict
        Quantity -> (low, high).
    notes : tuple of str
        What a result that uses this model must repeat.
    """

    def __init__(self, content, options: dict[str, Any], where: str = "lifetime model"):
        self._set = content
        self.name, self.source, self.life_means, self.kind = content.name, content.source, content.life_means, content.kind
        self.tested_range = dict(content.tested_range)
        allowed = _ALLOWED_OPTIONS[self.kind] + ("outside_range",)
        for key in options:
            if key not in allowed:
                raise InputError(f"{where}, option {key}", f"the unknown option '{key}'", "one of " + ", ".join(allowed) + f" for {self.name}",
                                 near_match(key, allowed) or "remove it")
        self.outside_range = options.get("outside_range", "use")
        if self.outside_range not in ("use", "refuse"):
            raise InputError(f"{where}, option outside_range", f"value {self.outside_range!r}", "one of use, refuse",
                             near_match(str(self.outside_range), ("use", "refuse")))
        self.options = {**_DEFAULT_OPTIONS.get(self.kind, {}), **options}
        getattr(self, "_check_" + self.kind.replace("-", "_"))(where)
        self.fixed_outside, self._option_outside = (), {}
        for key, (low, high) in self.tested_range.items():
            if key in self.options:
                for_switch, for_diode = self.options[key], self.options.get(f"diode_{key}", self.options[key])
                self._option_outside[key] = (not low <= for_switch <= high, not low <= for_diode <= high)
                shown = {key: for_switch} if for_diode == for_switch else {key: for_switch, f"diode_{key}": for_diode}
                self.fixed_outside += tuple(f"{k} = {v:g} outside {low:g} to {high:g}" for k, v in shown.items() if not low <= v <= high)

    # what each form needs -------------------------------------------------
    def _number(self, where, key, *, low=0.0):
        value = self.options.get(key)
        if value is None:
            raise InputError(f"{where}, option {key}", "nothing", f"a number; {self.name} needs it", "add it to the options of the failure mode")
        if isinstance(value, bool) or not isinstance(value, (int, float)) or not math.isfinite(value) or value <= low:
            raise InputError(f"{where}, option {key}", f"value {value!r}", f"a number above {low:g}")
        return float(value)

    def _check_swing_and_mean(self, where):
        pass

    def _check_multi_parameter(self, where):
        for key in ("current_per_foot_a", "v_class", "wire_diameter_um"):
            self._number(where, key)
        if "diode_current_per_foot_a" in self.options:
            self._number(where, "diode_current_per_foot_a")
        for key, words in _CHOICES.items():
            if self.options[key] not in words:
                raise InputError(f"{where}, option {key}", f"value {self.options[key]!r}", "one of " + ", ".join(words), near_match(str(self.options[key]), words))

    def _check_sintered(self, where):
        self._number(where, "aspect_ratio")

    def _check_power_law(self, where):
        c = self._set.coefficients
        for key, value in (("a", c.a), ("n", c.n)):
            if value is not None:
                self.options.setdefault(key, value)
            self._number(where, key)
        span = self.options.get("tested_range_k")
        if span is not None:
            plain = isinstance(span, (list, tuple)) and all(isinstance(v, (int, float)) and not isinstance(v, bool) and math.isfinite(v) for v in span)
            if not plain or len(span) != 2 or not span[0] < span[1]:
                raise InputError(f"{where}, option tested_range_k", f"value {span!r}", "two numbers, the lower first")
            self.tested_range["range_k"] = (float(span[0]), float(span[1]))

    # the call ---------------------------------------------------------------
    def cycles_to_failure(self, range_k, mean_c, min_c, max_c, heating_s, *, diode=False):
        """Number of such cycles that the joint survives.

        Parameters
        ----------
        range_k, mean_c, min_c, max_c, heating_s : array_like, shape (n,)
            Swing [K], its mean and ends [degC], time from valley to peak [s].
        diode : array_like of bool
            Where the chip is a freewheeling diode (matters for ``sintered``).

        Returns
        -------
        n_f : ndarray, shape (n,)
            Infinite for a swing of zero; NaN where an input is NaN.
        outside : ndarray of bool, shape (n,)
            Where one of the quantities, or one of the fixed options, leaves the tested range (its ends belong to it).

        Raises
        ------
        RangeError
            A negative swing or time, a temperature below absolute zero; with
            ``outside_range = "refuse"``, the first cycle outside the tested range.
        """
        q, diode = self._quantities(range_k, mean_c, min_c, max_c, heating_s, diode)
        outside = np.zeros(q["range_k"].shape, bool)
        for mask in self._outside_by(q, diode).values():
            outside |= mask
        if self.outside_range == "refuse" and outside.any():
            k = int(np.flatnonzero(outside)[0])
            text = ", ".join(f"{n} {q[n].flat[k]:.4g}" for n in self.tested_range if n in q)
            raise RangeError(f"lifetime model {self.name}", self.fixed_outside[0] if self.fixed_outside else f"a cycle with {text}",
                             "only cycles inside " + self.tested_text(), "choose outside_range = \"use\" to extrapolate, or another model")
        with np.errstate(divide="ignore", over="ignore", invalid="ignore"):  # a swing of zero: log 0, then exp(inf)
            log_n = getattr(self, "_log_" + self.kind.replace("-", "_"))(q, diode)
            n_f = np.where(q["range_k"] == 0.0, np.inf, np.exp(log_n))
        return n_f, outside

    def outside_by(self, range_k, mean_c, min_c, max_c, heating_s, *, diode=False) -> dict[str, np.ndarray]:
        """Which cycles leave the tested range, apart for every quantity that has one.

        Parameters as in :meth:`cycles_to_failure`.

        Returns
        -------
        dict of str to ndarray of bool, shape (n,)
            In the order of ``tested_range``; options of the mode included.
        """
        return self._outside_by(*self._quantities(range_k, mean_c, min_c, max_c, heating_s, diode))

    @staticmethod
    def _quantities(range_k, mean_c, min_c, max_c, heating_s, diode):
        """The inputs, checked, as arrays of one shape."""
        low = {"range_k": 0.0, "heating_s": 0.0}
        given = dict(zip(_CYCLE_QUANTITIES, (range_k, mean_c, min_c, max_c, heating_s)))
        checked = [require_range(n, v, low=low.get(n, -ZERO_C_K), low_open=n not in low, unit=_UNITS[n], nan_ok=True) for n, v in given.items()]
        *arrays, diode = np.broadcast_arrays(*checked, np.asarray(diode, bool))
        return dict(zip(_CYCLE_QUANTITIES, arrays)), diode

    def _outside_by(self, q, diode):
        out = {}
        for name, (low, high) in self.tested_range.items():
            if name in q:
                out[name] = (q[name] < low) | (q[name] > high)
            else:
                for_switch, for_diode = self._option_outside[name]
                out[name] = np.where(diode, for_diode, for_switch)
        return out

    def tested_text(self) -> str:
        """The tested range in words."""
        return ", ".join(f"{n} {a:g} to {b:g}" for n, (a, b) in self.tested_range.items()) or "no range stated"

    def _log_swing_and_mean(self, q, diode):
        c = self._set.coefficients
        return math.log(c.a) + c.exponent * np.log(q["range_k"]) + c.activation_j / BOLTZMANN_J_PER_K / (q["mean_c"] + ZERO_C_K)

    def _heating_range(self):
        return self.tested_range.get("heating_s", (1.0, 15.0))

    def _log_multi_parameter(self, q, diode):
        c, o = self._set.coefficients, self.options
        t = q["min_c"] if o["temperature"] == "minimum" else q["max_c"]
        heat = q["heating_s"]
        if o["heating_outside"] == "clamp":
            log_heat = c.beta3 * np.log(np.clip(heat, *self._heating_range()))
        elif o["heating_outside"] == "extrapolate":
            log_heat = c.beta3 * np.log(np.maximum(heat, _SHORTEST_S))
        else:
            log_heat = c.beta3 * math.log(_EXTENSION_S) - 0.3 * np.log(np.clip(heat, _EXTENSION_FROM_S, _EXTENSION_TO_S) / _EXTENSION_S)
        current = np.where(diode, o.get("diode_current_per_foot_a", o["current_per_foot_a"]), o["current_per_foot_a"])
        fixed = (math.log(c.k) + c.beta4 * np.log(current) + c.beta5 * math.log(o["v_class"])
                 + c.beta6 * math.log(o["wire_diameter_um"]))
        return fixed + c.beta1 * np.log(q["range_k"]) + c.beta2_k / (t + ZERO_C_K) + log_heat

    def _log_sintered(self, q, diode):
        c, ar = self._set.coefficients, self.options["aspect_ratio"]
        heat = np.maximum(q["heating_s"], _SHORTEST_S)
        return (math.log(c.a) + c.alpha * np.log(q["range_k"]) + (c.beta1_per_k * q["range_k"] + c.beta0) * math.log(ar)
                + np.log((c.c + heat**c.gamma) / (c.c + 1.0)) + c.activation_ev * ELECTRONVOLT_J / BOLTZMANN_J_PER_K / (q["mean_c"] + ZERO_C_K)
                + np.where(diode, math.log(c.diode_factor), 0.0))

    def _log_power_law(self, q, diode):
        return math.log(self.options["a"]) - self.options["n"] * np.log(q["range_k"])

    @property
    def notes(self) -> tuple[str, ...]:
        """Remarks for the report."""
        out = list(self.fixed_outside)
        if self.kind == "multi-parameter":
            out.append(f"temperature term taken at the {self.options['temperature']} of the cycle (the literature has both; the maximum gives a shorter life)")
            low, high = self._heating_range()
            out.append(_HEATING_WORDS[self.options["heating_outside"]].format(low=low, high=high))
        if self.kind == "sintered" and "heating_s" in self.tested_range:
            out.append(f"heating times below {self.tested_range['heating_s'][0]:g} s follow the fitted formula on, which lengthens the life "
                       "of fast ripple beyond what was tested")
        return tuple(out)

    def never_refusing(self) -> LifetimeModel:
        """The same model with ``outside_range = "use"``."""
        return LifetimeModel(self._set, {**self.options, "outside_range": "use"})

    def alternatives(self) -> dict[str, LifetimeModel]:
        """The same model with each explicit choice made otherwise, by a phrase that names the choice.

        Choices are the options that the literature leaves open and, for a shipped set, the other
        shipped sets of the same form. Alternatives never refuse a cycle.
        """
        other, options = {}, {**self.options, "outside_range": "use"}
        if self.kind == "multi-parameter":
            for key, words in _CHOICES.items():
                for word in words:
                    if word != self.options[key]:
                        other[f"{key} = {word}"] = LifetimeModel(self._set, {**options, key: word})
        shipped = [load_set(name) for name in shipped_sets()]
        if self._set in shipped:
            for content in shipped:
                if content.kind == self.kind and content.name != self.name:
                    other[f"set = {content.name}"] = LifetimeModel(content, options)
        return other


def load_model(name_or_path, options: dict[str, Any] | None = None, *, folder=None, where: str = "lifetime model") -> LifetimeModel:
    """A lifetime model by the name of a shipped set or the path of a user's file.

    Parameters
    ----------
    name_or_path : str
    options : dict, optional
        What the form needs beyond its coefficients.
    folder : path-like, optional
        A relative path counts from here.
    where : str
        Start of error messages.

    Examples
    --------
    >>> model = load_model("lesit-1997-refit")
    >>> n_f, outside = model.cycles_to_failure(50.0, 80.0, 55.0, 105.0, 2.0)
    >>> round(float(n_f)), bool(outside)
    (536710, False)
    """
    try:
        content = load_set(name_or_path, folder)
    except InputError as err:
        raise (err.at(where) if err.where == "lifetime model" else err) from None
    return LifetimeModel(content, dict(options or {}), where)
