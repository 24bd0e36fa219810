"""Whatever is wrong with a profile, a module or a study, the command says what and where, and ends with code 2."""

import os
import subprocess
import sys
from pathlib import Path

import pytest

import mission
from mission.cli import BAD_INPUT, FINE, main

from ..device.broken_modules import BROKEN_MODULES, broken_text
from ..duty.broken_profiles import BROKEN_PROFILES
from ..study.broken_studies import BROKEN_STUDIES
from ..study.good_study import CSV, DIRECT_CSV, direct_study, study, toml_text, write


def profile_files(case):
    return {"study.toml": toml_text(study(duty=case.duty)), **case.files}


def study_files(case):
    return {"study.toml": case.content(), **case.files}


def module_files(change):
    return {"study.toml": toml_text(study(module={"file": "mine.toml"})), "duty.csv": CSV, "mine.toml": broken_text(change)}


#: (name, files, fragments); the name of the faulty file is among the fragments or said here.
CASES = (
    [(f"profile: {c.name}", profile_files(c), c.fragments) for c in BROKEN_PROFILES]
    + [(f"study: {c.name}", study_files(c), c.fragments) for c in BROKEN_STUDIES]
    + [(f"module: {name}", module_files(change), ("mine.toml", *fragments)) for name, change, fragments in BROKEN_MODULES]
)
#: Files that a message may name as the place of the mistake.
FILES = ("study.toml", "mine.toml", "own.toml", "mein.toml", "duty.csv", "duty.parquet", "duty.xlsx", "duti.csv", "aaa.csv", "mi\\x00ne.toml")


def assert_refused(code, out, err, fragments):
    assert code == BAD_INPUT and out == ""
    assert err.startswith("mission: ") and "Traceback" not in err and err.count("\n") == 1
    assert ": found " in err and "; allowed: " in err
    assert any(name in err for name in FILES), err
    missing = [f for f in fragments if f not in err]
    assert not missing, f"{missing} not in: {err}"


@pytest.mark.parametrize(("files", "fragments"), [c[1:] for c in CASES], ids=[c[0] for c in CASES])
def test_check_refuses(files, fragments, tmp_path, capsys):
    write(tmp_path, files)
    code = main(["check", str(tmp_path / "study.toml")])
    assert_refused(code, *capsys.readouterr(), fragments)


def test_there_are_more_than_forty_kinds_of_bad_input():
    assert len({c[0] for c in CASES}) == len(CASES)
    assert len(CASES) >= 40 and min(len(BROKEN_PROFILES), len(BROKEN_STUDIES), len(BROKEN_MODULES)) >= 20


# Mistakes that show at different depths: syntax, field, file, row, machine, lifetime.
DEEP = ["study: not TOML", "study: number in quotes", "profile: missing file", "profile: NaN", "profile: damaged Parquet", "study: operating point beyond the voltage",
        "study: current beyond the tables", "study: option missing", "module: voltage falls"]


@pytest.mark.parametrize("name", DEEP)
def test_run_refuses_and_leaves_no_result(name, tmp_path, capsys):
    (files, fragments), = [c[1:] for c in CASES if c[0] == name]
    write(tmp_path, files)
    code = main(["run", str(tmp_path / "study.toml"), "--out", str(tmp_path / "out")])
    assert_refused(code, *capsys.readouterr(), fragments)
    assert not (tmp_path / "out").exists()


def command(*args, encoding=None):
    """The command as a process of its own."""
    env = {**os.environ, **({"PYTHONIOENCODING": encoding} if encoding else {})}
    return subprocess.run([sys.executable, "-m", "mission", *map(str, args)], capture_output=True, text=True, timeout=120, env=env, check=False,
                          cwd=Path(mission.__file__).parent.parent)


@pytest.mark.parametrize("name", ["study: empty study", "profile: text in a number column", "profile: empty Parquet file", "module: number in quotes",
                                  "study: operating point beyond the voltage"])
def test_process_ends_with_code_2(name, tmp_path):
    (files, fragments), = [c[1:] for c in CASES if c[0] == name]
    write(tmp_path, files)
    found = command("check", tmp_path / "study.toml")
    assert_refused(found.returncode, found.stdout, found.stderr, fragments)


