"""What the contract and the audit may import: a closed list, beside the chains that import-linter follows."""

import ast
import sys
from pathlib import Path

import pytest

from tests.house.files import ROOT, named, project_files

# pydantic_core is where pydantic keeps the error that a validator of one's own raises with a type and a context.
CONTRACT_MAY_IMPORT = {"schemas", "pydantic", "pydantic_core"}
AUDIT_MAY_IMPORT = {"schemas", "workers.planning.audit"}


def imported_modules(source: str) -> set[str]:
    """Return the full names of all that a source text imports, wherever in it the import stands."""
    found: set[str] = set()
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            found |= {f"{'.' * node.level}{node.module or ''}.{alias.name}" for alias in node.names}
    return found


def is_allowed(module: str, allowed: set[str]) -> bool:
    """Claim that a module is Python's own, lies in an allowed package, or is named after one (`audit_money`)."""
    if module.split(".", maxsplit=1)[0] in sys.stdlib_module_names:
        return True
    return any(module == name or module.startswith((f"{name}.", f"{name}_")) for name in allowed)


def sources(start: str) -> list[Path]:
    """Return the project's modules whose path from the root starts so, at any depth."""
    return [file for file in project_files() if file.suffix == ".py" and str(file.relative_to(ROOT)).startswith(start)]


def foreign_imports(files: list[Path], allowed: set[str]) -> dict[str, set[str]]:
    """Return, by file, what is imported outside a closed list."""
    found = {
        file: {
            module for module in imported_modules(file.read_text(encoding="utf-8")) if not is_allowed(module, allowed)
        }
        for file in files
    }
    return {name: found[file] for name, file in zip(named(files), files, strict=True) if found[file]}


def test_the_contract_imports_pydantic_only() -> None:
    files = sources("schemas/")
    assert files
    assert foreign_imports(files, CONTRACT_MAY_IMPORT) == {}


def test_the_audit_imports_the_contract_only() -> None:
    files = sources("workers/planning/audit")
    assert files
    assert foreign_imports(files, AUDIT_MAY_IMPORT) == {}


@pytest.mark.parametrize(
    "line",
    [
        "import numpy",
        "from workers.planning import instance",
        "from workers.planning.instance import Instance",
        "from . import instance",
        "def late():\n    import workers.planning.rules.balance",
    ],
)
def test_a_forbidden_import_is_seen_wherever_it_stands(line: str) -> None:
    assert not all(is_allowed(module, AUDIT_MAY_IMPORT) for module in imported_modules(line))


@pytest.mark.parametrize(
    "line", ["import math", "from schemas.request import Request", "from workers.planning.audit_money import margin"]
)
def test_an_allowed_import_is_let_through(line: str) -> None:
    assert all(is_allowed(module, AUDIT_MAY_IMPORT) for module in imported_modules(line))
