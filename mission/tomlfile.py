"""Reading TOML files into checked, frozen models.

One door for every TOML file of the project: studies, modules, materials,
lifetime coefficients. What the file gets wrong comes back as ``InputError``
with the file, the field, the value found and what is allowed.
"""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Any, Literal, TypeVar, get_origin

from pydantic import BaseModel, ConfigDict, ValidationError
from pydantic_core import to_json

from .errors import InputError, near_match

M = TypeVar("M", bound=BaseModel)


class FileModel(BaseModel):
    """Base of everything that is read from a file: no unknown keys, no inf, no NaN, no change afterwards."""

    model_config = ConfigDict(extra="forbid", frozen=True, allow_inf_nan=False, strict=False)


def read_toml(path) -> dict[str, Any]:
    """Read a TOML file; encoding and syntax errors name the file and line."""
    path = Path(path)
    try:
        raw = path.read_bytes()
    except FileNotFoundError:
        folder = path.parent if str(path.parent) else Path(".")
        there = [p.name for p in folder.glob("*.toml")] if folder.is_dir() else []
        hint = near_match(path.name, there) or "check the name and the folder (paths in a study count from the study file)"
        raise InputError(str(path), "no such file", "a TOML file that can be read", hint) from None
    except IsADirectoryError:
        raise InputError(str(path), "a folder", "a TOML file", "name the file in it") from None
    except OSError as err:
        raise InputError(str(path), f"a file that cannot be read ({err.strerror})", "a TOML file that can be read") from None
    except ValueError:  # a zero byte in the path
        raise InputError(repr(str(path)), "a path that no file can have", "a TOML file that can be read") from None
    if not raw.strip():
        raise InputError(str(path), "an empty file", "a TOML file with at least one section", "start from a demo file in profiles/")
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as err:
        line = raw[: err.start].count(b"\n") + 1
        raise InputError(f"{path}, line {line}", f"byte 0x{raw[err.start]:02x}, which is not UTF-8", "UTF-8 text", "save the file as UTF-8") from None
    try:
        return tomllib.loads(text)
    except ValueError as err:  # TOMLDecodeError, or a number with more digits than Python reads
        raise InputError(str(path), f"text that is not TOML ({err})", "valid TOML", "correct the line named; strings need quotes, decimals a point") from None
    except RecursionError:
        raise InputError(str(path), "brackets nested beyond measure", "valid TOML", "check the brackets") from None


def read_model(path, model: type[M]) -> M:
    """Read a TOML file into ``model``; see :func:`parse_model`."""
    return parse_model(read_toml(path), model, str(path))


def parse_model(data: dict[str, Any], model: type[M], where: str) -> M:
    """Check a plain dict against ``model``.

    Numbers must be numbers: a quoted one, or true for 1, is refused.

    Raises
    ------
    InputError
        For the first problem; the count of further ones is added.
    """
    try:
        # strict by way of JSON: no number from text, yet lists for tuples and words for enums
        return model.model_validate_json(to_json(data, inf_nan_mode="constants", fallback=_plain), strict=True)
    except ValidationError as err:
        raise _translate(err, model, data, where) from None


def _plain(value):
    """What a dict from Python may hold beyond TOML: NumPy numbers and arrays; anything else as its text."""
    return value.tolist() if hasattr(value, "tolist") else str(value)


def _translate(err: ValidationError, model, data, where: str) -> InputError:
    problems = err.errors(include_url=False)
    # An unknown key is the likeliest cause of a missing one: report it first.
    problems.sort(key=lambda p: 0 if p["type"] == "extra_forbidden" else 1)
    first = problems[0]
    field = _field_name(first, data)
    place = f"{where}, field {field}" if field else where
    found, allowed, advice = _wording(first, model, data)
    if len(problems) > 1:
        more = f"{len(problems) - 1} more problem{'s' if len(problems) > 2 else ''} in this file"
        advice = f"{advice} ({more})" if advice else f"correct the field ({more})"
    return InputError(place, found, allowed, advice)


def _field_name(problem, data) -> str:
    """The field as the file spells it: tags of unions, which pydantic puts in between, are no part of it."""
    loc, ctx = problem["loc"], problem.get("ctx", {})
    out, here = "", data
    for number, part in enumerate(loc):
        if isinstance(part, int):
            out += f"[{part + 1}]"
            here = here[part] if isinstance(here, (list, tuple)) and part < len(here) else None
        elif (isinstance(here, dict) and part in here) or (number == len(loc) - 1 and problem["type"] == "missing"):
            out = _joined(out, part)
            here = here.get(part) if isinstance(here, dict) else None
    if problem["type"] in ("union_tag_invalid", "union_tag_not_found"):
        out = _joined(out, str(ctx.get("discriminator", "")).strip("'"))
    cause = ctx.get("error")
    if isinstance(cause, InputError) and cause.where and (not loc or cause.where != loc[-1]):
        out = _joined(out, cause.where)
    return out


def _joined(path, part) -> str:
    return f"{path}.{part}" if path and part else path or part


