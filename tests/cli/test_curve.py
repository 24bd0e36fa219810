"""``mission curve``: measured records in, branches and tables out; the demo records against the stack that made them."""

import importlib.util
import re
import shlex
import tomllib
from pathlib import Path

import numpy as np
import pandas as pd
import pytest

from mission.cli import BAD_INPUT, FINE, main
from mission.device import load_module, to_toml
from mission.errors import InputError
from mission.thermal import FosterNetwork

ROOT = Path(__file__).parents[2]
DEMO = ROOT / "profiles" / "heron-curve"
GREASED, DRY = str(DEMO / "greased.csv"), str(DEMO / "dry.csv")
COOLING = ["--kind", "cooling", "--power", "400"]
WINDOW = ["--window", "2e-5,1.6e-4"]
#: Written with --out beside the pictures.
TABLES = {"branches.toml", "impedance.csv", "structure.csv", "curve.txt"}


@pytest.fixture(scope="module")
def script():
    spec = importlib.util.spec_from_file_location("make_records", DEMO / "make_records.py")
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def curve(capsys, *args):
    code = main(["curve", *map(str, args)])
    out, err = capsys.readouterr()
    assert code == FINE and err == ""
    return out


def branches(folder):
    thermal = tomllib.loads((folder / "branches.toml").read_text(encoding="utf-8"))["switch"]["thermal"]
    return FosterNetwork(thermal["r_k_per_w"], thermal["tau_s"]), thermal.get("reference")


def to_case_k_per_w(script, time_s):
    """Impedance to the case of the stack that made the records; independent code: implicit steps of a thousandth of the time, not eigenvalues."""
    r, c, _ = script.cells(script.MODULE, script.CHIP_MM)
    r, c = r / script.CHIPS, c * script.CHIPS
    c = 0.5 * (np.append(c, 0.0) + np.append(0.0, c))[:-1]
    g = 1.0 / r
    flow = np.diag(g + np.append(0.0, g[:-1])) - np.diag(g[:-1], 1) - np.diag(g[:-1], -1)
    out = []
    for t in time_s:
        step = np.linalg.inv(np.diag(c) + t / 1024 * flow)
        rise = np.zeros(c.size)
        heat = np.append(t / 1024, np.zeros(c.size - 1))
        for _ in range(1024):
            rise = step @ (c * rise + heat)
        out.append(rise[0])
    return np.array(out)


def test_demo_records_come_from_their_script(script, tmp_path):
    script.main(tmp_path)
    for name in ("dry.csv", "greased.csv"):
        assert (tmp_path / name).read_bytes() == (DEMO / name).read_bytes()
        assert (DEMO / name).stat().st_size < 60_000
    # as the module file has it
    assert script.junction_to_case_k_per_w() == pytest.approx(sum(load_module("heron-300").switch.thermal.r_k_per_w), rel=0.02)


def test_command_of_the_readme(script, tmp_path, monkeypatch, capsys):
    """What the README shows, word by word; its numbers against the output and the stack."""
    section = (ROOT / "README.md").read_text(encoding="utf-8").split("### Measured curves\n")[1].split("\n#")[0]
    words = shlex.split(re.search(r"```sh\n(.*?)```", section, re.S).group(1))
    (tmp_path / "profiles").symlink_to(ROOT / "profiles")
    monkeypatch.chdir(tmp_path)
    assert words[:2] == ["mission", "curve"]
    said = curve(capsys, *words[2:])
    low, high, true = re.search(r"give (\S+) and (\S+) K/W, where (\S+) is true", section).groups()
    assert float(low) == pytest.approx(float(re.search(r"junction to case (\S+) K/W by the difference of derivatives", said).group(1)), abs=6e-4)
    assert float(high) == pytest.approx(float(re.search(r"(\S+) K/W by the structure functions, parted", said).group(1)), abs=6e-4)
    assert float(true) == pytest.approx(script.junction_to_case_k_per_w(), abs=6e-4)
    files = {p.name for p in (tmp_path / "curve").iterdir()}
    assert files == TABLES | {f"{n}.{e}" for n in ("measured", "structure", "separation") for e in ("png", "svg")}
    assert (tmp_path / "curve" / "curve.txt").read_text(encoding="utf-8").strip() in said
    for part in ("start: 88.8", "scatters by", "residual rms", "to know:", "the two ways to find the case differ by", "written to curve"):
        assert part in said
    found, reference = branches(tmp_path / "curve")
    assert reference == "case" and found.r_total_k_per_w == pytest.approx(0.5 * (float(low) + float(high)), rel=0.01)


