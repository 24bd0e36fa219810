"""The section ``[plate]``: what it must hold, what it does not go with, and the faces by which chips heat it."""

import tomllib

import pytest

from mission.device import LayerSpec, chip_faces, load_module, lower_face_mm, module_from_dict, plate_chip_names, to_toml
from mission.errors import InputError
from mission.thermal import Material, stack_ladder

AVOCET = load_module("avocet-300")


def data(**changes):
    out = AVOCET.model_dump(mode="json", exclude_none=True)
    return {**out, **changes}


def test_the_shipped_six_pack():
    faces = chip_faces(AVOCET)
    assert tuple(f.name for f in faces) == plate_chip_names(AVOCET) == AVOCET.chip_names()
    # two chips of 12.5 x 12 mm, widened by 45 degrees in 0.3 + 0.63 + 0.3 mm
    assert faces[0][1:] == pytest.approx((29.0, 20.0, 25.0 + 2.46, 12.0 + 2.46))
    assert faces[6][3:] == pytest.approx((15.0 + 2.46, 12.0 + 2.46))
    assert module_from_dict(tomllib.loads(to_toml(AVOCET))) == AVOCET
    assert AVOCET.kind == "igbt" and AVOCET.switch.on_state == load_module("heron-300").switch.on_state


@pytest.mark.parametrize("layers", [
    [("copper", 0.3, 10.0, 8.0, 0.0), ("copper", 0.5, None, None, 45.0)],
    [("copper", 0.3, 10.0, 8.0, 30.0), ("copper", 0.5, 10.5, 20.0, 45.0), ("copper", 0.2, 9.0, 7.0, 0.0)],
    [("copper", 0.3, 10.0, 8.0, 0.0), ("copper", 0.5, 30.0, 8.4, 60.0), ("copper", 2.0, None, None, 20.0)],
])
def test_lower_face_is_where_the_ladder_ends(layers):
    """Independent code: a film added below has the resistance of that face."""
    specs = [LayerSpec(material=m, thickness_mm=t, width_mm=w, length_mm=h, spread_deg=a) for m, t, w, h, a in layers]
    film = LayerSpec(material="copper", thickness_mm=1e-6)
    copper = {"copper": Material(k_w_per_m_k=100.0, rho_kg_per_m3=1.0, c_j_per_kg_k=1.0, source="made up", page_or_clause="", tested_range="")}
    area_mm2 = 1e-9 / 100.0 / stack_ladder([*specs, film], copper).r_layers_k_per_w[-1] * 1e6
    width, length = lower_face_mm(specs)
    assert width * length == pytest.approx(area_mm2, rel=1e-9)


def edit(section, **changes):
    return lambda d: d[section].update(changes)


def chips(change):
    return lambda d: d["plate"].update(chip=change(d["plate"]["chip"]))


def moved(chip, /, **to):
    return chips(lambda every: [{**c, **to} if c["name"] == chip else c for c in every])


BRANCHES = {"reference": "plate", "r_k_per_w": [0.1], "tau_s": [0.1]}

