"""``mission heat``: what it prints, writes, draws and returns."""

import pandas as pd
import pytest

from mission.cli import BAD_INPUT, FINE, MISSED, main

from ..study.good_study import DIRECT_DUTY, direct_study, toml_text, write
from ..study.test_cooling_in_studies import FAN, STAGES, TABLE, rows
from ..study.test_heat import FIXED, PLATE, WORK

FINS = {"kind": "plate-fin-natural", "base_mm": 10, "fin_count": 10, "fin_mm": 2, "gap_mm": 10, "fin_height_mm": 30, "length_mm": 100,
        "emissivity": 0.8, "coolant_c": 30}
ALWAYS = {"heat.txt", "resistances.csv", "impedance.csv", "drop.png", "drop.svg", "impedance.png", "impedance.svg"}


def study(folder, csv=WORK, *, start="repeat", **sections):
    duty = {**DIRECT_DUTY, "last_row_lasts_s": 1.0, "longest_step_s": 1e5}
    write(folder, {"study.toml": toml_text(direct_study(duty=duty, march={"start": start}, **{"cooling": FIXED, **sections})), "duty.csv": csv})
    return str(folder / "study.toml")


def drawn(folder):
    names = {p.name for p in folder.iterdir()}
    assert ALWAYS <= names and not [n for n in names if n.endswith(".part")]
    return {n.removesuffix(".png") for n in names - ALWAYS if n.endswith(".png")}, names


def test_text_and_tables_of_given_cooling(tmp_path, capsys):
    """By hand: 0.110 K/W of the switch, 0.009 K/W of paste and 0.02 K/W of the sink, read back from what was written."""
    out = tmp_path / "out"
    assert main(["heat", study(tmp_path), "--out", str(out)]) == FINE
    text, err = capsys.readouterr()
    assert err == "" and text.split("\nwritten to")[0] == (out / "heat.txt").read_text(encoding="utf-8")
    more, names = drawn(out)
    assert more == set() and names == ALWAYS
    lines = text.splitlines()
    assert "mean losses of the mission" in lines[1] and "given, not reckoned" in text and "20 K/kW from surface to coolant" in text
    head = next(line.split() for line in lines if line.startswith("  S-") and "switch" in line)
    loss, junction, case, sink, coolant = map(float, head[2:])
    total = float(next(line for line in lines if "case to sink" in line).split()[3])
    assert coolant == 40.0 and sink == pytest.approx(40.0 + 0.02 * total, abs=0.06) and case == pytest.approx(40.0 + 0.029 * total, abs=0.06)
    assert junction - case == pytest.approx(0.110 * loss, abs=0.11)
    start = next(k for k, line in enumerate(lines) if "heat, W" in line)
    drops = [line.split() for line in lines[start + 1: start + 5]]
    for d in drops[:3]:
        assert float(d[-1].rstrip("%")) == pytest.approx(100.0 * float(d[-2]) / float(drops[3][-1]), abs=0.2)
    assert sum(float(d[-2]) for d in drops[:3]) == pytest.approx(float(drops[3][-1]), abs=0.02)
    r = pd.read_csv(out / "resistances.csv")
    assert len(r) == 144 and list(r) == ["chip", "heated", "r_th_junction_k_per_w", "r_th_case_k_per_w"]
    own = r[r.chip == r.heated].set_index("chip").r_th_junction_k_per_w
    assert own["S-a-up"] == pytest.approx(0.139, rel=1e-6) and own["D-c-lo"] == pytest.approx(0.209, rel=1e-6)
    others = r[r.chip != r.heated]
    assert others.r_th_junction_k_per_w.tolist() == pytest.approx(132 * [0.029], rel=1e-6) == others.r_th_case_k_per_w.tolist()
    z = pd.read_csv(out / "impedance.csv")
    hot = head[0].rstrip(",")
    assert z.shape[1] == 13 and z.time_s.is_monotonic_increasing and z[f"{hot} z_th_k_per_w"].is_monotonic_increasing
    # at rest the resistances, mutual ones within the bound of the reduction; from nearly nothing on
    assert z[f"{hot} z_th_k_per_w"].iloc[-1] == pytest.approx(0.139, rel=1e-3) and z[f"{hot} z_th_k_per_w"].iloc[0] < 0.02 * 0.139
    assert z["D-a-up z_th_k_per_w"].iloc[-1] == pytest.approx(0.029, abs=0.001 * 0.139)