def test_branches_stand_in_a_module_file(tmp_path, capsys):
    curve(capsys, GREASED, *COOLING, "--against", DRY, "--branches", 4, "--out", tmp_path / "out")
    text = (tmp_path / "out" / "branches.toml").read_text(encoding="utf-8")
    module = to_toml(load_module("heron-300"))
    before, rest = module.split("[switch.thermal]", 1)
    (tmp_path / "own.toml").write_text(before + text + "\n" + rest[re.search(r"^\[", rest, re.M).start():], encoding="utf-8")
    thermal = load_module("own.toml", folder=tmp_path).switch.thermal
    assert thermal.reference == "case" and len(thermal.tau_s) == 4


@pytest.mark.parametrize("name", [GREASED, DRY])
def test_cut_at_the_true_case_gives_the_true_impedance(name, script, tmp_path, capsys):
    """With the right resistance the branches follow the stack from 1 ms on within 2 %: 1 % of the fit, the rest noise and start."""
    curve(capsys, name, *COOLING, *WINDOW, "--case-at", f"{script.junction_to_case_k_per_w():.6g}", "--out", tmp_path)
    t = np.geomspace(1e-3, 3.0, 12)
    exact = to_case_k_per_w(script, t)
    assert exact[-1] == pytest.approx(script.junction_to_case_k_per_w(), rel=1e-3)
    found, reference = branches(tmp_path)
    assert reference == "case" and np.abs(found.z_k_per_w(t) / exact - 1.0).max() < 0.02


def test_steady_resistance_and_tables(script, tmp_path, capsys):
    """Analytic: all resistances of the stack in series."""
    said = curve(capsys, DRY, *COOLING, *WINDOW, "--out", tmp_path)
    assert "# reference =" in said and "junction to case" not in said
    r = script.rise_k([1e9], script.INTERFACES["dry"])[0] / script.POWER_W
    found, reference = branches(tmp_path)
    assert reference is None and found.r_total_k_per_w == pytest.approx(r, rel=0.01)
    table, structure = (pd.read_csv(tmp_path / f"{n}.csv") for n in ("impedance", "structure"))
    assert set(table["curve"]) == {"dry.csv"} == set(structure["curve"])
    exact = script.rise_k(table["time_s"].to_numpy(), script.INTERFACES["dry"]) / script.POWER_W
    late = table["time_s"] > 1e-3
    # 0.11 K of the start are 1 % of the rise at 1 ms
    assert np.abs(table["z_th_k_per_w"] / exact - 1.0)[late].max() < 0.02
    assert (table["extrapolated"] == (table["time_s"] < 2e-5)).all() and table["branches_k_per_w"].isna().sum() == table["extrapolated"].sum()
    assert structure["r_k_per_w"].is_monotonic_increasing and structure["r_k_per_w"].iloc[-1] == pytest.approx(r, rel=0.01)
    assert not (tmp_path / "separation.png").exists()


