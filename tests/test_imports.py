"""Which part may import which: parsed from the sources, so that an import inside a function counts too."""

import ast
import re
import subprocess
import sys
import tomllib
from fnmatch import fnmatch
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
SUITE = sorted(path for top in ("catalog", "study") for path in (ROOT / top).rglob("*.py"))
OWN = ("catalog", "study")
HEAVY = ("numpy", "scipy", "duckdb", "SALib", "altair", "pandas", "pydantic", "matplotlib", "vl_convert")
READS_CATALOG = ("study.commands.*", "study.runner", "study.plain_work", "study.sheet*", "study.dossier")
ERRORS = "catalog.errors"
TOML_TEXT = "catalog.toml_text"  # reads hostile text safely; knows nothing of the catalog


def module_name(path: Path) -> str:
    parts = path.relative_to(ROOT).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


MODULES = {module_name(path): path for path in SUITE}


def imports_in(text: str, module: str, *, package: bool) -> set[str]:
    """Full names of what a source imports; `from a import b` gives a.b where that is our module, else a."""
    found = set()
    for node in ast.walk(ast.parse(text)):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                above = module.split(".")[: None if package and node.level == 1 else -(node.level - package)]
                base = ".".join([*above, base]).rstrip(".")
            found |= {f"{base}.{a.name}" if f"{base}.{a.name}" in MODULES else base for a in node.names}
    return found


IMPORTS = {
    module: imports_in(path.read_text(encoding="utf-8"), module, package=path.name == "__init__.py")
    for module, path in MODULES.items()
}


def within(name: str, *packages: str) -> bool:
    return any(name == package or name.startswith(package + ".") for package in packages)


def of(*packages: str) -> dict[str, set[str]]:
    """Imports of every module of the packages; they have to be there."""
    found = {module: names for module, names in IMPORTS.items() if within(module, *packages)}
    assert found
    return found


def ours(names: set[str]) -> set[str]:
    return {name for name in names if within(name, *OWN)}


def breaks(packages, allowed) -> list[str]:
    """Imports from our own packages that are not `allowed` (name → bool)."""
    return [f"{m} imports {n}" for m, names in of(*packages).items() for n in ours(names) if not allowed(n)]


def test_relative_and_inner_imports_are_seen():
    text = "def f():\n    from . import runner\n    from .kernel import rows\nimport scipy.stats as s\n"
    found = {"study.runner", "study.kernel.rows", "scipy.stats"}
    assert imports_in(text, "study.tasks", package=False) == found
    assert imports_in("from . import rows", "study.kernel", package=True) == {"study.kernel.rows"}


def test_kernel_imports_only_arrays_and_itself():
    allowed = {"numpy", "scipy", *sys.stdlib_module_names}
    for module, names in of("study.kernel").items():
        for name in names:
            assert within(name, "study.kernel") or name.split(".")[0] in allowed, f"{module} imports {name}"


ZONES = ("study.zones", "study.zone_field")
CORNER = ("study.assembly", "study.parts")


@pytest.mark.parametrize(
    ("part", "below"),
    [
        (("study.measures",), ("study.kernel",)),
        (CORNER, ("study.kernel", "study.measures")),
        (ZONES, ()),
        (("study.methods",), ZONES),
    ],
)
def test_lower_parts_import_only_what_lies_below_them(part, below):
    assert breaks(part, lambda name: within(name, *part, *below)) == []


@pytest.mark.parametrize("above", ["study.response", "study.tasks", "study.runner", "study.methods.sobol"])
def test_build_and_alignment_know_nothing_of_what_uses_them(above):
    assert breaks(("study.build", "study.alignment"), lambda name: not within(name, above)) == []


def test_only_the_outer_ring_imports_the_catalog():
    for module, names in of("study").items():
        if any(fnmatch(module, pattern) for pattern in READS_CATALOG):
            continue
        reached = {name for name in names if within(name, "catalog")} - {ERRORS, TOML_TEXT}
        assert not reached, f"{module} imports {', '.join(sorted(reached))}"


def test_catalog_imports_nothing_of_study():
    assert breaks(("catalog",), lambda name: within(name, "catalog")) == []


def test_charts_import_no_catalog_and_no_kernel():
    assert breaks(("study.charts",), lambda name: within(name, "study.charts", ERRORS)) == []


def test_duckdb_is_opened_in_one_place():
    opens = [m for m, path in MODULES.items() if "duckdb.connect(" in path.read_text(encoding="utf-8")]
    assert set(opens) <= {"catalog.store", "catalog.migrate"}


def test_commands_import_nothing_heavy_before_they_run():
    for module, path in MODULES.items():
        if within(module, "study.commands"):
            body = ast.parse(path.read_text(encoding="utf-8")).body
            top = ast.Module([node for node in body if isinstance(node, ast.Import | ast.ImportFrom)], [])
            names = imports_in(ast.unparse(top), module, package=path.name == "__init__.py")
            assert not {name.split(".")[0] for name in names} & set(HEAVY), module


def test_a_fresh_start_of_the_command_loads_nothing_heavy():
    code = f"import sys, study.commands; print(*sorted(set({HEAVY!r}) & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True)
    assert done.stdout.strip() == ""


def test_declared_dependencies_are_those_imported():
    """Nothing is installed that nothing uses, and nothing used is left to come along with something else."""
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    extras = [line for lines in project["optional-dependencies"].values() for line in lines]
    names = {"vl-convert-python": "vl_convert"}
    declared, optional = (
        {names.get(name, name) for name in (re.match(r"[\w-]+", line)[0] for line in lines)}
        for lines in (project["dependencies"], extras)
    )
    used = {name.split(".")[0] for found in IMPORTS.values() for name in found} - set(sys.stdlib_module_names) - set(OWN)
    assert used <= declared | optional, used - declared - optional
    assert declared - used <= {"SALib"}, declared - used  # the outside judge of our sampling methods, at hand where results are doubted
    assert all(re.search(r">=\d", line) for line in project["dependencies"] + extras)


def test_nothing_that_runs_what_it_reads_is_used():
    forbidden = ("pickle", "marshal", "shelve", "dill", "cloudpickle", "joblib")
    for module, names in IMPORTS.items():
        assert not {name for name in names if within(name, *forbidden)}, module
    for module, path in MODULES.items():
        calls = {node.func.id for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))) if isinstance(node, ast.Call) and isinstance(node.func, ast.Name)}
        assert not calls & {"eval", "exec", "compile", "__import__"}, module
