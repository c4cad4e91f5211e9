from __future__ import annotations

import hashlib
import json
import re

import pytest

from service.routes.page import FOLDER, MEDIA_TYPES, POLICY, files
from tests import demos

VENDORED = ("uplot", "three")


def test_page_comes_with_its_policy(client):
    answer = client.get("/")
    assert answer.status_code == 200
    assert answer.headers["content-type"] == "text/html; charset=utf-8"
    assert answer.headers["content-security-policy"] == POLICY
    assert answer.headers["x-content-type-options"] == "nosniff"
    assert answer.headers["referrer-policy"] == "no-referrer"


def test_policy_keeps_all_at_home():
    rules = dict(rule.split(maxsplit=1) for rule in POLICY.split("; "))
    assert rules["default-src"] == "'none'"
    assert rules["script-src"] == rules["style-src"] == rules["connect-src"] == "'self'"
    assert rules["frame-ancestors"] == rules["base-uri"] == rules["form-action"] == "'none'"
    assert "unsafe" not in POLICY
    assert "*" not in POLICY


def test_page_refers_to_files_that_are_there(client):
    page = client.get("/").text
    references = re.findall(r"""(?:src|href)\s*=\s*["']([^"']*)""", page)
    assert "/page/js/main.js" in references
    for reference in references:
        if reference.startswith("/page/"):
            assert client.get(reference).status_code == 200, reference
    # The policy forbids scripts and styles within the page.
    assert re.findall(r"<script[^>]*>([^<]*)</script>", page) == [""]
    assert "style=" not in page
    assert "<style" not in page


def test_every_import_names_a_file_that_is_served():
    served = files()
    for name, path in served.items():
        if path.suffix != ".js":
            continue
        for target in re.findall(r"""(?:from|import)\s*\(?\s*["'](\.[^"']+)["']""", path.read_text()):
            found = (path.parent / target).resolve().relative_to(FOLDER).as_posix()
            assert found in served, f"{name} imports {target}"


def test_own_scripts_parse_no_text_as_html_or_script():
    for path in (FOLDER / "js").rglob("*.js"):
        text = path.read_text()
        for word in ("innerHTML", "outerHTML", "insertAdjacentHTML", "document.write", "eval(", "new Function", "://"):
            assert word not in text, f"{path.name} has {word}"


@pytest.mark.parametrize("ending", sorted({path.suffix for path in files().values()}))
def test_files_come_with_type_tag_and_policy(client, ending):
    name = next(name for name, path in files().items() if path.suffix == ending)
    answer = client.get(f"/page/{name}")
    assert answer.headers["content-type"] == MEDIA_TYPES[ending]
    assert answer.headers["cache-control"] == "no-cache"
    assert answer.headers["content-security-policy"] == POLICY
    assert answer.content == files()[name].read_bytes()
    again = client.get(f"/page/{name}", headers={"If-None-Match": answer.headers["etag"]})
    assert again.status_code == 304
    assert again.content == b""
    assert again.headers["etag"] == answer.headers["etag"]
    assert client.get(f"/page/{name}", headers={"If-None-Match": '"other"'}).status_code == 200


def test_tag_differs_by_coding_and_any_is_recognised(client):
    plain = client.get("/page/js/main.js", headers={"Accept-Encoding": "identity"})
    coded = client.get("/page/js/main.js", headers={"Accept-Encoding": "gzip"})
    assert coded.content == plain.content
    assert coded.headers["vary"] == "Accept-Encoding"
    assert (coded.headers["etag"] == plain.headers["etag"]) == ("content-encoding" not in coded.headers)
    held = {"If-None-Match": coded.headers["etag"], "Accept-Encoding": "identity"}
    assert client.get("/page/js/main.js", headers=held).status_code == 304


def test_head_is_answered_without_the_body(client):
    answer = client.head("/")
    whole = client.get("/", headers={"Accept-Encoding": "identity"})
    assert answer.status_code == 200
    assert answer.content == b""
    assert client.head("/", headers={"Accept-Encoding": "identity"}).headers["content-length"] == str(
        len(whole.content)
    )


@pytest.mark.parametrize(
    "address",
    [
        "/page/",
        "/page/index.html",
        "/page/docs.js",
        "/page/js/../../app.py",
        "/page/js/..%2f..%2fapp.py",
        "/page/vendor/three/LICENSE",
        "/page/vendor/swagger-ui/swagger-ui.css",
    ],
)
def test_nothing_else_is_served(client, address):
    assert client.get(address).status_code == 404


@pytest.mark.parametrize("name", VENDORED)
def test_vendored_files_are_those_that_were_checked(name):
    folder = FOLDER / "vendor" / name
    lines = (folder / "SHA256SUMS").read_text().splitlines()
    sums = dict(reversed(line.split(maxsplit=1)) for line in lines)
    there = {path.name for path in folder.iterdir()} - {"SHA256SUMS", "VERSION"}
    assert set(sums) == there
    for file, digest in sums.items():
        assert hashlib.sha256((folder / file).read_bytes()).hexdigest() == digest, file
    assert "LICENSE" in sums
    assert re.fullmatch(r"\d+\.\d+\.\d+\n", (folder / "VERSION").read_text())


def test_demonstrations_are_as_made_and_can_be_kept(client):
    built = demos.build()
    assert {path.name for path in demos.FOLDER.iterdir()} == set(built)
    for name, demo in built.items():
        assert json.loads((demos.FOLDER / name).read_text()) == demo
        assert "invented" in demo["name"]
        answer = client.post("/v1/sets", content=client.get(f"/page/demos/{name}").content, headers=JSON)
        assert answer.status_code in (200, 201)
        assert "sigma" in answer.json()["summary"]["columns"]


JSON = {"Content-Type": "application/json"}