def test_a_logger_with_voltages_and_its_own_columns(tmp_path, capsys):
    """The demo as a voltage of -2.1 mV/K, in ms, with decimal commas, an idle column and a step at 250 ms: the same answer."""
    plain = pd.read_csv(DRY, comment="#")
    rows = [f"{1e3 * t + 250:.6f};7;{600 - 2.1 * v:.4f}".replace(".", ",") for t, v in plain.to_numpy()]
    (tmp_path / "log.csv").write_text("t (ms);n;U_F (mV)\n" + "\n".join(rows) + "\n", encoding="utf-8")
    form = ["--k-factor", "-2.1", "--units", "ms,mV", "--delimiter", ";", "--decimal", ",", "--step-at", "0.25"]
    answers = [curve(capsys, DRY, *COOLING, *WINDOW, "--branches", 4, "--out", tmp_path / "a")]
    for columns in ("t (ms),U_F (mV)", "1,3"):
        answers.append(curve(capsys, tmp_path / "log.csv", *COOLING, *WINDOW, *form, "--columns", columns, "--branches", 4, "--out", tmp_path / "b"))
        a, b = (branches(tmp_path / f)[0] for f in "ab")
        np.testing.assert_allclose(b.r_k_per_w, a.r_k_per_w, rtol=0.01)
        np.testing.assert_allclose(b.tau_s, a.tau_s, rtol=0.01)
    assert all("start: " in a for a in answers)


def heating(path, seed=0, foster=None, names="time (s),T_vj - T_case (K)"):
    foster = foster or FosterNetwork([0.01, 0.03, 0.06], [1e-3, 2e-2, 0.2])
    t = np.geomspace(1e-4, 5.0, 300)
    rise = 500.0 * foster.z_k_per_w(t) + 0.02 * np.random.default_rng(seed).standard_normal(t.size)
    path.write_text(f"{names}\n" + "\n".join(f"{a:.6g},{v:.4f}" for a, v in zip(t, rise)) + "\n", encoding="utf-8")
    return path, foster


def test_a_heating_record_that_counts_from_the_case(tmp_path, capsys):
    path, foster = heating(tmp_path / "up.csv")
    said = curve(capsys, path, "--kind", "heating", "--power", 500, "--units", "s,K", "--start", 0, "--reference", "case", "--branches", 3,
                 "--out", tmp_path)
    found, reference = branches(tmp_path)
    assert reference == "case" and 'reference = "case"' in said and "as given" in said
    np.testing.assert_allclose(found.r_k_per_w, foster.r_k_per_w, rtol=0.03)
    np.testing.assert_allclose(found.tau_s, foster.tau_s, rtol=0.05)


def test_curves_that_do_not_part_give_the_whole_way(tmp_path, capsys):
    one, _ = heating(tmp_path / "a.csv")
    (tmp_path / "later").mkdir()
    two, _ = heating(tmp_path / "later" / "a.csv", seed=1)
    args = ["--kind", "heating", "--power", 500, "--units", "s,K", "--start", 0, "--against-start", 0]
    said = curve(capsys, one, *args, "--against", two)
    assert "do not part" in said and "# the whole way" in said and "later/a.csv: heating curve" in said


def test_doubts_are_told(capsys):
    said = curve(capsys, GREASED, *COOLING, *WINDOW, "--branches", 2, "--chip-area", 150, "--against", DRY, "--against-power", 500)
    told = said.split("to know:")[1]
    for part in ("the branches miss the curve by up to", "off the stated 150 mm2", "slopes per watt differ by -20 %"):
        assert part in told
    assert "nothing stands out" in curve(capsys, GREASED, *COOLING, *WINDOW)


def test_heated_area_at_the_temperature_of_the_chip(script, capsys):
    """Analytic: the area goes with one over the root of the conductivity; that of the stack's silicon comes back within the slope's few percent."""
    found = []
    for more in ([], ["--chip-at", "125"], ["--chip-material", "silicon-hot"]):
        said = curve(capsys, GREASED, *COOLING, *WINDOW, "--chip-area", 300, *more)
        found.append(float(re.search(r"heated area of (\S+) mm2", said).group(1)))
    assert found[1] / found[0] == pytest.approx((398.15 / 300.0) ** 0.65, rel=5e-3)
    assert found[2] == pytest.approx(script.CHIPS * script.CHIP_MM**2, rel=0.05)


def test_quiet_says_nothing(tmp_path, capsys):
    assert curve(capsys, DRY, *COOLING, "--quiet", "--out", tmp_path) == ""
    assert {p.name for p in tmp_path.iterdir()} > TABLES


