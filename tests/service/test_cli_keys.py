from __future__ import annotations

import re

import pytest

from service.access.keys import PATTERN
from service.cli import main


@pytest.fixture
def keys(tmp_path, monkeypatch, capsys):
    """Run ``densityloom keys …``; gives exit code, standard output and error."""
    monkeypatch.setenv("DENSITYLOOM_DATA_DIR", str(tmp_path / "data"))

    def go(*arguments):
        code = main(["keys", *arguments])
        told = capsys.readouterr()
        return code, told.out, told.err

    return go


def test_create_list_revoke(keys):
    assert keys("list")[:2] == (0, "")
    code, out, err = keys("create", "--name", "beam line 3", "--scope", "write", "--scope", "read")
    assert code == 0
    form = PATTERN.fullmatch(out.strip())
    assert form
    assert out.strip() not in err
    assert "read, write" in err
    assert "this once" in err

    code, out, _ = keys("list")
    assert code == 0
    (line,) = out.splitlines()
    assert re.match(rf"{form[1]}  read\+write +made \d{{4}}-\d\d-\d\d \d\d:\d\dZ  in force +beam line 3$", line)

    assert keys("revoke", form[1])[0] == 0
    assert "revoked 2" in keys("list")[1]
    code, _, err = keys("revoke", form[1])
    assert code == 2
    assert "in force" in err


@pytest.mark.parametrize(
    "arguments",
    [
        [],
        ["create"],
        ["create", "--name", "a"],
        ["create", "--scope", "read"],
        ["create", "--name", "a", "--scope", "admin"],
        ["revoke"],
    ],
)
def test_incomplete_commands(keys, arguments):
    with pytest.raises(SystemExit) as ended:
        keys(*arguments)
    assert ended.value.code == 2


def test_name_that_cannot_be_seen(keys):
    code, out, err = keys("create", "--name", " ", "--scope", "read")
    assert (code, out) == (2, "")
    assert "name" in err


def test_store_that_cannot_be_opened(keys, monkeypatch, tmp_path):
    (tmp_path / "file").write_text("")
    monkeypatch.setenv("DENSITYLOOM_DATA_DIR", str(tmp_path / "file" / "data"))
    code, out, err = keys("create", "--name", "a", "--scope", "read")
    assert (code, out) == (2, "")
    assert "DENSITYLOOM_DATA_DIR" in err