def _wording(problem, model, data) -> tuple[str, str, str]:
    kind, ctx, value = problem["type"], problem.get("ctx", {}), problem.get("input")
    shown = _short(value)
    if kind == "extra_forbidden":
        key = problem["loc"][-1]
        names, elsewhere = _known_keys(model, problem["loc"])
        allowed = "one of " + ", ".join(sorted(names)) if names else "only the documented keys"
        if key in elsewhere:
            return f"the key '{key}', which belongs to {elsewhere[key]}", allowed, "remove it, or choose the other kind"
        return f"the unknown key '{key}'", allowed, near_match(key, names) or "remove it"
    if kind == "missing":
        return "nothing", "this key is required", "add it"
    if kind in ("greater_than", "greater_than_equal", "less_than", "less_than_equal"):
        sign = {"greater_than": "above", "greater_than_equal": "at least", "less_than": "below", "less_than_equal": "at most"}[kind]
        limit = next(iter(ctx.values()))
        return shown, f"a number {sign} {limit:g}" if isinstance(limit, (int, float)) else f"{sign} {limit}", "correct the value or its unit"
    if kind == "finite_number":
        return shown, "a finite number", "correct the value"
    if kind in ("int_type", "int_from_float") and isinstance(value, float):
        return shown, "a whole number", "write it without a decimal point"
    if kind in ("float_type", "float_parsing", "int_type", "int_parsing", "int_from_float"):
        return shown, "a whole number" if kind.startswith("int") else "a number", "write it without quotes or unit; the unit is in the key's name"
    if kind in ("literal_error", "enum"):
        allowed = ctx.get("expected", "").replace(" or ", ", ")
        names = [w.strip().strip("'") for w in allowed.split(",")]
        return shown, "one of " + ", ".join(names), near_match(value, names) if isinstance(value, str) else ""
    if kind in ("union_tag_invalid",):
        names = [w.strip().strip("'") for w in str(ctx.get("expected_tags", "")).split(",")]
        return f"'{ctx.get('tag')}'", "one of " + ", ".join(names), near_match(str(ctx.get("tag")), names)
    if kind == "union_tag_not_found":
        return "nothing", f"the key {ctx.get('discriminator')} is required", "add it"
    if kind == "value_error":
        cause = ctx.get("error")
        if isinstance(cause, InputError):
            return cause.found, cause.allowed, cause.advice
        return shown, str(cause or problem["msg"]), ""
    if kind == "string_type":
        return shown, "a text in quotes", ""
    if kind == "string_too_short":
        return "an empty text" if value == "" else shown, f"at least {ctx.get('min_length', 1)} character", ""
    if kind == "string_too_long":
        return shown, f"at most {ctx.get('max_length')} character{'s' if ctx.get('max_length') != 1 else ''}", ""
    if kind in ("too_short", "too_long"):
        return shown, problem["msg"][0].lower() + problem["msg"][1:], ""
    if kind in ("model_type", "model_attributes_type", "dict_type"):
        return shown, "a section with keys", "write it as a TOML table"
    if kind in ("list_type", "tuple_type"):
        return shown, "a list in square brackets", ""
    if kind == "bool_type" or kind == "bool_parsing":
        return shown, "true or false", ""
    return shown, problem["msg"], ""


def _short(value) -> str:
    if isinstance(value, dict):
        return "a section"
    text = repr(value)
    return f"value {text if len(text) <= 60 else text[:57] + '...'}"


def _known_keys(model, loc) -> tuple[set[str], dict[str, str]]:
    """Names allowed beside the unknown key, and names of the other kinds of the same section.

    Walks the models along the place of the problem. A tag in it, which pydantic adds where
    a section may be of several kinds, picks the kind.
    """
    current, others = {model}, set()
    for part in loc[:-1]:
        if isinstance(part, int):
            continue
        following = set()
        for m in current:
            following |= _children(m, part)
        if following:
            current, others = following, set()
        else:
            tagged = {m for m in current if _tag(m, part)} or {m for m in current if not _tag(m)}  # some kinds have no word
            if tagged:
                current, others = tagged, current - tagged
    names: set[str] = set()
    for m in current:
        names |= _names(m)
    elsewhere = {n: " or ".join(sorted(_tag(m) for m in others if n in _names(m))) for n in set().union(*map(_names, others)) - names}
    return names, elsewhere


def _names(model) -> set[str]:
    return {f.alias or n for n, f in model.model_fields.items()}


def _children(model, part) -> set:
    out = set()
    for name, field in model.model_fields.items():
        if part in (name, field.alias):
            out |= _models_in(field.annotation)
    return out


def _models_in(annotation) -> set:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return {annotation}
    out = set()
    for arg in getattr(annotation, "__args__", ()):
        out |= _models_in(arg)
    return out


def _tag(model, value=None) -> str:
    """The field and word that tell this kind of section from others, e.g. ``kind = 'fixed'``; empty if there is none or not ``value``."""
    for name, field in model.model_fields.items():
        words = getattr(field.annotation, "__args__", ()) if get_origin(field.annotation) is Literal else ()
        # a field that every section of the kind fills with the one word
        if field.is_required() and len(words) == 1 and value in (None, words[0]):
            return f"{name} = '{words[0]}'"
    return ""
