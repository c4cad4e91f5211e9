"""The service's modules: each has its mirror here and is read in one sitting."""

from __future__ import annotations

from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
MODULES = sorted(path.relative_to(ROOT) for path in (ROOT / "service").rglob("*.py") if path.name != "__init__.py")
LONGEST = 450


@pytest.mark.parametrize("module", MODULES, ids=str)
def test_module_has_its_mirror(module):
    mirror = ROOT / "tests" / module.parent / f"test_{module.name}"
    assert mirror.is_file(), f"{module} is tested nowhere; write {mirror.relative_to(ROOT)}"
    assert "def test_" in mirror.read_text(), f"{mirror.relative_to(ROOT)} tests nothing"


@pytest.mark.parametrize("module", MODULES, ids=str)
def test_module_is_read_in_one_sitting(module):
    assert len((ROOT / module).read_text().splitlines()) <= LONGEST


def test_modules_are_found():
    assert Path("service/wall/pool.py") in MODULES