@pytest.mark.slow
def test_what_is_drawn_follows_the_cooling(tmp_path, capsys):
    natural = FINS | {"base_mm": 20, "fin_count": 40, "fin_height_mm": 100, "length_mm": 400}
    for name, cooling, figures, said in (
        ("foster", {"kind": "foster", "r_k_per_w": [0.01, 0.01], "tau_s": [1.0, 30.0], "coolant_c": 40}, set(), "given, not reckoned"),
        ("table", TABLE | {"at_l_per_min": 7.0}, {"resistance-over-flow"}, "resistance against flow as given"),
        ("fan", {**FAN, "stage": STAGES, "footprint": {"length_mm": 122, "width_mm": 162}}, {"working-point", "resistance-over-flow"},
         "spreading in the base"),
        ("natural", natural, {"resistance-over-rise"}, "of the heat"),
        ("plate", PLATE, {"resistance-over-flow"}, "12 l/min"),
    ):
        assert main(["heat", study(tmp_path / name, cooling=cooling), "--out", str(tmp_path / name / "out")]) == FINE
        text = capsys.readouterr().out
        assert drawn(tmp_path / name / "out")[0] == figures and said in text
        if name != "foster":
            assert "    source: " in text and cooling["kind"] in text
        if name == "fan":
            assert "100 % speed" in text and " Pa\n" in text and "m3/h" in text and "Reynolds number" in text


def test_flags_are_told(tmp_path, capsys):
    """A Reynolds number of the transition is mistrusted by the sink's rules."""
    slow = {**FAN, "stage": [{"speed_ratio": 0.45, "up_above_c": 200}, {"speed_ratio": 1.0, "down_below_c": 150}]}
    assert main(["heat", study(tmp_path, cooling=slow), "--out", str(tmp_path / "out")]) == FINE
    text = capsys.readouterr().out
    assert "kind of flow           transition" in text and "to know: the Reynolds number" in text


def test_what_lies_beyond_the_data_is_told(tmp_path, capsys):
    """Fins far too small for the load in still air: rises beyond 250 K and junctions beyond the curves' 150 degC."""
    path = study(tmp_path, rows([(0, 40, 50, 0.8, 0.85), (5, 0, 0, 0.05, 1), (20, 0, 0, 0.05, 1)]), cooling=FINS, start="coolant")
    assert main(["heat", path, "--out", str(tmp_path / "means")]) == FINE
    assert "to know: the sink stands" not in capsys.readouterr().out
    assert main(["heat", path, "--out", str(tmp_path / "out"), "--held"]) == FINE
    said = [line for line in capsys.readouterr().out.splitlines() if line.startswith("  to know: ")]
    assert len(said) == 2 and "outside 25 to 150 degC" in said[0] and "K above the air; 24" in said[1]


