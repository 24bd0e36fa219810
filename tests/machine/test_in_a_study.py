"""Machines named in a study file: what it needs, what it refuses, and that it reckons."""

import pytest

from mission.errors import InputError
from mission.study import load_study
from mission.study.spec import check_rows

from ..study.good_study import STUDY, toml_text
from .test_induction import GOOD, GOOD_VF
from .test_saturation_and_limits import BASE, GRID

ROWS = {"time": (0, 1, 2, 3), "torque": (0, 60, -60, 0), "speed": (0, 600, 600, 0), "frequency": (0, 20, 20, 0)}
UNITS = {"time": "s", "torque": "N m", "speed": "rpm", "frequency": "Hz", "current": "A rms"}


def study(folder, machine, *columns):
    """Write a study with these columns and load it."""
    names = ("time", *columns)
    rows = zip(*(ROWS["torque" if n == "current" else n] for n in names))
    (folder / "duty.csv").write_text("\n".join([",".join(names), *(",".join(map(str, r)) for r in rows)]))
    data = {**STUDY, "machine": machine, "duty": {"file": "duty.csv", "columns": {n: {"column": n, "unit": UNITS[n]} for n in names}},
            "cooling": {**STUDY["cooling"], "coolant_c": 40}}
    (folder / "study.toml").write_text(toml_text(data))
    return load_study(folder / "study.toml")


@pytest.mark.parametrize(
    ("machine", "columns"),
    [
        (GOOD, ("torque", "speed")),
        (GOOD, ("current", "speed")),
        (GOOD | {"beyond": "limit", "current_max_a": 40.0}, ("torque", "speed")),
        (GOOD_VF, ("torque", "speed")),
        (GOOD_VF, ("torque", "frequency")),
        ({**BASE, "saturation": GRID}, ("torque", "speed")),
    ],
)
def test_studies_that_are_right(tmp_path, machine, columns):
    loaded = study(tmp_path, machine, *columns)
    check_rows(loaded)
    # a changed section is checked like the file, nested tables included
    assert loaded.changed("machine", winding_c=80.0).spec.machine.winding_c == 80.0


@pytest.mark.parametrize(
    ("machine", "columns", "fragment"),
    [
        (GOOD, ("torque",), "no column for speed.*machine.kind = 'induction'"),
        (GOOD, ("torque", "speed", "frequency"), "a column for frequency_hz"),
        (GOOD, ("torque", "current", "speed"), "both current and torque"),
        (GOOD_VF, ("torque",), "no column for speed.*'induction-vf'"),
        (GOOD_VF, ("torque", "speed", "frequency"), "a column for speed_rad_s"),
        (GOOD | {"r_r_ohm": None}, ("torque", "speed"), "field machine.r_r_ohm.*required"),
    ],
)
def test_studies_that_are_not(tmp_path, machine, columns, fragment):
    with pytest.raises(InputError, match=fragment):
        study(tmp_path, {k: v for k, v in machine.items() if v is not None}, *columns)


def test_row_that_the_machine_cannot_do_is_named_by_its_line(tmp_path):
    loaded = study(tmp_path, GOOD | {"current_max_a": 30.0}, "torque", "speed")
    with pytest.raises(InputError, match=r"duty\.csv, line 3 \(t = 1 s\): found 60 N m .* 30 A rms"):
        check_rows(loaded)
