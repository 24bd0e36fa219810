"""The files of a result: each is written whole or not at all."""

from __future__ import annotations

import contextlib
import os
from datetime import date
from pathlib import Path

from ..cycles import CycleWriter
from ..errors import InputError


class ResultFolder:
    """A folder that takes result.json, ledger.csv, cycles.parquet, history.parquet, figures and report.html.

    Parameters
    ----------
    path : path-like
        Made if it is not there.

    Raises
    ------
    InputError
        The path is a file, or cannot be written.
    """

    def __init__(self, path):
        self.path = Path(path)
        try:
            self.path.mkdir(parents=True, exist_ok=True)
        except FileExistsError:
            raise InputError("--out", f"'{path}', which is a file", "a folder") from None
        except OSError as err:
            raise InputError("--out", f"'{path}', which cannot be made ({err.strerror})", "a folder that can be written") from None
        if not os.access(self.path, os.W_OK):
            raise InputError("--out", f"'{path}', which cannot be written", "a folder that can be written")

    @contextlib.contextmanager
    def cycles(self, study):
        """Context with a sink for counted cycles, which become cycles.parquet."""
        chips = study.module.chip_names()
        with CycleWriter(self.path / "cycles.parquet", chips + tuple(f"case {c}" for c in chips), study.profile.phases) as writer:
            yield writer

    def write(self, result) -> list[Path]:
        """Write everything but the cycles; returns all paths."""
        from .document import build_document
        from .figures import all_figures
        from .report import report_html
        from .tables import ledger_frame

        document = build_document(result)
        written = [self.text("result.json", document.model_dump_json(indent=1) + "\n")]
        written.append(self.text("ledger.csv", ledger_frame(result).to_csv(index=False, lineterminator="\n")))
        if (self.path / "cycles.parquet").exists():
            written.append(self.path / "cycles.parquet")
        written.append(self.whole("history.parquet", lambda p: result.history.to_frame().to_parquet(p, index=False)))
        figures = all_figures(result)
        paths, drawn = self.figures(figures)
        written += paths
        page = report_html(result, figures, document.model_dump(mode="json"), date=date.today().isoformat(), drawn_svg=drawn)
        written.append(self.text("report.html", page))
        return written

    def figures(self, figures) -> tuple[list[Path], dict[str, str]]:
        """Write figures as PNG and SVG; returns the paths, and the SVG text of every figure."""
        from .report import svg_text

        written, drawn = [], {}
        for name, figure in figures.items():
            # lay out once, not anew each time that a figure is drawn
            figure.draw_without_rendering()
            figure.set_layout_engine(None)
            written.append(self.whole(f"{name}.png", lambda p, f=figure: f.savefig(p, format="png", dpi=150)))
            drawn[name] = svg_text(figure, name)
            written.append(self.text(f"{name}.svg", drawn[name]))
        return written, drawn

    def text(self, name, text) -> Path:
        """Write a text file."""
        return self.whole(name, lambda p: p.write_text(text, encoding="utf-8"))

    def whole(self, name, write) -> Path:
        """Write a file with ``write(path)``, whole or not at all."""
        path = self.path / name
        part = path.with_name(path.name + ".part")
        try:
            write(part)
            os.replace(part, path)
        finally:
            part.unlink(missing_ok=True)
        return path


def save_result(result, folder) -> list[Path]:
    """Write a result, its cycles included if they were kept, into ``folder``; returns the paths."""
    target = ResultFolder(folder)
    if result.cycles is not None:
        with target.cycles(result.study) as sink:
            sink(result.cycles)
    return target.write(result)
