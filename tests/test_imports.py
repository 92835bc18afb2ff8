"""Imports go one way, heavy libraries stay where they belong, and no file grows without end."""

import ast
from dataclasses import dataclass
from pathlib import Path

import pytest

import geoshape

ROOT = Path(geoshape.__file__).parent
MAX_LINES = 420

LEAVES = {"errors", "options", "columns"}

ALLOWED = {
    # stage: stages it may import from, besides its own modules
    "errors": set(),
    "options": {"errors"},
    "columns": {"errors", "options"},
    "rings": {"errors"},
    "geometry": {"rings", *LEAVES},
    "formulas": {"rings", *LEAVES},
    "ground": {"rings", "geometry", "formulas", *LEAVES},
    "measuring": {"ground", "geometry", "formulas", "rings", *LEAVES},
    "inspection": {"measuring", "ground", "geometry", "formulas", "rings", "layers", "pool", *LEAVES},
    "frames": {"measuring", "ground", "geometry", "rings", "decide", *LEAVES},
    "layers": {"geometry", "rings", *LEAVES},
    "pool": {"errors"},
    "decide": {"formulas", "rings", "geometry", *LEAVES},
    "task": {"measuring", "ground", "geometry", *LEAVES},
    "run": {"task", "measuring", "ground", "geometry", "rings", "layers", "pool", "decide", *LEAVES},
    "acting": {
        "task",
        "measuring",
        "ground",
        "geometry",
        "formulas",
        "rings",
        "layers",
        "pool",
        "decide",
        "report",
        *LEAVES,
    },
    "frame_decisions": {"frames", "acting", "measuring", "ground", "geometry", "rings", "layers", "decide", *LEAVES},
    "report": {"decide", "measuring", "ground", "geometry", "formulas", "rings", *LEAVES},
    "cli": {"run", "acting", "decide", "report", "measuring", "inspection", "layers", "pool", *LEAVES},
    # The package re-exports its public names.
    "geoshape": {"frames", "frame_decisions", "run", "acting", "decide", "report", "inspection", *LEAVES},
    "__main__": {"cli"},
}

FORBIDDEN = {
    # stage: libraries it must not import
    "formulas": {"shapely", "pandas", "geopandas", "pyproj", "pyogrio", "pyarrow", "click", "rich"},
    "rings": {"shapely", "pandas", "geopandas", "pyproj", "pyogrio", "pyarrow", "scipy", "click", "rich"},
    "geometry": {"pandas", "geopandas", "pyproj", "pyogrio", "pyarrow"},
    "ground": {"pandas", "geopandas", "pyogrio", "pyarrow"},
    "measuring": {"pandas", "geopandas", "pyproj", "pyogrio", "pyarrow"},
    "run": {"pandas", "geopandas"},
    "pool": {"pandas", "geopandas", "pyproj", "pyogrio"},
    "decide": {"pyogrio", "rich", "click"},
    "errors": {"numpy", "shapely", "pandas", "pyproj", "pyogrio", "pyarrow"},
    "options": {"numpy", "shapely", "pandas", "pyproj", "pyogrio", "pyarrow"},
    "columns": {"numpy", "shapely", "pandas", "pyproj", "pyogrio", "pyarrow"},
}

ONLY_IN_CLI = {"click", "rich"}

ONLY_IN = {
    # library: the stages that may import it
    "pyogrio": {"layers"},
    "pyproj": {"ground", "layers", "inspection", "cli", "report", "run", "acting"},
    "bokeh": {"report"},
    "jinja2": {"report"},
}

UNNAMED = {"utils", "util", "helpers", "helper", "core", "base", "common", "misc"}


@dataclass(frozen=True)
class Import:
    """An import as it stands in a file."""

    path: Path
    line: int
    module: str
    is_local: bool

    @property
    def place(self):
        return f"{self.path.relative_to(ROOT.parent)}:{self.line} imports {self.module}"


def stage_of(path, root=ROOT):
    """The folder or module right under the package; the package itself for its __init__."""
    first = path.relative_to(root).parts[0].removesuffix(".py")
    return "geoshape" if first == "__init__" else first


def imports_of(path, source=None):
    """List what a file imports, at its top or inside functions, with relative names made absolute."""
    tree = ast.parse(source if source is not None else path.read_text(encoding="utf-8"))
    parents = {child: parent for parent in ast.walk(tree) for child in ast.iter_child_nodes(parent)}

    def is_local(node):
        while node in parents:
            node = parents[node]
            if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda):
                return True
        return False

    package = ["geoshape", *path.relative_to(ROOT).parts[:-1]]
    found = []
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            # What is meant by a plain "import geoshape" shows where its attributes are taken.
            names = [alias.name for alias in node.names if alias.name != "geoshape"]
            found += [Import(path, node.lineno, name, is_local(node)) for name in names]
        elif isinstance(node, ast.Attribute) and isinstance(node.value, ast.Name) and node.value.id == "geoshape":
            found.append(Import(path, node.lineno, f"geoshape.{node.attr}", is_local(node)))
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                base = ".".join(package[: len(package) - node.level + 1] + ([base] if base else []))
            names = [f"{base}.{alias.name}" for alias in node.names] if base == "geoshape" else [base]
            found += [Import(path, node.lineno, name, is_local(node)) for name in names]
    return found


