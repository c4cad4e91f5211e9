"""What README and DEVELOPERS say is so."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from pydantic_core import PydanticUndefined

from service.schemas.products import PRODUCTS
from service.settings import PREFIX, Settings
from tests.serving import serving

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text()
DEVELOPERS = (ROOT / "DEVELOPERS.md").read_text()


def test_settings_table_is_complete_and_true():
    rows = dict(re.findall(rf"^\| `{PREFIX}(\w+)` \| ([^|]+) \|", README, re.M))
    assert {name.lower() for name in rows} == set(Settings.model_fields)
    for name, shown in rows.items():
        default = Settings.model_fields[name.lower()].default
        if default is PydanticUndefined or default in (None, ""):
            continue
        if isinstance(default, str):
            assert shown == default, name
        else:
            assert float(shown) == default, name


def test_every_member_of_a_request_is_described():
    """Members that are not plain from their names carry a description for /docs, or stand in README."""
    for product, model in PRODUCTS.items():
        for name, member in model.model_fields.items():
            shown = member.alias or name
            assert member.description or f"`{shown}`" in README, (product, shown)


@pytest.mark.parametrize("text", re.findall(r"`((?:engine|service|tests|\.ci)/[\w./-]*)`", README + DEVELOPERS))
def test_paths_named_exist(text):
    assert (ROOT / text).exists()


def test_map_names_every_part():
    block = re.search(r"```\nengine/.*?```", DEVELOPERS, re.S)
    assert block is not None
    for package in ("engine", "service"):
        for path in (ROOT / package).iterdir():
            if path.name.startswith("_") or path.suffix not in (".py", ""):
                continue
            name = path.name if path.suffix else f"{path.name}/"
            assert name in block[0], f"{package}/{name} is missing from the map"


def test_python_samples_run(capsys):
    samples = re.findall(r"```python\n(.*?)```", README, re.S)
    assert len(samples) == 2
    with serving() as served:
        for sample in samples:
            exec(compile(sample.replace("http://127.0.0.1:8420", served.address), "README.md", "exec"), {})
    shown = capsys.readouterr().out
    assert "(512,) 52.0 e/Å³" in shown


def test_readme_names_the_test_command_for_ci():
    match = re.search(r"<!-- test command -->\n```sh\n(.+)\n```", README)
    assert match is not None
    assert "pytest -q" in match[1]