@pytest.mark.parametrize(("args", "words"), [
    ([DRY, "--kind", "heating", "--power", "400"], "rises after power is switched on"),
    ([DRY, "--kind", "cooling", "--power", "0"], "power_w"),
    ([DRY, "--kind", "cooling", "--power", "nan"], "power_w"),
    ([DRY.replace("dry", "dri"), *COOLING], "no such file"),
    ([DRY, *COOLING, "--units", "ms,degC"], "unit s in the header, ms stated"),
    ([DRY, *COOLING, "--units", "s"], "--units: found 's'"),
    ([DRY, *COOLING, "--columns", "1,7"], "7"),
    ([DRY, *COOLING, "--columns", "t (s)"], "--columns"),
    ([DRY, *COOLING, "--delimiter", ";"], "single column"),
    ([DRY, *COOLING, "--window", "a,b"], "--window: found 'a,b'"),
    ([DRY, *COOLING, "--window", "1,0.1"], "a first time before the last"),
    ([DRY, *COOLING, *WINDOW, "--start", "130"], "one of them"),
    ([DRY, *COOLING, "--step-at", "50"], "two decades of time"),
    ([DRY, *COOLING, "--k-factor", "0"], "at least 0.001 mV/K"),
    ([DRY, *COOLING, "--branches", "12"], "1 to 8"),
    ([DRY, *COOLING, "--chip-area", "-3"], "area_mm2"),
    ([DRY, *COOLING, "--chip-material", "silicom"], "did you mean 'silicon'?"),
    ([DRY, *COOLING, "--chip-at", "100"], "only beside --chip-area"),
    ([DRY, *COOLING, "--chip-area", "300", "--chip-at", "900"], "where its law was tested"),
    ([DRY, *COOLING, "--case-at", "3"], "where dry.csv ends"),
    ([DRY, *COOLING, "--case-at", "0.1", "--reference", "sink"], "beside a way that is cut at the case"),
    ([DRY, *COOLING, "--against-power", "3"], "only beside --against"),
    ([DRY, *COOLING, "--against", GREASED, "--start", "130"], "a start for both, or for none"),
    ([DRY, *COOLING, "--against", GREASED.replace("gr", "cr")], "no such file"),
])
def test_what_cannot_be_used_ends_with_code_2(args, words, tmp_path, capsys):
    assert main(["curve", *args, "--out", str(tmp_path / "out")]) == BAD_INPUT
    out, err = capsys.readouterr()
    assert words in err and err.startswith("mission: ") and err.count("\n") == 1 and ": found " in err and out == ""
    assert not (tmp_path / "out").exists()


def test_a_broken_row_is_named(tmp_path, capsys):
    lines = Path(DRY).read_text(encoding="utf-8").splitlines()
    lines[40] = "0.00012,n/a"
    (tmp_path / "broken.csv").write_text("\n".join(lines), encoding="utf-8")
    assert main(["curve", str(tmp_path / "broken.csv"), *COOLING]) == BAD_INPUT
    assert "broken.csv, line 41, column 'T_vj (degC)'" in capsys.readouterr().err


def test_names_of_files_are_no_orders(tmp_path, capsys):
    """A name with control characters reaches neither the terminal nor the TOML file as it is."""
    nasty = tmp_path / "a\x1b[31m\tb.csv"
    nasty.write_bytes(Path(DRY).read_bytes())
    said = curve(capsys, nasty, *COOLING, "--out", tmp_path / "out")
    assert "\x1b" not in said and "\x1b" not in (tmp_path / "out" / "branches.toml").read_text(encoding="utf-8")
    branches(tmp_path / "out")


def test_unknown_reference_from_python():
    from mission.show.curve import branches_toml
    from mission.thermal.evaluation import evaluate_curve
    from mission.thermal.measured import read_record

    found = evaluate_curve(read_record(DRY, power_w=400.0, kind="cooling"))
    with pytest.raises(InputError, match="case or sink"):
        branches_toml(found, "water")
