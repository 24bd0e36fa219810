"""Module files: finding, reading, writing."""

from __future__ import annotations

import json
import os
import re
from pathlib import Path
from typing import Any

from ..errors import InputError, near_match
from ..tomlfile import parse_model, read_model
from .module import PowerModule

_SHIPPED = Path(__file__).parent / "modules"


def shipped_modules() -> tuple[str, ...]:
    """Names of the modules that come with the package.

    Examples
    --------
    >>> shipped_modules()  # doctest: +ELLIPSIS
    ('avocet-300', ..., 'heron-300', ...)
    """
    return tuple(sorted(p.stem for p in _SHIPPED.glob("*.toml")))


def load_module(name_or_path, folder=None) -> PowerModule:
    """Load a shipped module by name, or any module file by path.

    Parameters
    ----------
    name_or_path : str or path
        A name without ending is a shipped module, or else ``name.toml`` in
        ``folder``. Anything that ends in ``.toml`` or has a folder in it is a path.
    folder : str or path, optional
        Where relative paths start, e.g. the folder of the study; default the
        current folder.

    Returns
    -------
    PowerModule

    Raises
    ------
    InputError
        No such module (with the nearest name), a name that is both shipped and
        a file in ``folder``, or the first thing that is wrong in the file.

    Examples
    --------
    >>> load_module("heron-300").ratings.v_ces_v
    1200.0
    >>> load_module("heron300")  # doctest: +ELLIPSIS
    Traceback (most recent call last):
    ...
    mission.errors.InputError: module 'heron300': found no such module; ... did you mean 'heron-300'?
    """
    text = str(name_or_path)
    base = Path(folder) if folder is not None else Path(".")
    if text.lower().endswith(".toml") or Path(text).name != text:
        return read_model(base / text, PowerModule)
    own = base / f"{text}.toml"
    shipped = text in shipped_modules()
    if shipped and own.is_file():
        raise InputError(
            f"module '{text}'",
            f"a shipped module and the file {own}",
            "a name that means one thing",
            f"write '{text}.toml' for the file, or rename it",
        )
    if shipped:
        return read_model(_SHIPPED / f"{text}.toml", PowerModule)
    if text and own.is_file():
        return read_model(own, PowerModule)
    there = [p.stem for p in base.glob("*.toml")] if base.is_dir() else []
    raise InputError(
        f"module '{text}'",
        "no such module",
        ", ".join(shipped_modules()) + ", or the path of a .toml file",
        near_match(text, [*shipped_modules(), *there]) or "check the name; a path ends in .toml",
    )


def module_from_dict(data: dict[str, Any], where: str = "module data") -> PowerModule:
    """Check a plain dict laid out like a module file.

    Raises
    ------
    InputError
        The first problem, with ``where`` and the field in front.
    """
    return parse_model(data, PowerModule, where)


def to_toml(module: PowerModule) -> str:
    """Write a module as the text of a module file; reading it gives an equal module.

    Comments of an original file are not kept.
    """
    return "\n".join(_table(_without_empty(module.model_dump(mode="python", exclude_none=True)), ())).lstrip("\n") + "\n"


def _without_empty(data):
    """Without empty lists of what may be left out: lines beside points, points beside lines, couplings, failure modes."""
    if isinstance(data, dict):
        return {k: _without_empty(v) for k, v in data.items() if not (k in ("line", "curve", "coupling", "failure_mode") and not v)}
    return [_without_empty(v) for v in data] if isinstance(data, (list, tuple)) and data and isinstance(data[0], dict) else data


def save_module(module: PowerModule, path) -> None:
    """Write a module file, whole or not at all."""
    path = Path(path)
    part = path.with_name(path.name + ".part")
    try:
        part.write_text(to_toml(module), encoding="utf-8", newline="\n")
        os.replace(part, path)
    except OSError as err:
        raise InputError(
            str(path),
            f"a file that cannot be written ({err.strerror})",
            "a path in an existing folder with write access",
        ) from None


def _table(data: dict, path: tuple[str, ...]) -> list[str]:
    """Plain keys first: in TOML a key after a section header belongs to that section."""
    lines = [f"{_key(k)} = {_value(v)}" for k, v in data.items() if not _is_section(k, v)]
    for k, v in data.items():
        if not _is_section(k, v):
            continue
        name = ".".join(_key(part) for part in (*path, k))
        if isinstance(v, dict):
            body = _table(v, (*path, k))
            if body and not body[0].startswith("[") and body[0]:
                lines += ["", f"[{name}]"]
            lines += body
        else:
            for item in v:
                lines += ["", f"[[{name}]]", *_table(item, (*path, k))]
    return lines


def _is_section(key, value) -> bool:
    if isinstance(value, dict):
        return key != "options"  # options stand on one line beside their failure mode
    return isinstance(value, (list, tuple)) and len(value) > 0 and isinstance(value[0], dict)


def _value(value) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, (int, float)):
        return repr(value)
    if isinstance(value, str):
        return json.dumps(value, ensure_ascii=False).replace("\x7f", "\\u007f")
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{_key(k)} = {_value(v)}" for k, v in value.items()) + " }" if value else "{}"
    return "[" + ", ".join(_value(v) for v in value) + "]"


def _key(key: str) -> str:
    return key if re.fullmatch(r"[A-Za-z0-9_-]+", key) else _value(key)