def test_plate_and_layers(tmp_path, capsys):
    out = tmp_path / "out"
    assert main(["heat", study(tmp_path, module={"name": "avocet-300"}), "--out", str(out), "--held"]) == FINE
    text = capsys.readouterr().out
    more, names = drawn(out)
    assert more == {"plate-map", "spreading"} and "layers.csv" in names
    assert all(words in text for words in ("held for ever", "straight down", "closed form", "copper (plate)", "alumina-96, 0.63 mm"))
    layers = pd.read_csv(out / "layers.csv")
    assert list(layers.columns) == ["chip", "part", "material", "thickness_mm", "r_k_per_w", "upper_c", "lower_c", "drop_k", "k_w_per_m_k",
                                    "k_there_w_per_m_k", "change_percent"]
    assert layers.part.tolist() == 2 * (6 * ["chip"] + ["plate"]) and layers[layers.part == "plate"].r_k_per_w.isna().all()
    chip = layers[layers.part == "chip"]
    heat = chip.drop_k / chip.r_k_per_w  # each chip's own loss through all of its layers
    assert heat.groupby(chip.chip).agg(lambda v: v.max() / v.min()).max() == pytest.approx(1.0, rel=1e-4)
    assert layers[layers.material == "copper"].k_there_w_per_m_k.lt(394.0).all()
    assert layers[layers.material == "alumina-96"].change_percent.isna().all()
    neighbours = [line.split() for line in text.splitlines() if line.endswith(" K") and " K/W" in line and line.startswith("    ")]
    assert len(neighbours) == 5 and [float(n[1]) for n in neighbours] == sorted((float(n[1]) for n in neighbours), reverse=True)
    svg = (out / "plate-map.svg").read_text(encoding="utf-8")
    assert svg.startswith("<") and (out / "plate-map.png").stat().st_size > 50_000


def test_no_stable_temperature_ends_with_code_1(tmp_path, capsys):
    csv = rows([(0, 250, 50, 0.8, 0.85), (1, 0, 0, 0.05, 1), (20, 0, 0, 0.05, 1)])
    path = study(tmp_path, csv, cooling={**FIXED, "r_th_k_per_w": 0.9, "heat_capacity_j_per_k": 1e5}, start="coolant")
    assert main(["heat", path, "--out", str(tmp_path / "means")]) == FINE
    capsys.readouterr()
    assert main(["heat", path, "--out", str(tmp_path / "out"), "--held"]) == MISSED
    out, err = capsys.readouterr()
    assert out == "" and err.startswith("mission: ") and "no stable temperature below 1000 degC" in err and err.count("\n") == 1
    assert not list((tmp_path / "out").iterdir())


def test_a_missed_limit_is_not_judged_and_quiet_is_quiet(tmp_path, capsys):
    assert main(["heat", study(tmp_path, limits={"t_vj_max_c": 45}), "--out", str(tmp_path / "out"), "--quiet"]) == FINE
    assert capsys.readouterr() == ("", "") and ALWAYS <= {p.name for p in (tmp_path / "out").iterdir()}


def test_no_load_at_all(tmp_path, capsys):
    assert main(["heat", study(tmp_path, rows([(0, 0, 0, 0.05, 1), (5, 0, 0, 0.05, 1)])), "--out", str(tmp_path / "out")]) == FINE
    assert "0.00       -" in capsys.readouterr().out


def test_what_cannot_be_used_ends_with_code_2(tmp_path, capsys):
    good = study(tmp_path)
    (tmp_path / "taken").write_text("", encoding="utf-8")
    broken = study(tmp_path / "broken", cooling={**FIXED, "r_th_k_per_w": -1.0})
    beyond = study(tmp_path / "beyond", rows([(0, 5000, 50, 0.8, 0.85), (5, 0, 0, 0.05, 1)]))
    for path, to, words in ((str(tmp_path / "none.toml"), "out", "no such file"), (good, "taken", "which is a file"), (broken, "out", "r_th_k_per_w"),
                             (beyond, "out", "a peak current of")):
        assert main(["heat", path, "--out", str(tmp_path / to)]) == BAD_INPUT
        out, err = capsys.readouterr()
        assert words in err and err.startswith("mission: ") and err.count("\n") == 1 and out == ""
    assert not (tmp_path / "out").exists()


def test_names_are_no_orders(tmp_path, capsys):
    """Letters that a terminal acts on, and signs that the pictures' text would read as formulas."""
    assert main(["heat", study(tmp_path, name="a \u001b[31m $x_{$ study"), "--out", str(tmp_path / "out")]) == FINE
    assert "\x1b" not in capsys.readouterr().out
