"""How the project hangs together: who imports whom, what ``import mission`` costs, what no file may hold."""

import ast
import re
import subprocess
import sys
from pathlib import Path

import pytest

import mission

PACKAGE = Path(mission.__file__).parent
ROOT = PACKAGE.parent

GROUND = ("errors", "checks", "tomlfile")
#: Each stage may import from the ground and from stages before it.
STAGES = ("duty", "machine", "device", "losses", "thermal", "history", "cycles", "lifetime", "study", "show", "cli")
#: (file, module imported, names): a result can save and show itself, so it reaches to the right, on use only.
LAZY_EXCEPTIONS = {
    ("study/run.py", "show", ("save_result",)),
    ("study/run.py", "show.tables", ("result_html",)),
}
FILES = sorted(PACKAGE.rglob("*.py"))


def imports(path):
    """(module below ``mission``, names, inside a function) of every import of the package's own."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    package = path.relative_to(PACKAGE).parent.parts

    def visit(node, inside):
        for child in ast.iter_child_nodes(node):
            deeper = inside or isinstance(child, (ast.FunctionDef, ast.AsyncFunctionDef, ast.Lambda))
            if isinstance(child, ast.ImportFrom):
                names = tuple(a.name for a in child.names)
                if child.level:
                    base = package[: len(package) - child.level + 1]
                    parts = (*base, *(child.module or "").split(".")) if child.module else base
                    yield ".".join(parts), names, inside
                elif child.module and child.module.split(".")[0] == "mission":
                    yield ".".join(child.module.split(".")[1:]), names, inside
            elif isinstance(child, ast.Import):
                for a in child.names:
                    if a.name.split(".")[0] == "mission":
                        yield ".".join(a.name.split(".")[1:]), (), inside
            yield from visit(child, deeper)

    yield from visit(tree, False)


def stage(path):
    """Stage that a file belongs to; None for the package's own door."""
    first = path.relative_to(PACKAGE).parts[0].removesuffix(".py")
    return None if first in ("__init__", "__main__") else first


def heads(module, names):
    """First parts of what is imported; ``from .. import x`` may name stages, or what the package's door holds."""
    if module:
        return {module.split(".")[0]}
    return {n for n in names if n in GROUND + STAGES or (PACKAGE / n).is_dir()}


def test_every_file_belongs_to_a_known_stage():
    assert {stage(p) for p in FILES} - {None} == set(GROUND + STAGES)
    assert len(FILES) > 30


@pytest.mark.parametrize("path", FILES, ids=[p.relative_to(PACKAGE).as_posix() for p in FILES])
def test_imports_go_one_way(path):
    own = stage(path)
    if own is None:
        allowed = {"cli"} if path.name == "__main__.py" else set()
    elif own in GROUND:
        allowed = set(GROUND[: GROUND.index(own) + 1])
    else:
        allowed = set(GROUND) | set(STAGES[: STAGES.index(own) + 1])
    wrong = [(module, names) for module, names, inside in imports(path) if not heads(module, names) <= allowed
             and not (inside and (path.relative_to(PACKAGE).as_posix(), module, names) in LAZY_EXCEPTIONS)]
    assert not wrong, f"{path.relative_to(ROOT)} reaches to the right: {wrong}"


def test_exceptions_are_still_needed():
    found = {(p.relative_to(PACKAGE).as_posix(), module, names) for p in FILES for module, names, inside in imports(p) if inside}
    assert LAZY_EXCEPTIONS <= found


def test_the_rule_sees_wrong_imports(tmp_path, monkeypatch):
    """The finder above must find each way of writing an import."""
    (tmp_path / "duty").mkdir()
    path = tmp_path / "duty" / "x.py"
    path.write_text("from ..study import run\nfrom .. import show, errors\nimport mission.cli\nfrom mission.thermal import y\nfrom .units import z\n"
                    "class A:\n    def f(self):\n        from ..history.march import w\n", encoding="utf-8")
    monkeypatch.setattr(sys.modules[__name__], "PACKAGE", tmp_path)
    found = list(imports(path))
    assert found == [("study", ("run",), False), ("", ("show", "errors"), False), ("cli", (), False), ("thermal", ("y",), False), ("duty.units", ("z",), False),
                     ("history.march", ("w",), True)]
    assert heads(*found[1][:2]) == {"show", "errors"}


HEAVY = ("matplotlib", "numba", "pandas", "pyarrow", "scipy", "ipywidgets", "pydantic", "numpy", "jinja2", "dask")


@pytest.mark.parametrize("code", ["import mission", "import mission, mission.cli", "from mission.cli import main; main([])"], ids=["package", "command", "help"])
def test_import_is_light(code):
    probe = f"{code}\nimport sys\nprint('heavy:', *sorted(set({HEAVY!r}) & set(sys.modules)))"
    found = subprocess.run([sys.executable, "-c", probe], capture_output=True, text=True, check=True, cwd=ROOT, timeout=60)
    assert found.stdout.splitlines()[-1] == "heavy:"


def test_study_stage_does_not_draw_or_compile():
    """Reading and checking a study needs neither pictures nor compiled kernels."""
    probe = "import mission\nmission.load_study('profiles/ferry-hour.toml')\nimport sys\nprint(*sorted({'matplotlib', 'ipywidgets', 'jinja2'} & set(sys.modules)))"
    found = subprocess.run([sys.executable, "-c", probe], capture_output=True, text=True, check=True, cwd=ROOT, timeout=120)
    assert found.stdout.strip() == ""


# put together so that this file does not hold them
FORBIDDEN = {
    "a home folder": "/ho" + r"me/\w", "the administrator's home": "/ro" + r"ot\b/", "a working folder": r"(?<![\w.])/wo" + r"rk/", "a user's folder": "/Us" + r"ers/\w",
    "a drive of Windows": r"\b[A-Z]:\\Us" + r"ers\\", "a package registry": r"(pypi\.o" + r"rg|pythonh" + r"osted\.org)", "an index of packages": r"/sim" + r"ple/?(?=[\s\"']|$)",
}


def tracked_texts():
    found = subprocess.run(["git", "ls-files", "-z", "--cached", "--others", "--exclude-standard"], capture_output=True, cwd=ROOT, check=False)
    if found.returncode:
        pytest.skip("not a checkout")
    for name in sorted(n for n in found.stdout.decode().split("\0") if n):
        path = ROOT / name
        if path.is_file() and b"\0" not in (raw := path.read_bytes())[:4096]:
            yield name, raw.decode("utf-8", errors="replace")


def test_no_file_names_a_machine_or_a_registry():
    hits, seen = [], 0
    for name, text in tracked_texts():
        seen += 1
        for what, pattern in FORBIDDEN.items():
            for m in re.finditer(pattern, text, re.MULTILINE):
                hits.append(f"{name}, line {text.count(chr(10), 0, m.start()) + 1}: {what} ({m[0]!r})")
    assert seen > 50 and not hits, "\n".join(hits[:20])


@pytest.mark.parametrize("text", ["see /ho" + "me/ann/x", "in /ro" + "ot/.cache", "cd /wo" + "rk/main", "https://pypi.o" + "rg/x", "C:\\Us" + "ers\\ann", "http://mirror/sim" + "ple "])
def test_the_scan_sees_what_it_looks_for(text):
    assert any(re.search(p, text, re.MULTILINE) for p in FORBIDDEN.values())
