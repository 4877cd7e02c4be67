"""The order of the layers, the fences around third parties, and what importing costs."""

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import bayesdesign

ROOT = Path(bayesdesign.__file__).parent

# A layer may import itself and the layers to its left; what stands together in one tuple may not import
# each other.
ORDER = (
    ("core",),
    ("prior", "truth"),
    ("design",),
    ("rule",),
    ("study",),
    ("result",),
    ("table",),
    ("measures",),
    ("joint",),
    ("messages", "verdict"),
    ("evaluate",),
    ("size", "interpret"),
    ("render",),
    ("cli",),
    ("__main__", "__init__"),
)
RANK = {name: rank for rank, names in enumerate(ORDER) for name in names}
# The joint table and the numbers read from it are a layer of their own below the measures, which read the
# table; the routes
# that fill it are above them, because they refine until the readings stand still.
OWN_LAYER = {"joint.table": "table", "joint.numbers": "table"}
# render needs only what stands in a result and how faults are raised
NARROW = {"render": {"core", "result", "study"}, "result": {"study"}}

FENCES = {  # third party: layers that may import it when they are loaded, layers that may inside functions
    "pydantic": ({"study"}, {"study"}),
    "click": ({"cli"}, {"cli"}),
    "rich": (set(), {"render", "cli"}),
    "pymc": (set(), {"joint", "interpret"}),
    "pytensor": (set(), {"joint", "interpret", "prior", "design"}),
    "nutpie": (set(), {"joint", "interpret"}),
    "arviz": (set(), {"joint", "interpret", "result"}),
    "xarray": (set(), {"joint", "result", "table", "interpret"}),
    "pandas": (set(), set()),
}
HEAVY = ("scipy", "numpy", "xarray", "rich", "pymc", "pytensor", "arviz", "nutpie", "pydantic", "pandas")


def layer(module):
    """`bayesdesign.joint.table` -> its layer."""
    parts = module.split(".")[1:]
    return OWN_LAYER.get(".".join(parts[:2]), parts[0] if parts else "__init__")


def name_of(path, root):
    parts = ["bayesdesign", *path.relative_to(root).with_suffix("").parts]
    return ".".join(parts[:-1] if parts[-1] == "__init__" and len(parts) > 2 else parts)


def imports(path):
    """(imported module, whether it happens when the file is loaded), without those for type checkers only."""
    found = []

    def walk(node, loading):
        for child in ast.iter_child_nodes(node):
            if isinstance(child, ast.If) and "TYPE_CHECKING" in ast.unparse(child.test):
                for other in child.orelse:
                    walk(other, loading)
                continue
            if isinstance(child, ast.Import):
                found.extend((alias.name, loading) for alias in child.names)
            elif isinstance(child, ast.ImportFrom):
                assert child.level == 0, f"{path}: relative import"
                found.append((child.module, loading))
            walk(
                child, loading and not isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda)
            )

    walk(ast.parse(path.read_text(encoding="utf-8")), True)
    return found


def violations(root):
    """Imports at load time that point up or sideways, and third parties outside their fences."""
    wrong = []
    for path in sorted(root.rglob("*.py")):
        own = name_of(path, root)
        here = layer(own)
        for module, loading in imports(path):
            top = module.split(".")[0]
            if top == "bayesdesign" and loading and here != "__init__":
                there = layer(module)
                allowed = here == there or RANK.get(there, 99) < RANK.get(here, -1)
                if not allowed or (here in NARROW and there not in NARROW[here] | {here}):
                    wrong.append(f"{own} imports {module}")
            elif top in FENCES and here not in FENCES[top][0 if loading else 1]:
                wrong.append(f"{own} imports {module}")
    return wrong


def test_layers_and_fences():
    assert violations(ROOT) == []


@pytest.mark.parametrize(
    ("file", "line"),
    [
        ("prior/x.py", "from bayesdesign.design.base import Design"),
        ("joint/table.py", "from bayesdesign.joint.integration import integrate"),
        ("measures/x.py", "from bayesdesign.joint.refined import integrated"),
        ("render/x.py", "from bayesdesign.joint.table import Joint"),
        ("render/x.py", "from bayesdesign.evaluate import evaluate"),
        ("size.py", "from bayesdesign.interpret import interpret"),
        ("core/x.py", "from bayesdesign.result import Result"),
        ("joint/x.py", "import pymc as pm"),
        ("render/x.py", "import rich.console"),
        ("messages/x.py", "def f():\n    import click"),
        ("rule/x.py", "class A:\n    import pydantic"),
    ],
)
def test_planted_violation_is_caught(tmp_path, file, line):
    planted = tmp_path / file
    planted.parent.mkdir(exist_ok=True)
    planted.write_text(line + "\n")
    assert len(violations(tmp_path)) == 1


@pytest.mark.parametrize(
    ("file", "line"),
    [
        ("design/x.py", "from bayesdesign.prior.base import Distribution"),
        ("joint/x.py", "def f():\n    import pymc as pm"),
        (
            "prior/x.py",
            "import typing as t\nif t.TYPE_CHECKING:\n    from bayesdesign.study.study import Study",
        ),
    ],
)
def test_what_is_allowed_is_not_called_a_violation(tmp_path, file, line):
    planted = tmp_path / file
    planted.parent.mkdir(exist_ok=True)
    planted.write_text(line + "\n")
    assert violations(tmp_path) == []


def test_every_module_belongs_to_a_layer():
    assert {layer(name_of(path, ROOT)) for path in ROOT.rglob("*.py")} <= set(RANK)


def test_files_stay_readable():
    lengths = {str(path): len(path.read_text(encoding="utf-8").splitlines()) for path in ROOT.rglob("*.py")}
    assert {path: n for path, n in lengths.items() if n > 400} == {}


def test_public_names():
    tree = ast.parse((ROOT / "__init__.py").read_text(encoding="utf-8"))
    block = next(n for n in tree.body if isinstance(n, ast.If) and ast.unparse(n.test) == "TYPE_CHECKING")
    typed = {a.asname for n in block.body if isinstance(n, ast.ImportFrom) for a in n.names} | {"__version__"}
    assert typed == set(bayesdesign.__all__) == set(dir(bayesdesign))
    assert sorted(bayesdesign.__all__) == bayesdesign.__all__


@pytest.mark.parametrize("name", bayesdesign.__all__)
def test_public_name_can_be_used(name):
    assert getattr(bayesdesign, name) is not None


def test_unknown_name():
    with pytest.raises(AttributeError, match="no attribute 'assess'"):
        bayesdesign.assess  # noqa: B018


def run(code):
    return subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60
    ).stdout.strip()


@pytest.mark.parametrize("first", ["bayesdesign.evaluate", "bayesdesign.size", "bayesdesign.interpret"])
def test_function_wins_over_the_module_of_its_name(first):
    name = first.split(".")[1]
    code = f"import {first}, bayesdesign as bd; from {first} import {name} as f; "
    code += f"print(callable(f), bd.{name} is f)"
    assert run(code) == "True True"


def test_import_is_free():
    assert run(f"import sys, bayesdesign; print([m for m in {HEAVY} if m in sys.modules])") == "[]"


@pytest.mark.parametrize("flag", ["--help", "--version"])
def test_help_loads_nothing_heavy(flag):
    code = f"import sys; from bayesdesign.cli import main; main(['{flag}']); "
    code += f"print([m for m in {HEAVY} if m in sys.modules])"
    assert run(code).splitlines()[-1] == "[]"