BROKEN = {
    "no plate": (lambda d: d.pop("plate"), ["no section plate, and switch.thermal.reference = 'plate'", "a section [plate]", 'reference = "case"']),
    "layers to the case": (lambda d: [d[part]["thermal"].update(reference="case") for part in ("switch", "diode")],
                           ["a section plate, and switch.thermal.reference = 'case'", "remove the section plate"]),
    "one to the plate, one to the case": (lambda d: d["diode"]["thermal"].update(reference="case"), ["the same reference for all chips"]),
    "branches": (lambda d: d["diode"].update(thermal=BRANCHES), ["diode.thermal", "r_k_per_w and tau_s beside a section plate", "give the layers between chip and plate"]),
    "no paste": (lambda d: d.pop("case_to_sink"), ["no section case_to_sink beside a section plate", 'per = "module"']),
    "paste under each chip": (lambda d: d.update(case_to_sink={"per": "switch-and-diode", "r_th_switch_k_per_w": 0.05, "r_th_diode_k_per_w": 0.08}),
                              ["case_to_sink.per = 'switch-and-diode' beside a section plate", 'per = "module"']),
    "unknown chip": (moved("S-b-up", name="S-b-upp"), ["plate.chip", "a chip named 'S-b-upp'", "did you mean 'S-b-up'?"]),
    "name of a leg file": (moved("S-b-up", name="S-up"), ["a chip named 'S-up'", "one of S-a-up, S-a-lo"]),
    "doubled chip": (moved("S-b-up", name="S-a-up"), ["2 chips named 'S-a-up'", "every chip once"]),
    "missing chips": (chips(lambda every: every[2:]), ["no place for S-a-up, D-a-up", "add name, x_mm and y_mm"]),
    "no chips": (edit("plate", chip=[]), ["plate.chip"]),
    "no layers": (edit("plate", layer=[]), ["plate.layer"]),
    "over the edge": (moved("S-a-up", x_mm=10.0), ["S-a-up from -3.73 to 23.73 mm along x", "0 to 160 mm, the plate", "spread_deg"]),
    "over the far edge": (moved("S-c-lo", y_mm=105.0), ["S-c-lo from 97.77 to 112.23 mm along y", "0 to 108 mm"]),
    "over each other": (moved("D-a-up", y_mm=30.0), ["D-a-up (17.46 x 14.46 mm where its layers end) over S-a-up", "chips side by side"]),
    "plate too small": (edit("plate", width_mm=120.0), ["along x", "0 to 120 mm"]),
    "layer with a size of its own": (lambda d: d["plate"]["layer"][0].update(width_mm=50.0), ["plate.layer[1].width_mm", "unknown key"]),
    "negative place": (moved("S-a-up", x_mm=-1.0), ["plate.chip[1].x_mm", "at least 0"]),
    "no thickness": (lambda d: d["plate"]["layer"][0].update(thickness_mm=0.0), ["plate.layer[1].thickness_mm", "above 0"]),
    "plate in metres by mistake": (edit("plate", width_mm=1600.0), ["plate.width_mm", "at most 1000"]),
    "number in quotes": (moved("S-a-up", x_mm="29"), ["plate.chip[1].x_mm", "without quotes"]),
    "couplings": (lambda d: d.update(coupling=[{"heated": "S-up", "felt": "D-up", "r_k_per_w": [0.01], "tau_s": [0.3]}]), ["coupling", "beside a section plate"]),
}


@pytest.mark.parametrize(("change", "fragments"), BROKEN.values(), ids=BROKEN)
def test_what_is_refused(change, fragments):
    broken = data()
    change(broken)
    with pytest.raises(InputError) as caught:
        module_from_dict(broken, "own.toml")
    text = str(caught.value)
    assert text.startswith("own.toml")
    for fragment in fragments:
        assert fragment in text, text


def test_chips_may_touch():
    """Side by side without a gap, and flush with the edge."""
    touching = data()
    moved("D-a-up", y_mm=20.0 + 12.0 + 2.46)(touching)
    moved("S-a-up", x_mm=(25.0 + 2.46) / 2)(touching)
    assert len(module_from_dict(touching).plate.chip) == 12


@pytest.mark.parametrize("arrangement", ["half-bridge"])
def test_names_without_the_leg(arrangement):
    leg = data(arrangement=arrangement)
    leg["plate"]["chip"] = [{**c, "name": c["name"].replace("-a-", "-")} for c in leg["plate"]["chip"] if "-a-" in c["name"]]
    assert plate_chip_names(module_from_dict(leg)) == ("S-up", "S-lo", "D-up", "D-lo")
    leg["plate"]["chip"][0]["name"] = "S-a-up"
    with pytest.raises(InputError, match="a chip named 'S-a-up'; allowed: one of S-up, S-lo, D-up, D-lo"):
        module_from_dict(leg)
