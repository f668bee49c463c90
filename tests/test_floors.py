"""Holds the floors of the house: which room may know which."""

import ast
import graphlib
import importlib.util
import sys
import tomllib
from collections.abc import Iterator
from pathlib import Path

import pytest

DOOR = "the public door"

LOW = {"errors", "quantities", "rates", "measures"}
BELOW_EVALUATION = LOW | {"model", "states", "chain", "results", "_version"}
BELOW_STUDIES = BELOW_EVALUATION | {"spec", "evaluation"}
BELOW_OUTPUT = BELOW_STUDIES | {"studies"}
BELOW_DOCUMENTS = BELOW_OUTPUT | {"output"}
BELOW_VERBS = BELOW_DOCUMENTS | {"documents"}
BELOW_CLI = BELOW_VERBS | {"verbs", "progress", DOOR}

# A room, and the other rooms that it may know. `_version` holds one text and is known by the door and the roof.
FLOORS: dict[str, set[str]] = {
    "_version": set(),
    "errors": set(),
    "quantities": {"errors"},
    "rates": {"errors", "quantities"},
    "measures": {"errors"},
    "chain": {"errors"},
    "model": LOW,
    "spec": LOW | {"model"},
    "states": LOW | {"model"},
    "results": LOW,
    "evaluation": BELOW_EVALUATION,
    "studies": BELOW_STUDIES,
    "output": BELOW_OUTPUT,
    "documents": BELOW_DOCUMENTS,
    "verbs": BELOW_VERBS,
    "progress": set(),
    DOOR: BELOW_VERBS | {"verbs"},
    "cli": BELOW_CLI,
    "__main__": {"cli"},
}

# Who may know both the mathematics and the rules that make states.
BRIDGES = {"evaluation"}

# The declared package that an import comes with, where the names differ.
INSTALLED_AS = {"yaml": "pyyaml", "docx": "python-docx", "distributed": "dask", "pydantic_core": "pydantic"}


def modules_of(package: Path) -> dict[str, Path]:
    """Every module of the package by its dotted name."""
    found = {}
    for path in sorted(package.rglob("*.py")):
        parts = [package.name, *path.relative_to(package).with_suffix("").parts]
        found[".".join(parts[:-1] if parts[-1] == "__init__" else parts)] = path
    return found


def imports_of(name: str, path: Path, modules: dict[str, Path]) -> Iterator[str]:
    """Every module that a file imports: early, late, for types only, or by `import_module` with a plain text."""
    here = name.split(".") if path.stem == "__init__" else name.split(".")[:-1]
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            start = here[: len(here) - node.level + 1] if node.level else []
            source = ".".join([*start, *([node.module] if node.module else [])])
            for alias in node.names:
                part = f"{source}.{alias.name}"
                yield part if part in modules else source
        elif isinstance(node, ast.Call) and node.args and isinstance(node.args[0], ast.Constant):
            called = node.func.attr if isinstance(node.func, ast.Attribute) else getattr(node.func, "id", "")
            text = node.args[0].value
            if called in {"import_module", "__import__"} and isinstance(text, str):
                anchor = node.args[1].value if len(node.args) > 1 and isinstance(node.args[1], ast.Constant) else None
                yield importlib.util.resolve_name(text, anchor if isinstance(anchor, str) else ".".join(here))


def room_of(module: str) -> str:
    parts = module.split(".")
    return parts[1] if len(parts) > 1 else DOOR


def breaches(package: Path) -> list[str]:
    """Everything in the package that breaks the floors; empty where they hold."""
    modules = modules_of(package)
    own: dict[str, set[str]] = {}
    for name, path in modules.items():
        own[name] = {to for to in imports_of(name, path, modules) if to.split(".")[0] == package.name} - {name}

    found = []
    for name, targets in own.items():
        room = room_of(name)
        if room not in FLOORS:
            found.append(f"{name}: its room has no floor; give it one in tests/test_floors.py")
            continue
        for target in sorted(targets):
            if room_of(target) != room and room_of(target) not in FLOORS[room]:
                found.append(f"{name} imports {target}: {room} may not know {room_of(target)}")
        if room not in BRIDGES and {"chain", "states"} <= {room_of(target) for target in targets}:
            found.append(f"{name} knows both chain and states: only {', '.join(sorted(BRIDGES))} may")
    try:
        graphlib.TopologicalSorter(own).prepare()
    except graphlib.CycleError as error:
        found.append("a circle of imports: " + " <- ".join(error.args[1]))
    return found


