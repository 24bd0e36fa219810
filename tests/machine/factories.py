"""Blocks and machines shared by the tests of the machine stage."""

from dataclasses import dataclass

import numpy as np

from mission.machine import operating_points

M_MAX = 2.0 / np.sqrt(3.0)
V_DC = 600.0
V_MAX = M_MAX * V_DC / 2.0


@dataclass
class Block:
    """What the stage reads of a profile block."""

    time_s: np.ndarray
    columns: dict
    first_row: int = 0


def points(machine, *, v_dc=V_DC, mod_index_max=M_MAX, first_row=0, where="day.csv", **columns):
    """Operating points of columns; scalars are as long as the longest column."""
    columns = {k: np.atleast_1d(np.asarray(v, float)) for k, v in columns.items()}
    n = max(c.size for c in columns.values())
    columns = {k: np.broadcast_to(c, (n,)).copy() for k, c in columns.items()}
    block = Block(0.5 * np.arange(n), columns, first_row)
    return operating_points(block, machine, dc_voltage_v=v_dc, mod_index_max=mod_index_max, where=where)


def changed(machine, **values):
    """The machine with other values, checked."""
    return type(machine)(**{**machine.model_dump(exclude_none=True), **values})
