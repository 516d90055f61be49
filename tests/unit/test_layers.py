"""The layers and their direction, read from the imports."""

import ast
from pathlib import Path

import pytest

import auditd

ROOT = Path(auditd.__file__).parent
LAYERS = (
    ("errors", "bundled", "formula"),
    ("records",),
    ("plan", "plan_reading"),
    ("stats", "sequential"),
    ("read",),
    ("drafting",),
    ("landing",),
    ("store",),
    ("series",),
    ("simulate",),
    ("checks",),
    ("verdicts",),
    ("evidence",),
    ("schedule",),
    ("alerts", "notify", "service"),
    ("report",),
    ("pipeline",),
    ("daemon", "collector"),
    ("cli",),
    ("__main__",),
)
RANK = {name: rank for rank, names in enumerate(LAYERS) for name in names}
ARRAYS_ONLY = {
    "stats": {"errors", "stats"},
    "sequential": {"errors", "sequential"},
    "evidence": {"errors", "stats", "evidence"},
    "checks": {"errors", "records", "plan", "series", "stats", "sequential", "checks", "formula"},
}
HEAVY = {"scipy", "statsmodels", "matplotlib"}


def layer_of(path):
    """Return the layer that a module of the package belongs to."""
    return path.relative_to(ROOT).parts[0].removesuffix(".py")


def imported(path, *, top_level_only=False):
    """Return the dotted names that a module imports."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    nodes = tree.body if top_level_only else ast.walk(tree)
    for node in nodes:
        if isinstance(node, ast.Import):
            yield from (name.name for name in node.names)
        elif isinstance(node, ast.ImportFrom):
            yield node.module


def modules():
    return sorted(
        path
        for path in ROOT.rglob("*.py")
        if path.name != "__init__.py" or path.parent != ROOT
        if "_bundled" not in path.parts
    )


@pytest.mark.parametrize("path", modules(), ids=lambda path: str(path.relative_to(ROOT)))
def test_a_module_imports_no_later_layer(path):
    """Imports point one way, down the list of layers."""
    own = layer_of(path)
    for name in imported(path):
        parts = name.split(".")
        if parts[0] == "auditd" and len(parts) > 1:
            assert RANK[parts[1]] <= RANK[own], f"{path.name} of {own} imports {name}"


@pytest.mark.parametrize("layer", sorted(ARRAYS_ONLY))
def test_layers_that_see_arrays_only_import_nothing_else(layer):
    """Statistics, audit and evidence know neither store, plan nor clock; checks never see the store."""
    for path in sorted((ROOT / layer).rglob("*.py")):
        of = {name.split(".")[1] for name in imported(path) if name.startswith("auditd.")}
        assert of <= ARRAYS_ONLY[layer], f"{path.name} imports {of - ARRAYS_ONLY[layer]}"


def test_query_commands_import_nothing_heavy(tmp_path):
    """A query answers without scipy, statsmodels or matplotlib being loaded."""
    import subprocess
    import sys

    code = (
        "import sys\n"
        "from auditd.cli.main import run_code\n"
        "import auditd.pipeline.asking, auditd.pipeline.campaign, auditd.pipeline.showing\n"
        "import auditd.pipeline.stored_evidence\n"
        "run_code(['--plan', 'none.toml', 'status'])\n"
        f"print(sorted({{name.split('.')[0] for name in sys.modules}} & {HEAVY!r}))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], cwd=tmp_path, capture_output=True, text=True, check=True
    )
    assert done.stdout.strip() == "[]", done.stdout


def test_no_file_has_grown_too_long():
    """A file can be read in one sitting: 400 lines at most."""
    long = {str(path.relative_to(ROOT)): len(path.read_text().splitlines()) for path in modules()}
    assert {name: n for name, n in long.items() if n > 400} == {}


def test_no_forbidden_names():
    """No utils, helpers, common or manager modules, no class called Warning."""
    for path in modules():
        assert path.stem not in {"utils", "helpers", "common", "manager"}
        tree = ast.parse(path.read_text(encoding="utf-8"))
        assert not any(isinstance(node, ast.ClassDef) and node.name == "Warning" for node in ast.walk(tree))