def target_of(module):
    """The stage that a module of the package belongs to."""
    parts = module.split(".")
    if len(parts) < 2 or not ((ROOT / parts[1]).is_dir() or (ROOT / f"{parts[1]}.py").exists()):
        return "geoshape"
    return parts[1]


FILES = sorted(ROOT.rglob("*.py"))
IMPORTS = [found for path in FILES for found in imports_of(path)]


def breaches(imports):
    """Describe the imports that go against the tables."""
    found = []
    for item in imports:
        stage, library = stage_of(item.path), item.module.split(".")[0]
        if item.module == "geoshape.__version__":
            continue
        if library == "geoshape":
            target = target_of(item.module)
            if target not in {stage, *ALLOWED[stage]}:
                found.append(f"{item.place}: {stage} may not use {target}")
            continue
        if library in FORBIDDEN.get(stage, set()):
            found.append(f"{item.place}: {stage} may not use {library}")
        if library in ONLY_IN_CLI and stage not in {"cli", "__main__"}:
            found.append(f"{item.place}: {library} belongs to cli")
        if stage not in ONLY_IN.get(library, {stage}):
            found.append(f"{item.place}: {library} belongs to {', '.join(sorted(ONLY_IN[library]))}")
    return found


def test_every_stage_is_in_the_table():
    assert {stage_of(path) for path in FILES} <= set(ALLOWED)


def test_table_has_no_circles():
    """Stages can be put in an order in which each uses only those before it."""
    left = {stage: set(targets) - {stage, "geoshape"} for stage, targets in ALLOWED.items()}
    while left:
        free = {stage for stage, targets in left.items() if not targets & set(left)}
        assert free, f"circle among {sorted(left)}"
        left = {stage: targets for stage, targets in left.items() if stage not in free}


def test_imports_go_one_way():
    assert breaches(IMPORTS) == []


def test_modules_of_a_stage_do_not_import_in_circles():
    graph = {}
    for item in IMPORTS:
        if item.module.startswith("geoshape.") and not item.is_local and stage_of(item.path) != "geoshape":
            name = ".".join(("geoshape", *item.path.relative_to(ROOT).with_suffix("").parts))
            graph.setdefault(name, set()).add(item.module)
    left = dict(graph)
    while left:
        free = {name for name, targets in left.items() if not targets & set(left)}
        assert free, f"circle among {sorted(left)}"
        left = {name: targets for name, targets in left.items() if name not in free}


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_files_are_named_and_of_a_readable_length(path):
    assert path.stem not in UNNAMED
    assert path.parent.name not in UNNAMED
    assert len(path.read_text(encoding="utf-8").splitlines()) <= MAX_LINES


@pytest.mark.parametrize(
    ("where", "source", "complaint"),
    [
        ("formulas/moments.py", "import shapely", "formulas may not use shapely"),
        ("formulas/moments.py", "def f():\n    from pyproj import CRS", "formulas may not use pyproj"),
        ("formulas/moments.py", "from geoshape.geometry import ring_batch", "formulas may not use geometry"),
        ("formulas/moments.py", "from geoshape import geometry", "formulas may not use geometry"),
        ("formulas/moments.py", "from ..ground import plane", "formulas may not use ground"),
        ("rings.py", "from geoshape.formulas import moments", "rings may not use formulas"),
        ("measuring.py", "from geoshape.layers import read", "measuring may not use layers"),
        ("measuring.py", "import geoshape.run", "measuring may not use run"),
        ("run.py", "from rich.console import Console", "rich belongs to cli"),
        ("run.py", "import click", "click belongs to cli"),
        ("decide/flag.py", "from geoshape.layers import read", "decide may not use layers"),
        ("options.py", "from geoshape.columns import Column", "options may not use columns"),
        ("layers/lineage.py", "import geoshape\ngeoshape.measure_file()", "layers may not use geoshape"),
        ("errors.py", "from geoshape import options", "errors may not use options"),
        ("run.py", "from geoshape.cli.main import main", "run may not use cli"),
    ],
)
def test_a_breach_is_found(where, source, complaint):
    found = breaches(imports_of(ROOT / where, source))
    assert any(complaint in text for text in found), found


@pytest.mark.parametrize(
    ("where", "source"),
    [
        ("formulas/moments.py", "import numpy as np\nfrom geoshape.rings import RingBatch\nfrom . import axes"),
        ("layers/lineage.py", "import geoshape\nprint(geoshape.__version__)"),
        ("cli/measure.py", "import click\nfrom geoshape.run import measure_file"),
        ("measuring.py", "from geoshape.formulas import moments\nimport shapely"),
    ],
)
def test_what_is_allowed_is_no_breach(where, source):
    assert breaches(imports_of(ROOT / where, source)) == []
