"""The shape of the engine itself: mirrors, imports, sizes."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path

import pytest

import engine

ENGINE = Path(engine.__file__).parent
TESTS = Path(__file__).parent
LONGEST = 450
FORBIDDEN = {"service", "fastapi", "starlette", "pydantic", "pydantic_settings", "uvicorn", "httpx"}

MODULES = sorted(path.relative_to(ENGINE) for path in ENGINE.rglob("*.py"))


def imported(path):
    """Top-level names of everything that a module imports, wherever in it."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            yield from (name.name.split(".")[0] for name in node.names)
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path} imports relative to itself"
            yield (node.module or "").split(".")[0]


@pytest.mark.parametrize("module", [m for m in MODULES if m.name != "__init__.py"], ids=str)
def test_every_module_has_its_mirror(module):
    mirror = TESTS / module.with_name(f"test_{module.name}")
    assert mirror.is_file(), f"engine/{module} has no tests/engine/{mirror.relative_to(TESTS)}"


def test_every_mirror_has_its_module():
    """A directory of tests without a package of the engine is a leftover."""
    for directory in {path.parent.relative_to(TESTS) for path in TESTS.rglob("test_*.py")}:
        assert (ENGINE / directory / "__init__.py").is_file()
        assert (TESTS / directory / "__init__.py").is_file()


@pytest.mark.parametrize("module", MODULES, ids=str)
def test_no_module_knows_of_the_service(module):
    assert not FORBIDDEN & set(imported(ENGINE / module))


@pytest.mark.parametrize("module", MODULES, ids=str)
def test_no_module_is_too_long(module):
    lines = len((ENGINE / module).read_text(encoding="utf-8").splitlines())
    assert lines <= LONGEST, f"engine/{module} has {lines} lines"


def test_only_one_module_imports_the_library_that_ends_the_process():
    importers = [str(module) for module in MODULES if "finufft" in imported(ENGINE / module)]
    assert importers == [str(Path("synthesis") / "nonuniform.py")]


def test_importing_the_engine_loads_nothing_of_the_service():
    script = f"import sys, engine; print(sorted({FORBIDDEN!r} & set(sys.modules)))"
    done = subprocess.run(
        [sys.executable, "-c", script], cwd=ENGINE.parent, capture_output=True, text=True, timeout=60, check=True
    )
    assert done.stdout.strip() == "[]"


def test_what_the_engine_offers_exists():
    assert len(set(engine.__all__)) == len(engine.__all__)
    for name in engine.__all__:
        assert hasattr(engine, name)
