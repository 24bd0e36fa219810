"""The command line: ``mission run``, ``check``, ``compare``, ``rating``, ``module``, ``sheet``, ``curve``, ``heat``,
``schema``.

Exit codes: 0 fine, 1 a limit or the target is missed (or no stable temperature
exists), 2 the input cannot be used.
"""

from __future__ import annotations

import argparse
import sys
from pathlib import Path

from . import __version__

FINE, MISSED, BAD_INPUT = 0, 1, 2

_EXAMPLES = """examples:
  mission check profiles/ferry-heron.toml           is everything the study names usable?
  mission run profiles/ferry-heron.toml --out out   run it; look at out/report.html
  mission compare profiles/ferry-heron.toml profiles/ferry-swift.toml --out vs   one duty on two modules, side by side
  mission rating profiles/ferry-hour.toml --out rating   largest current over switching and output frequency
  mission module heron-300 --out heron              curves, energies and loss split of a module in pictures
  mission sheet profiles/swift-400-sheet/sheet.toml --out swift.toml   module file from digitised data-sheet curves
  mission curve profiles/heron-curve/greased.csv --kind cooling --power 400 --against profiles/heron-curve/dry.csv   measured curves: branches
  mission heat profiles/ferry-fan.toml --out heat   the way of the heat: layers, case, sink, coolant
  mission schema                                    what result.json holds

A study is a TOML file; the ones in profiles/ are meant to be copied.
"""


def main(argv=None) -> int:
    """Run the command; returns the exit code."""
    parser = _parser()
    args = parser.parse_args(argv)
    if args.command is None:
        parser.print_help()
        return FINE
    from .errors import InputError, MissionError, NoStableTemperature

    for stream in (sys.stdout, sys.stderr):
        # a terminal that cannot show a letter of a name is no reason to fail
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="backslashreplace")
    try:
        return args.action(args)
    except InputError as err:
        print(f"mission: {err}", file=sys.stderr)
        return BAD_INPUT
    except NoStableTemperature as err:
        print(f"mission: {err}", file=sys.stderr)
        return MISSED
    except MissionError as err:
        print(f"mission: {err}", file=sys.stderr)
        return MISSED
    except KeyboardInterrupt:
        print("mission: stopped before anything was reckoned", file=sys.stderr)
        return 130
    except BrokenPipeError:
        return FINE


