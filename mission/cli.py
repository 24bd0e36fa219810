"""The command line: ``mission run``, ``mission check``, ``mission schema``.

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


class _Bar:
    """Progress on the terminal; silent when the error stream is not one."""

    def __init__(self, *, quiet: bool):
        self._quiet = quiet or not sys.stderr.isatty()
        self._bar = None

    def __enter__(self):
        if not self._quiet:
            from tqdm import tqdm

            self._bar = tqdm(total=100, unit="%", bar_format="{desc} {bar} {percentage:3.0f} % {elapsed}", leave=False, file=sys.stderr)
        return self

    def __call__(self, share, words):
        if self._bar is not None:
            self._bar.set_description_str(words)
            self._bar.n = round(100 * share)
            self._bar.refresh()

    def __exit__(self, *exc):
        if self._bar is not None:
            self._bar.close()
        return False