def undeclared(package: Path, declared: set[str]) -> list[str]:
    """Imports of packages that are neither the standard library's, nor ours, nor declared."""
    known = set(sys.stdlib_module_names) | {package.name, "__future__"}
    modules = modules_of(package)
    found = []
    for name, path in modules.items():
        for target in sorted({to.split(".")[0] for to in imports_of(name, path, modules)} - known):
            if INSTALLED_AS.get(target, target).replace("_", "-").lower() not in declared:
                found.append(f"{name} imports {target}, which pyproject.toml does not declare")
    return found


def declared_in(checkout: Path) -> set[str]:
    project = tomllib.loads((checkout / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    lines = [*project["dependencies"], *(line for extra in project["optional-dependencies"].values() for line in extra)]
    return {line.split(";")[0].split(">")[0].split("[")[0].strip().lower() for line in lines}


def test_every_room_keeps_its_floor(checkout: Path) -> None:
    package = checkout / "markov"
    assert "markov.errors" in modules_of(package)
    assert breaches(package) == []


def test_every_package_that_is_imported_is_declared(checkout: Path) -> None:
    assert undeclared(checkout / "markov", declared_in(checkout)) == []


def lay(root: Path, files: dict[str, str]) -> Path:
    package = root / "markov"
    for name, text in {"__init__.py": "", **files}.items():
        path = package / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    return package


SOUND = {
    "errors.py": "import enum",
    "quantities.py": "from markov.errors import UsageError",
    "rates.py": "from markov import errors, quantities",
    "chain/__init__.py": "from markov.chain.generator import Generator",
    "chain/generator.py": "import numpy as np\nfrom ..errors import NotReached",
    "model/__init__.py": "from .units import Unit",
    "model/units.py": "from ..rates import Rate",
    "spec/__init__.py": "from markov.model import Unit",
    "states/__init__.py": "from markov.model.units import Unit",
    "evaluation.py": "from markov import chain, states",
    "cli.py": "def main():\n    from markov import evaluation",
    "__main__.py": "from markov.cli import main",
}


def test_a_house_in_order_has_no_breach(tmp_path: Path) -> None:
    assert breaches(lay(tmp_path, SOUND)) == []


@pytest.mark.parametrize(
    ("file", "text", "told"),
    [
        ("chain/dense.py", "from markov.model import Unit", "chain may not know model"),
        ("chain/dense.py", "from markov import states", "chain may not know states"),
        ("chain/dense.py", "import markov.spec", "chain may not know spec"),
        ("chain/dense.py", "from .. import rates", "chain may not know rates"),
        ("chain/deep/dense.py", "from ...model.units import Unit", "chain may not know model"),
        ("states/rules.py", "from ..chain import Generator", "states may not know chain"),
        ("model/system.py", "def f():\n    from markov.chain.generator import Generator", "model may not know chain"),
        ("spec/text.py", "if TYPE_CHECKING:\n    from markov.chain import Generator", "spec may not know chain"),
        ("spec/text.py", "import markov.states", "spec may not know states"),
        ("model/system.py", "from markov.spec import read", "model may not know spec"),
        ("rates.py", "from markov.model import Unit", "rates may not know model"),
        ("measures.py", "from markov.rates import Rate", "measures may not know rates"),
        ("errors.py", "import importlib\nimportlib.import_module('markov.rates')", "errors may not know rates"),
        ("model/system.py", "import_module('..chain', 'markov.model')", "model may not know chain"),
        ("model/system.py", "import_module('..chain', __package__)", "model may not know chain"),
        ("evaluation.py", "from markov.output import draw", "evaluation may not know output"),
        ("output/plots.py", "from markov.cli import main", "output may not know cli"),
        ("output/plots.py", "from markov import solve", f"output may not know {DOOR}"),
        ("output/plots.py", "from markov.documents.tree import Figure", "output may not know documents"),
        ("documents/tables.py", "from markov import chain, states", "knows both chain and states"),
        ("documents/tables.py", "from markov.verbs import solve", "documents may not know verbs"),
        ("studies/sweeps.py", "from markov import chain, states", "knows both chain and states"),
        ("results.py", "def f():\n    from markov.output import table", "results may not know output"),
        ("utils.py", "", "has no floor"),
        ("model/units.py", "from markov.model import Unit", "a circle of imports"),
        ("chain/generator.py", "def f():\n    from markov.chain import Generator", "a circle of imports"),
    ],
)
def test_a_breach_is_told(tmp_path: Path, file: str, text: str, told: str) -> None:
    found = breaches(lay(tmp_path, SOUND | {file: text}))
    assert any(told in line for line in found), found


def test_an_undeclared_package_is_told(tmp_path: Path) -> None:
    package = lay(tmp_path, SOUND | {"spec/text.py": "import yaml\ndef f():\n    import pandas"})
    assert undeclared(package, {"numpy", "pyyaml"}) == [
        "markov.spec.text imports pandas, which pyproject.toml does not declare"
    ]
