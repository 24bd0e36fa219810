"""Cycles made by hand."""

import numpy as np

from mission.cycles import CycleTable

CHIPS = tuple(f"{part}-{leg}-{side}" for part in "SD" for leg in "abc" for side in ("up", "lo"))
BAYERER = {"current_per_foot_a": 10.0, "v_class": 12.0, "wire_diameter_um": 300.0}


def cycles(rows):
    """A table from dicts; what a row does not say is taken from the defaults."""
    default = {"signal": 0, "range_k": 50.0, "mean_c": 80.0, "heating_s": 2.0, "start_s": 0.0, "end_s": 10.0, "phase_id": 0, "count": 1.0, "kind": 0}
    full = [{**default, **r} for r in rows]
    for r in full:
        r.setdefault("min_c", r["mean_c"] - 0.5 * r["range_k"])
        r.setdefault("max_c", r["mean_c"] + 0.5 * r["range_k"])
    kinds = {"signal": np.int16, "phase_id": np.int16, "kind": np.uint8}
    names = ("signal", "range_k", "mean_c", "min_c", "max_c", "heating_s", "start_s", "end_s", "phase_id", "count", "kind")
    return CycleTable(*(np.array([r[n] for r in full], kinds.get(n, float)) for n in names))


def life(model, range_k, mean_c, heating_s=2.0, **more):
    """Cycles to failure of swings about a mean, and whether they lie outside the tested range."""
    r, m = np.asarray(range_k, float), np.asarray(mean_c, float)
    return model.cycles_to_failure(r, m, m - 0.5 * r, m + 0.5 * r, heating_s, **more)