def _parser():
    parser = argparse.ArgumentParser(
        prog="mission", description="From the duty of a motor drive to the temperatures and the life of its power module.",
        epilog=_EXAMPLES, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("--version", action="version", version=f"kelvinledger {__version__}")
    commands = parser.add_subparsers(dest="command", metavar="COMMAND")
    run = commands.add_parser("run", help="run a study and write report, figures and tables",
                              description="Run a study. Writes result.json, ledger.csv, cycles.parquet, history.parquet, figures and report.html.")
    run.add_argument("study", type=Path, metavar="STUDY.toml")
    run.add_argument("--out", type=Path, required=True, metavar="DIR", help="folder for the results; made if it is not there")
    run.add_argument("--quiet", action="store_true", help="no progress, no table")
    run.add_argument("--json", action="store_true", help="print result.json instead of the table")
    run.set_defaults(action=_run)
    check = commands.add_parser("check", help="read everything a study names and say whether it can be used",
                                description="Validate a study, its duty file, module and lifetime sets, every row of them. Computes no temperatures.")
    check.add_argument("study", type=Path, metavar="STUDY.toml")
    check.set_defaults(action=_check)
    side = commands.add_parser("compare", help="run several studies of one duty and set them side by side",
                               description="Run studies of the same duty. Writes comparison.csv, comparison.json and a picture. "
                                           "Exit code 1 when one of them misses a limit.")
    side.add_argument("studies", type=Path, nargs="+", metavar="STUDY.toml")
    side.add_argument("--out", type=Path, required=True, metavar="DIR")
    side.add_argument("--names", metavar="A,B,...", help="what to call them; default: their modules")
    side.add_argument("--quiet", action="store_true", help="no progress, no table")
    side.set_defaults(action=_compare)
    rating = commands.add_parser("rating", help="largest current of a study's module on its cooling",
                                 description="Largest phase current that the module carries for ever: over switching frequency, and over output "
                                             "frequency down to standstill at its worst angle. Takes module, inverter, cooling and limits from the study, not its "
                                             "duty; a derating by junction temperature is left out.")
    rating.add_argument("study", type=Path, metavar="STUDY.toml")
    rating.add_argument("--out", type=Path, required=True, metavar="DIR")
    rating.add_argument("--coolant", type=float, metavar="DEGC", help="default: the study's, or the warmest of its duty")
    rating.add_argument("--power-factor", type=float, metavar="COS", help="default 0.85; negative: generating")
    rating.add_argument("--mod-index", type=float, metavar="M", help="modulation index from the base frequency on; default 0.9")
    rating.add_argument("--base-frequency", type=float, metavar="HZ", help="below it the modulation index falls with the output frequency; default 50")
    rating.add_argument("--quiet", action="store_true", help="no table")
    rating.set_defaults(action=_rating)
    module = commands.add_parser("module", help="a module in pictures and figures",
                                 description="On-state curves with their crossing, energies, loss split over current, frequency and modulation.")
    module.add_argument("module", metavar="NAME|FILE.toml", help="a shipped module or a module file")
    module.add_argument("--out", type=Path, metavar="DIR", help="folder for the pictures; without it the text only")
    module.add_argument("--dc-voltage", type=float, metavar="V", help="default: the reference voltage of the energies")
    module.add_argument("--switching-frequency", type=float, metavar="HZ", default=8000.0, help="default 8000")
    module.add_argument("--modulation", default="space-vector", metavar="WORD", help="default space-vector")
    module.set_defaults(action=_module)
    sheet = commands.add_parser("sheet", help="make a module file from digitised data-sheet curves",
                                description="Read a sheet description with its CSV curves, clean them, fit what must be fitted, and write a module file. "
                                            "Every point that was changed is told.")
    sheet.add_argument("sheet", type=Path, metavar="SHEET.toml")
    sheet.add_argument("--out", type=Path, required=True, metavar="MODULE.toml")
    sheet.add_argument("--quiet", action="store_true", help="no report")
    sheet.set_defaults(action=_sheet)
    curve = commands.add_parser("curve", help="branches and junction-to-case resistance from a measured heating or cooling curve",
                                description="Start, impedance, structure function and branches of a record of the chip's temperature after a step of "
                                            "power. With a second record of the same chip on another interface: where the two part, and the branches "
                                            "up to the case.")
    curve.add_argument("record", type=Path, metavar="RECORD.csv")
    curve.add_argument("--kind", required=True, choices=("heating", "cooling"), help="whether the power was switched on or off")
    curve.add_argument("--power", type=float, required=True, metavar="W",
                       help="size of the step; cooling: heating power minus that of the sensing current")
    curve.add_argument("--k-factor", type=float, metavar="MV_PER_K", help="slope of the voltage over temperature, where the record holds voltages")
    curve.add_argument("--units", metavar="TIME,SIGNAL", help="s, ms or us, and degC, K, V or mV; default s,degC (with --k-factor s,V)")
    curve.add_argument("--columns", metavar="TIME,SIGNAL", help="names in the header or numbers from 1; default: the file has these two only")
    curve.add_argument("--delimiter", default=",", metavar="SIGN", help="default ,")
    curve.add_argument("--decimal", default=".", metavar="SIGN", help="default .")
    curve.add_argument("--step-at", type=float, default=0.0, metavar="S", help="time of the step on the record's axis; default 0")
    curve.add_argument("--window", metavar="S,S", help="first and last time of the law of the square root of time; default: looked for")
    curve.add_argument("--start", type=float, metavar="DEGC", help="temperature at the step where it is known, instead of that law")
    curve.add_argument("--chip-area", type=float, metavar="MM2", help="heated area, to hold the early slope against")
    curve.add_argument("--chip-material", default="silicon", metavar="NAME", help="of the shipped materials; default silicon")
    curve.add_argument("--chip-at", type=float, metavar="DEGC", help="temperature that its conductivity is taken at; default: that of the data")
    curve.add_argument("--branches", type=int, metavar="N", help="1 to 8; default: as many as are needed")
    curve.add_argument("--against", type=Path, metavar="OTHER.csv", help="the same chip on another interface, e.g. without grease; same form of file")
    curve.add_argument("--against-power", type=float, metavar="W", help="default: the same power")
    curve.add_argument("--against-start", type=float, metavar="DEGC", help="beside --start")
    curve.add_argument("--case-at", type=float, metavar="K_PER_W", help="resistance to the case where it is known; default: what --against finds")
    curve.add_argument("--reference", choices=("case", "sink"), help="where the temperatures of the record count from, if not from the coolant")
    curve.add_argument("--out", type=Path, metavar="DIR", help="folder for branches, tables and pictures; without it the text only")
    curve.add_argument("--quiet", action="store_true", help="no text")
    curve.set_defaults(action=_curve)
    heat = commands.add_parser("heat", help="the way of the heat of a study, from junctions to coolant",
                               description="Run a study, then follow its heat at rest: temperatures and drops along the way, layers and conductivity over temperature, "
                                           "neighbours, spreading in a plate, reduction of the network, cooling at work. Limits are not judged.")
    heat.add_argument("study", type=Path, metavar="STUDY.toml")
    heat.add_argument("--out", type=Path, required=True, metavar="DIR", help="folder for text, tables and pictures; made if it is not there")
    heat.add_argument("--held", action="store_true", help="the hottest moment of the mission held for ever, not its mean losses")
    heat.add_argument("--quiet", action="store_true", help="no progress, no text")
    heat.set_defaults(action=_heat)
    schema = commands.add_parser("schema", help="print the JSON schema of result.json")
    schema.set_defaults(action=_schema)
    return parser


def _check(args) -> int:
    from .show.text import check_text
    from .study import check_parts, check_rows, load_study

    study = load_study(args.study)
    check_rows(study)
    check_parts(study)
    print(check_text(study))
    return FINE


def _schema(args) -> int:
    import json

    from .show.document import ResultDocument

    print(json.dumps(ResultDocument.model_json_schema(), indent=2))
    return FINE


def _run(args) -> int:
    from .show import ResultFolder
    from .study import check_rows, load_study, run

    study = load_study(args.study)
    check_rows(study)  # before the march, not an hour into it
    folder = ResultFolder(args.out)
    with _Bar(quiet=args.quiet) as bar, folder.cycles(study) as sink:
        result = run(study, progress=bar, keep_cycles=False, cycle_sink=sink)
    paths = folder.write(result)
    if args.json:
        print((args.out / "result.json").read_text(encoding="utf-8"))
    elif not args.quiet:
        from .show.text import result_text

        print(result_text(result))
        print(f"\nwritten to {args.out}: " + ", ".join(p.name for p in paths))
    if not result.complete:
        print(f"mission: stopped at {result.history.duration_s:.6g} s; the files hold the part that was done", file=sys.stderr)
        return 130
    return FINE if result.ok else MISSED


def _compare(args) -> int:
    from .errors import InputError
    from .show.folder import ResultFolder
    from .show.study_figures import comparison_figure, comparison_text
    from .study import check_rows, compare, load_study, run

    if len(args.studies) < 2:
        raise InputError("mission compare", f"{len(args.studies)} study", "two or more studies of one duty")
    names = None if args.names is None else [n.strip() for n in args.names.split(",")]
    if names is not None and len(names) != len(args.studies):
        raise InputError("--names", f"{len(names)} names", f"{len(args.studies)}, one for every study")
    studies = [load_study(path) for path in args.studies]
    for study in studies:
        check_rows(study)
    folder = ResultFolder(args.out)
    results = []
    for number, study in enumerate(studies, 1):
        with _Bar(quiet=args.quiet, before=f"{number}/{len(studies)} ") as bar:
            results.append(run(study, progress=bar, keep_cycles=False))
    found = compare(results, names)
    paths = [folder.text("comparison.csv", found.to_frame().to_csv(index=False, lineterminator="\n")),
             folder.text("comparison.json", found.to_json() + "\n"), *folder.figures({"comparison": comparison_figure(found)})[0]]
    if not args.quiet:
        print(comparison_text(found))
        print(f"\nwritten to {args.out}: " + ", ".join(p.name for p in paths))
    return FINE if all(r.ok for r in results) else MISSED


#: What ``mission rating`` sweeps.
_SWITCHING_HZ = (1000.0, 1500.0, 2000.0, 3000.0, 4000.0, 6000.0, 8000.0, 10000.0, 12000.0, 16000.0, 20000.0, 30000.0)
_OUTPUT_HZ = (0.0, 0.05, 0.1, 0.2, 0.5, 1.0, 2.0, 3.0, 5.0, 10.0, 20.0, 50.0, 100.0)


def _rating(args) -> int:
    from .losses import DEAD_SHARE_MAX
    from .show.folder import ResultFolder
    from .show.study_figures import rating_figure, rating_frame, rating_text
    from .study import RatingBench, load_study, rating_point

    study = load_study(args.study)
    point = rating_point(study, coolant_c=args.coolant, power_factor=args.power_factor, mod_index=args.mod_index, base_frequency_hz=args.base_frequency)
    folder = ResultFolder(args.out)
    bench = RatingBench(study)
    dead = 1e-6 * study.spec.inverter.dead_time_us
    switching = bench.over_switching_frequency(point, [f for f in _SWITCHING_HZ if dead * f <= DEAD_SHARE_MAX])
    output = bench.over_output_frequency(point, _OUTPUT_HZ)
    paths = [folder.text("rating.csv", rating_frame(switching + output).to_csv(index=False, lineterminator="\n")),
             *folder.figures({"rating": rating_figure(switching, output, title=study.module.name)})[0]]
    if not args.quiet:
        print(rating_text(switching, f"{study.module.name}: largest current over switching frequency"))
        print(rating_text(output, f"{study.module.name}: largest current over output frequency"))
        print(f"\nwritten to {args.out}: " + ", ".join(p.name for p in paths))
    return FINE


def _module(args) -> int:
    from .device import load_module
    from .errors import InputError, near_match
    from .losses import Modulation
    from .show.module_figures import module_text, write_module

    words = [m.value for m in Modulation]
    if args.modulation not in words:
        raise InputError("--modulation", f"'{args.modulation}'", "one of " + ", ".join(words), near_match(args.modulation, words))
    for flag, value, most in (("--dc-voltage", args.dc_voltage, 20e3), ("--switching-frequency", args.switching_frequency, 200e3)):
        if value is not None and not 0.0 < value <= most:
            raise InputError(flag, f"{value:g}", f"above 0, at most {most:g}")
    module = load_module(args.module)
    if args.dc_voltage is not None and args.dc_voltage >= module.v_dc_limit_v:
        raise InputError("--dc-voltage", f"{args.dc_voltage:g} V", f"below what the chips block ({module.ratings.v_ces_v:g} V each)")
    print(module_text(module))
    if args.out is not None:
        v_dc = args.dc_voltage if args.dc_voltage is not None else module.switch.turn_on.v_ref_v * (module.levels - 1)
        paths = write_module(module, args.out, modulation=Modulation(args.modulation), dc_voltage_v=v_dc, switching_frequency_hz=args.switching_frequency)
        print(f"\nwritten to {args.out}: " + ", ".join(p.name for p in paths))
    return FINE


def _sheet(args) -> int:
    from .device.sheet import sheet_to_module

    result = sheet_to_module(args.sheet)
    result.write(args.out)
    if not args.quiet:
        print(result.report.to_text())
        print(f"\nwritten: {args.out}")
    return FINE


def _curve(args) -> int:
    from dataclasses import replace

    from .errors import InputError, near_match
    from .show.curve import curve_text, write_curve
    from .thermal import load_materials
    from .thermal.evaluation import evaluate_curve
    from .thermal.measured import read_record

    for flag, value in (("--against-power", args.against_power), ("--against-start", args.against_start)):
        if value is not None and args.against is None:
            raise InputError(flag, f"{value:g} without a second record", "only beside --against")
    materials = load_materials()
    if args.chip_material not in materials:
        raise InputError("--chip-material", f"'{args.chip_material}'", "one of " + ", ".join(sorted(materials)),
                         near_match(args.chip_material, materials))
    material = None
    if args.chip_area is not None:
        material = materials[args.chip_material] if args.chip_at is None else materials[args.chip_material].at(args.chip_at)
    elif args.chip_at is not None:
        raise InputError("--chip-at", f"{args.chip_at:g} without an area", "only beside --chip-area")
    signal = "temperature" if args.k_factor is None else "voltage"
    columns = None
    if args.columns is not None:
        columns = dict(zip(("time", signal), (int(c) if c.isdecimal() else c for c in _pair("--columns", args.columns))))
    form = {"kind": args.kind, "signal": signal, "k_factor_mv_per_k": args.k_factor, "step_at_s": args.step_at, "columns": columns,
            "units": None if args.units is None else _pair("--units", args.units), "delimiter": args.delimiter, "decimal": args.decimal}
    record = read_record(args.record, power_w=args.power, **form)
    other = None
    if args.against is not None:
        other = read_record(args.against, power_w=args.power if args.against_power is None else args.against_power, **form)
        if other.label == record.label:
            record, other = (replace(r, label=f"{p.resolve().parent.name}/{p.name}") for r, p in ((record, args.record), (other, args.against)))
    window = None
    if args.window is not None:
        try:
            window = tuple(float(w) for w in _pair("--window", args.window))
        except ValueError:
            raise InputError("--window", f"'{args.window}'", "two times in seconds with a comma between them") from None
    found = evaluate_curve(
        record, other, window_s=window, start_c=args.start, against_start_c=args.against_start, branches=args.branches, chip_area_mm2=args.chip_area,
        chip_material=material, case_at_k_per_w=args.case_at)
    text = curve_text(found, args.reference)
    paths = [] if args.out is None else write_curve(found, args.out, args.reference)
    if not args.quiet:
        print(text)
        if paths:
            print(f"\nwritten to {args.out}: " + ", ".join(p.name for p in paths))
    return FINE


def _heat(args) -> int:
    from .show.folder import ResultFolder
    from .show.heat import heat_text, write_heat
    from .study import check_rows, load_study, review_heat, run

    study = load_study(args.study)
    check_rows(study)
    ResultFolder(args.out)  # one that cannot be written is told before the march
    with _Bar(quiet=args.quiet) as bar:
        result = run(study, progress=bar, keep_cycles=False)
    if not result.complete:
        raise KeyboardInterrupt
    review = review_heat(result, held=args.held)
    paths = write_heat(review, args.out)
    if not args.quiet:
        print(heat_text(review))
        print(f"\nwritten to {args.out}: " + ", ".join(p.name for p in paths))
    return FINE


def _pair(flag, text) -> tuple[str, str]:
    from .errors import InputError

    parts = [p.strip() for p in text.split(",")]
    if len(parts) != 2 or not all(parts):
        raise InputError(flag, f"'{text}'", "two entries with a comma between them")
    return tuple(parts)


class _Bar:
    """Progress on the terminal; silent when the error stream is not one."""

    def __init__(self, *, quiet: bool, before: str = ""):
        self._before = before
        self._quiet = quiet or not sys.stderr.isatty()
        self._bar = None

    def __enter__(self):
        if not self._quiet:
            from tqdm import tqdm

            self._bar = tqdm(total=100, unit="%", bar_format="{desc} {bar} {percentage:3.0f} % {elapsed}", leave=False, file=sys.stderr)
        return self

    def __call__(self, share, words):
        if self._bar is not None:
            self._bar.set_description_str(self._before + words)
            self._bar.n = round(100 * share)
            self._bar.refresh()

    def __exit__(self, *exc):
        if self._bar is not None:
            self._bar.close()
        return False
