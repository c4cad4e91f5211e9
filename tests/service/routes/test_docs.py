from __future__ import annotations

import hashlib
import re

import pytest

from service.routes.docs import PAGE, POLICY


def test_page_comes_with_its_policy(client):
    answer = client.get("/docs")
    assert answer.status_code == 200
    assert answer.headers["content-type"].startswith("text/html")
    assert answer.headers["content-security-policy"] == POLICY
    assert answer.headers["x-content-type-options"] == "nosniff"


def test_policy_keeps_scripts_and_requests_at_home():
    rules = dict(rule.split(maxsplit=1) for rule in POLICY.split("; "))
    assert rules["default-src"] == "'none'"
    assert rules["script-src"] == "'self'"
    assert rules["connect-src"] == "'self'"
    assert "http" not in POLICY
    assert "*" not in POLICY
    assert "unsafe-eval" not in POLICY


def test_page_refers_to_files_of_ours_alone(client):
    page = client.get("/docs").text
    references = re.findall(r"""(?:src|href|action)\s*=\s*["']([^"']*)""", page)
    assert references
    for reference in references:
        assert reference.startswith("/docs/")
        assert client.get(reference).status_code == 200
    # The policy forbids scripts within the page.
    assert re.findall(r"<script[^>]*>([^<]*)</script>", page) == [""] * page.count("<script")
    assert not re.search(r"(?:https?:)?//[a-z]", page)


def test_script_names_no_other_host(client):
    answer = client.get("/docs/docs.js")
    assert "javascript" in answer.headers["content-type"]
    assert '"/openapi.json"' in answer.text
    assert "://" not in answer.text
    assert "validatorUrl: null" in answer.text


@pytest.mark.parametrize("address", ["/docs/vendor/../../app.py", "/docs/vendor/..%2f..%2fapp.py", "/docs/vendor/"])
def test_nothing_else_is_served(client, address):
    assert client.get(address).status_code == 404


def test_vendored_files_are_those_that_were_checked():
    folder = PAGE / "vendor" / "swagger-ui"
    lines = (folder / "SHA256SUMS").read_text().split("\n")
    sums = dict(reversed(line.split(maxsplit=1)) for line in lines if line)
    assert sums
    for name, digest in sums.items():
        assert hashlib.sha256((folder / name.lstrip("*")).read_bytes()).hexdigest() == digest, name
    assert (folder / "LICENSE").is_file()
