"""What the ``[duty]`` section of a study may be: a file, or a recipe."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Discriminator, Tag

from ..errors import InputError, near_match
from ..tomlfile import FileModel, parse_model
from .making import Recipe
from .recipes import Conveyor, Fan, Hoist, Lift, Pump, Vehicle
from .spec import DutySpec
from .standard import DutyType

#: Word in ``recipe = "..."`` -> its model.
RECIPES: dict[str, type[Recipe]] = {"hoist": Hoist, "lift": Lift, "vehicle": Vehicle, "pump": Pump, "fan": Fan, "conveyor": Conveyor, "duty-type": DutyType}


class _NoSuchRecipe(FileModel):
    """Catches an unknown word, so that the message names the known ones."""

    model_config = ConfigDict(extra="ignore")

    recipe: Literal["hoist", "lift", "vehicle", "pump", "fan", "conveyor", "duty-type"]


def _kind(value) -> str:
    """Tag of a section; the tags of files and of unknown words are no keys of it, see ``tomlfile``."""
    if isinstance(value, BaseModel):
        value = {"recipe": value.recipe} if isinstance(value, Recipe) else {}
    if not isinstance(value, dict) or "recipe" not in value:
        return "(file)"
    word = value["recipe"]
    return word if isinstance(word, str) and word in RECIPES else "(unknown)"


DutySource = Annotated[
    Annotated[DutySpec, Tag("(file)")] | Annotated[Hoist, Tag("hoist")] | Annotated[Lift, Tag("lift")] | Annotated[Vehicle, Tag("vehicle")]
    | Annotated[Pump, Tag("pump")] | Annotated[Fan, Tag("fan")] | Annotated[Conveyor, Tag("conveyor")] | Annotated[DutyType, Tag("duty-type")]
    | Annotated[_NoSuchRecipe, Tag("(unknown)")],
    Discriminator(_kind)]


def recipe(kind, **values) -> Recipe:
    """A recipe from Python, checked as one in a study file is.

    Parameters
    ----------
    kind : str
        "hoist", "lift", "vehicle", "pump", "fan", "conveyor" or "duty-type".
    **values
        Its fields, tables in them as dicts.

    Returns
    -------
    Recipe
        With ``profile()`` and ``scaled(...)``.

    Raises
    ------
    InputError
        First thing that is wrong: field, value, what is allowed.

    Examples
    --------
    >>> duty = recipe("duty-type", type="S2", torque_nm=80, speed_rpm=1500, load_s=1800, rest_s=7200).profile()
    >>> duty.phases, duty.time_by_phase_s
    (('load', 'rest'), (1800.0, 7200.0))
    >>> recipe("duty-type", type="S2", torque_nm=80, speed_rpm=1500, load_s=1800, rest_s=7200).scaled(load_s=0.5).load_s
    900.0
    >>> recipe("duty-type", type="S1", torque_nm=80, speed_rpm=1500)
    Traceback (most recent call last):
    ...
    mission.errors.InputError: recipe 'duty-type', field load_s: found nothing; allowed: torque_nm, speed_rpm, load_s, which type = 'S1' needs. What to do: add it.
    """
    if kind not in RECIPES:
        raise InputError("recipe", f"{kind!r}", "one of " + ", ".join(RECIPES), near_match(str(kind), RECIPES))
    return parse_model({"recipe": kind, **values}, RECIPES[kind], f"recipe '{kind}'")
