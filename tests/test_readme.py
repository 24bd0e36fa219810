"""The README is followed literally: its commands exist, its study reads, its Python runs."""

from __future__ import annotations

import os
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def block(name: str) -> str:
    return re.search(rf"<!-- {name}:begin -->\n```sh\n(.*?)```\n<!-- {name}:end -->", README, re.S).group(1).strip()


def code(language: str) -> list[str]:
    return re.findall(rf"```{language}\n(.*?)```", README, re.S)


def test_two_commands_each_one_line():
    for name in ("run", "tests"):
        assert "\n" not in block(name)
        assert block(name).startswith("python3 -m venv .venv && .venv/bin/pip install ")


def test_ci_runs_the_readme_command():
    script = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    assert "README.md" in script and "tests:begin" in script


def test_demo_command_runs(tmp_path):
    """The last part of the first command, in this environment."""
    words = block("run").split("&&")[-1].split()
    assert words[0] == ".venv/bin/mission" and words[1] == "run"
    done = subprocess.run([sys.executable, "-m", "mission", "run", str(ROOT / words[2]), "--out", str(tmp_path / "out")],
                          capture_output=True, text=True, cwd=tmp_path, env={**os.environ, "PYTHONPATH": str(ROOT)})
    assert done.returncode == 0, done.stderr
    assert (tmp_path / "out" / "report.html").stat().st_size > 100_000
    assert "met" in done.stdout and "MISSED" not in done.stdout


def test_study_of_the_readme_reads_an_own_csv(tmp_path):
    """The study that the README shows, beside a log of the form it describes."""
    study = next(c for c in code("toml") if "[duty.columns]" in c)
    (tmp_path / "study.toml").write_text(study, encoding="utf-8")
    lines = ["t;I_mot;n;T_in;what", "0;80,5;120;30;up", "10;0;0;30;stop", "20;-40,25;-120;31;down", "30;0;0;30;stop"]
    (tmp_path / "log.csv").write_text("\n".join(lines) + "\n", encoding="utf-8")
    from mission.cli import main

    assert main(["check", str(tmp_path / "study.toml")]) == 0


def test_inverter_of_the_readme_reads(tmp_path):
    """The section with everything in it, in the study that the README shows, on a module with data over the gate resistor."""
    study, inverter = (next(c for c in code("toml") if words in c) for words in ("[duty.columns]", "[[inverter.schedule]]"))
    text = re.sub(r"\[inverter\].*?(?=\n\[cooling\])", lambda _: inverter, study, flags=re.S).replace('"heron-300"', '"swift-400"')
    (tmp_path / "study.toml").write_text(text, encoding="utf-8")
    (tmp_path / "log.csv").write_text("t;I_mot;n;T_in;what\n0;80,5;120;30;up\n10;0;0;30;stop\n30;0;0;30;stop\n", encoding="utf-8")
    from mission.study import load_study, run

    spec = load_study(tmp_path / "study.toml").spec.inverter
    assert len(spec.schedule) == 2 and spec.dead_time_us == 1.5 and spec.driver.power_w == 2.0
    assert {"turn-off peak voltage", "gate power"} <= {v.what for v in run(load_study(tmp_path / "study.toml")).verdicts}


def test_every_command_of_the_readme_is_one(capsys):
    from mission.cli import main

    for words in re.findall(r"^\| `mission (\w+)", README, re.M):
        with pytest.raises(SystemExit) as ended:
            main([words, "--help"])
        assert ended.value.code == 0 and "usage: mission " + words in capsys.readouterr().out


def test_layers_of_the_readme_make_a_module(tmp_path):
    from mission.device import load_module, to_toml

    layers = next(c for c in code("toml") if "thermal.layer" in c)
    text = to_toml(load_module("heron-300"))
    before, rest = text.split("[switch.thermal]", 1)
    rest = rest[re.search(r"^\[", rest, re.M).start():]
    (tmp_path / "own.toml").write_text(before + layers + "\n" + rest, encoding="utf-8")
    assert load_module("own.toml", folder=tmp_path).switch.thermal.layer[0].material == "silicon"


def test_changing_cooling_of_the_readme_is_usable(tmp_path):
    from mission.study import load_study

    fan = (ROOT / "profiles" / "ferry-fan.toml").read_text(encoding="utf-8")
    changes = next(c for c in code("toml") if "[[cooling.stage]]" in c)
    text = re.sub(r"\[\[cooling.stage\]\].*?(?=\n\[lifetime\])", lambda _: changes, fan, flags=re.S)
    for name, both in (("stages", text), ("law", re.sub(r"\[\[cooling.stage\]\].*?(?=# \[cooling.law\])", "", text, flags=re.S))):
        if name == "law":
            both = re.sub(r"^# ((\[cooling.law\]|watch|at_c|speed_ratio).*)", r"\1", both, flags=re.M)
        (tmp_path / "ferry_day.csv").unlink(missing_ok=True)
        (tmp_path / "ferry_day.csv").symlink_to(ROOT / "profiles" / "ferry_day.csv")
        (tmp_path / f"{name}.toml").write_text(both, encoding="utf-8")
        study = load_study(tmp_path / f"{name}.toml")
        plan = study.cooling_plan()
        assert plan.cut_s.tolist() == [57600.0, 58200.0] and bool(study.spec.cooling.stage) == (name == "stages")
        assert plan.state(0).path.paste == pytest.approx(1.6, rel=0.01)


def test_coupling_of_the_readme_warms_the_neighbour(tmp_path):
    from mission.device import load_module, to_toml
    from mission.thermal import FixedCooling, inverter_modes

    coupling = next(c for c in code("toml") if "[[coupling]]" in c)
    (tmp_path / "own.toml").write_text(to_toml(load_module("heron-300")) + "\n" + coupling, encoding="utf-8")
    cooling = FixedCooling(kind="fixed", r_th_k_per_w=0.02)
    more = inverter_modes(load_module("own.toml", folder=tmp_path), cooling).r_th_k_per_w() - inverter_modes(load_module("heron-300"), cooling).r_th_k_per_w()
    assert more[6, 0] == pytest.approx(0.018, rel=1e-6) and more[7, 0] == pytest.approx(0.0, abs=1e-9)


@pytest.mark.slow
def test_python_of_the_readme_runs(tmp_path):
    (tmp_path / "profiles").symlink_to(ROOT / "profiles")
    done = subprocess.run([sys.executable, "-W", "error::DeprecationWarning", "-c", "\n".join(code("python"))], capture_output=True, text=True, cwd=tmp_path,
                          env={**os.environ, "PYTHONPATH": str(ROOT)})
    assert done.returncode == 0, done.stderr
    assert (tmp_path / "out-hour" / "report.html").exists()