def test_missing_study_offers_a_near_match(tmp_path, capsys):
    write(tmp_path, {"study.toml": toml_text(study())})
    assert_refused(main(["check", str(tmp_path / "studi.toml")]), *capsys.readouterr(), ("studi.toml", "no such file", "did you mean 'study.toml'?"))


def test_letters_that_the_terminal_lacks_are_no_failure(tmp_path):
    write(tmp_path, {"study.toml": toml_text(study(name="Fähre")), "duty.csv": CSV})
    found = command("check", tmp_path / "study.toml", encoding="ascii")
    assert found.returncode == FINE and "usable" in found.stdout and found.stderr == ""


@pytest.mark.parametrize(("data", "csv"), [(study(), CSV), (direct_study(), DIRECT_CSV)], ids=["machine", "direct"])
def test_good_input_is_said_to_be_usable(data, csv, tmp_path, capsys):
    write(tmp_path, {"study.toml": toml_text(data), "duty.csv": csv})
    assert main(["check", str(tmp_path / "study.toml")]) == FINE
    out, err = capsys.readouterr()
    assert out.startswith("a small study: usable\n") and "the last row closes the mission" in out and err == ""


def test_parts_that_do_not_go_together_are_found_by_check(tmp_path, capsys):
    """Layers deliver their heat late; a sink that takes the losses at once contradicts them. Only the network shows it."""
    from ..study.good_study import module_text

    text = module_text("kite-300")
    start = text.index("[switch.thermal]")
    reference = "sink" if 'reference = "sink"' in text else "case"
    layers = (f'[switch.thermal]\nreference = "{reference}"\n[[switch.thermal.layer]]\nmaterial = "silicon"\nthickness_mm = 0.12\nwidth_mm = 17.0\nlength_mm = 17.0\n'
              '[[switch.thermal.layer]]\nmaterial = "copper"\nthickness_mm = 3.0\n\n')
    end = text.index("[diode.thermal]")
    write(tmp_path, {"study.toml": toml_text(study(module={"file": "mine.toml"}, cooling={"kind": "fixed", "r_th_k_per_w": 0.02, "sink_sees": "chip-losses"})),
                     "duty.csv": CSV, "mine.toml": text[:start] + layers + text[end:]})
    assert_refused(main(["check", str(tmp_path / "study.toml")]), *capsys.readouterr(), ("study.toml: cooling.sink_sees", "'chip-losses' with layers", "'heat-leaving'"))


def test_without_arguments_help(capsys):
    assert main([]) == FINE
    out, err = capsys.readouterr()
    assert out.startswith("usage: mission") and "mission check" in out and "mission run" in out and err == ""


def test_version(capsys):
    with pytest.raises(SystemExit) as caught:
        main(["--version"])
    assert caught.value.code == 0 and mission.__version__ in capsys.readouterr().out


@pytest.mark.parametrize("argv", [["chek", "study.toml"], ["check"], ["run", "study.toml"], ["check", "study.toml", "--fast"]],
                         ids=["unknown command", "no study", "no folder for the results", "unknown option"])
def test_wrong_commands_end_with_code_2(argv, capsys):
    with pytest.raises(SystemExit) as caught:
        main(argv)
    out, err = capsys.readouterr()
    assert caught.value.code == BAD_INPUT and out == "" and "mission: error: " in err.replace("mission check: ", "mission: ").replace("mission run: ", "mission: ")


@pytest.mark.parametrize("out", ["here", "here/deeper"], ids=["is a file", "is below a file"])
def test_results_do_not_go_where_a_file_is(out, tmp_path, capsys):
    write(tmp_path, {"study.toml": toml_text(study()), "duty.csv": CSV, "here": "something dear"})
    code = main(["run", str(tmp_path / "study.toml"), "--out", str(tmp_path / out), "--quiet"])
    printed, err = capsys.readouterr()
    assert code == BAD_INPUT and printed == "" and err.startswith("mission: --out: found ") and "allowed: a folder" in err and err.count("\n") == 1
    assert (tmp_path / "here").read_text(encoding="utf-8") == "something dear"
