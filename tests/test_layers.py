"""The arrows of the house: who may import whom, walked over the source."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]

# (folder or file, what of ours and of others it may import); the standard library is free
ALLOWED = {
    "server/stagesum_server/engine": {"numpy", "scipy.special", "stagesum_schemas.records", "stagesum_server.engine"},
    "server/stagesum_server/intake": {
        "numpy",
        "scipy.special",
        "stagesum_schemas.records",
        "stagesum_schemas.units",
        "stagesum_schemas.pointers",
        "stagesum_server.engine",
        "stagesum_server.intake",
        "stagesum_server.limits",
    },
    "schemas/stagesum_schemas/records.py": {"stagesum_schemas.units"},
    "schemas/stagesum_schemas/units.py": {"stagesum_schemas.unit_table"},
    "schemas/stagesum_schemas/unit_table.py": set(),
    "schemas/stagesum_schemas": {"marshmallow", "apispec", "stagesum_schemas"},
    "client/stagesum": {"requests", "urllib3", "click", "stagesum", "stagesum_schemas.records"},
}
# the one place of the client that reaches for the service, inside the function that needs it
EXCEPTIONS = {("client/stagesum/embedded.py", "stagesum_server.app")}


def imports(source: str) -> set[str]:
    """Full names of what a module imports; ``from a import b`` counts as a.b where a is a package of ours."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module:
            names |= {f"{node.module}.{alias.name}" for alias in node.names}
    return names


def offending(source: str, allowed: set[str]) -> set[str]:
    """Imports outside the standard library and the allowed names."""
    return {
        name
        for name in imports(source)
        if name.split(".")[0] not in sys.stdlib_module_names
        and not any(name == good or name.startswith(f"{good}.") for good in allowed)
    }


def rule_for(path: str) -> set[str] | None:
    """The most special rule that covers a file."""
    covering = [place for place in ALLOWED if path == place or path.startswith(f"{place}/")]
    return ALLOWED[max(covering, key=len)] if covering else None


def modules() -> list[str]:
    files = [p for top in ("client", "server", "schemas") for p in (ROOT / top).rglob("*.py")]
    return sorted(str(p.relative_to(ROOT)) for p in files)


@pytest.mark.parametrize("path", modules())
def test_a_module_imports_only_what_its_layer_may(path):
    allowed = rule_for(path)
    if allowed is None:  # web and report stand on top and may import all of ours
        return
    found = offending((ROOT / path).read_text(encoding="utf-8"), allowed)
    assert {(path, name.rpartition(".")[0]) for name in found} <= EXCEPTIONS


@pytest.mark.parametrize("line", ["import flask", "from marshmallow import Schema", "import scipy.stats"])
def test_a_wrong_import_in_the_engine_is_noticed(line):
    assert offending(line, ALLOWED["server/stagesum_server/engine"])


def test_the_engine_starts_without_slow_libraries():
    """scipy.stats alone takes most of a second to import."""
    code = "import stagesum_server.engine.budget, sys; print(*sys.modules)"
    loaded = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout.split()
    assert not {"scipy.stats", "scipy.optimize", "matplotlib", "pandas", "flask", "marshmallow"} & set(loaded)
