"""Who may talk to the page's server, and what it answers."""

import json
import re
from importlib.resources import files

import pytest

from measure.overread.export import KINDS
from tests.measure.overread.made import digital_chain, serving, worklist

guards = pytest.importorskip("measure.overread.guard", reason="the extra `overread` is missing")
httpx = pytest.importorskip("httpx", reason="httpx, which plays the browser, is not installed")

MALE = {"kind": "patient", "sex": "male", "age_years": None}


@pytest.fixture
def guard(tmp_path):
    with serving(worklist(tmp_path, digital_chain())) as guard:
        yield guard


@pytest.fixture
def stranger(guard):
    """A client on the right host that does not know the secret."""
    here = guard.address.partition("/?")[0]
    with httpx.Client(base_url=here, headers={"Origin": here}, trust_env=False) as client:
        yield client


@pytest.fixture
def client(stranger, guard):
    """The browser that was given the address."""
    stranger.get("/", params={"token": guard.token})
    return stranger


def change(client, what, **wish):
    return client.post(f"/ecgs/0/{what}", json={"tab": "one", "revision": 0, **wish})


def test_the_address_gives_a_cookie_and_hides_the_secret(stranger, guard):
    answer = stranger.get(guard.address, follow_redirects=False)
    assert (answer.status_code, answer.headers["location"]) == (303, "/")
    cookie = answer.headers["set-cookie"].lower()
    assert "httponly" in cookie
    assert "samesite=strict" in cookie
    assert stranger.get("/").status_code == 200


def test_without_the_secret_nothing_is_answered(stranger):
    for path in ("/", "/ecgs", "/ecgs/0", "/page/main.js", "/ecgs/0/export/reading"):
        assert stranger.get(path).status_code == 403
    assert stranger.get("/", params={"token": "guessed"}).status_code == 403
    assert change(stranger, "correct", correction=MALE).status_code == 403


def test_each_start_has_a_secret_of_its_own():
    assert guards.Guard(8123).token != guards.Guard(8123).token


def test_a_foreign_name_that_points_here_is_refused(client):
    """DNS rebinding: the browser sends the name that it looked up (RFC 9110, 7.2)."""
    port = client.base_url.port
    for host in ("evil.example", f"evil.example:{port}", "127.0.0.1:1", f"127.0.0.1:{port}.evil"):
        assert client.get("/ecgs", headers={"Host": host}).status_code == 403


def test_another_page_is_refused(client):
    """Origin as RFC 6454 and Sec-Fetch-Site as the Fetch Metadata draft have it."""
    port = client.base_url.port
    for origin in ("http://evil.example", "null", f"https://127.0.0.1:{port}", "http://127.0.0.1"):
        assert client.get("/ecgs", headers={"Origin": origin}).status_code == 403
    assert client.get("/ecgs", headers={"Sec-Fetch-Site": "cross-site"}).status_code == 403
    del client.headers["Origin"]
    assert client.get("/ecgs").status_code == 200
    assert change(client, "correct", correction=MALE).status_code == 403


def test_nothing_may_be_loaded_from_elsewhere(client):
    headers = client.get("/").headers
    policy = headers["content-security-policy"]
    assert "default-src 'none'" in policy
    assert "frame-ancestors 'none'" in policy
    assert "unsafe" not in policy
    assert "http" not in policy
    assert headers["x-content-type-options"] == "nosniff"


def test_every_module_of_the_page_is_fetched_at_once(client):
    """Not one after the other as each is imported: the first page view is sooner by that."""
    modules = {f.name for f in (files("measure.overread") / "page").iterdir()} - {"main.js"}
    wanted = re.findall(r'modulepreload" href="page/([a-z]+\.js)"', client.get("/").text)
    assert sorted(wanted) == sorted(name for name in modules if name.endswith(".js"))


@pytest.mark.parametrize(
    "path",
    [
        "/page/..%2fserver.py",
        "/page/%2e%2e/server.py",
        "/page/server.py",
        "/page/main.js%00.css",
        "/ecgs/1",
        "/ecgs/-1",
        "/ecgs/0/paper/flat/small",
        "/ecgs/0/export/..%2f..%2fetc%2fpasswd",
    ],
)
def test_no_path_comes_from_the_browser(client, path):
    assert client.get(path).status_code == 404


def test_large_and_broken_requests_are_refused(client):
    url = "/ecgs/0/correct"
    assert client.post(url, content=b"x" * (guards.LARGEST_BODY + 1)).status_code == 413
    assert client.post(url, content=iter([b"x"])).status_code == 413  # length not said
    for body in (b"", b"{", b"[1]", b"\xff", b"[" * 100_000):
        assert client.post(url, content=body).status_code == 400
    client.get("/ecgs/0", params={"tab": "one"})
    assert change(client, "correct", correction=[]).status_code == 422
    endless = '{"tab": "one", "revision": 0, "correction": {"kind": "speed", "mm_s": Infinity}}'
    assert client.post(url, content=endless).status_code == 422


def test_a_correction_comes_back_with_everything_that_follows(client):
    before = client.get("/ecgs/0", params={"tab": "one"}).json()
    edge = before["beat"]["edges"]["qrs_off_ms"]
    moved = {"kind": "boundary", "edge": "qrs_off_ms", "at_ms": edge + 30}
    after = change(client, "correct", correction=moved, who="A. Reader").json()
    old, new = (
        next(row for row in seen["intervals"] if row["key"] == "qrs_ms") for seen in (before, after)
    )
    assert new["automatic"] == old["now"] != new["now"]
    assert after["corrections"][0]["who"] == "A. Reader"
    assert after["beat"]["automatic"]["qrs_off_ms"] == edge


def test_two_tabs_the_later_one_is_told_and_nothing_is_overwritten(client):
    assert client.get("/ecgs/0", params={"tab": "one"}).json()["pen"] is True
    assert client.get("/ecgs/0", params={"tab": "two"}).json()["pen"] is False
    refused = change(client, "correct", correction=MALE, tab="two")
    assert refused.status_code == 409
    assert "another tab" in refused.json()["message"]
    assert client.get("/ecgs/0", params={"tab": "two", "take": "1"}).json()["pen"] is True
    assert change(client, "correct", correction=MALE, tab="one").status_code == 409
    assert change(client, "correct", correction=MALE, tab="two").status_code == 200
    # drawn before that change
    outdated = change(client, "undo", tab="two", revision=0)
    assert outdated.status_code == 409
    assert len(client.get("/ecgs/0", params={"tab": "two"}).json()["corrections"]) == 1


def test_a_closed_tab_gives_the_pen_back(client):
    client.get("/ecgs/0", params={"tab": "one"})
    assert change(client, "release", tab="two").status_code == 204
    assert client.get("/ecgs/0", params={"tab": "two"}).json()["pen"] is False
    change(client, "release", tab="one")
    assert client.get("/ecgs/0", params={"tab": "two"}).json()["pen"] is True


def test_every_output_says_that_it_is_unsigned_until_it_is_signed(client):
    """In its name, and inside where the format has a place for words."""
    client.get("/ecgs/0", params={"tab": "one"})
    in_words = ("reading", "report", "dicom", "fhir", "aecg")
    for kind in KINDS:
        answer = client.get(f"/ecgs/0/export/{kind}")
        if kind in ("overlay", "dicom-scan"):  # an ECG without a page has none
            assert answer.status_code == 404
            continue
        assert answer.status_code == 200, answer.text
        assert 'filename="model.unsigned.' in answer.headers["content-disposition"]
        if kind in in_words:
            assert b"Not signed" in answer.content, kind
    assert change(client, "sign", name="A. Reader", comment="").status_code == 200
    for kind in in_words:
        assert b"Signed by A. Reader" in client.get(f"/ecgs/0/export/{kind}").content, kind
    answer = client.get("/ecgs/0/export/reading")
    assert answer.headers["content-disposition"] == 'attachment; filename="model.reading.json"'
    document = json.loads(answer.text)
    assert document["cautions"][0].startswith("Signed by A. Reader")
    assert "no diagnosis" in document["notice"]


def test_formats_that_can_hold_measurements_have_them(client):
    client.get("/ecgs/0", params={"tab": "one"})
    assert b"QRS duration" in client.get("/ecgs/0/export/fhir").content
    assert b"MDC_ECG_TIME_PD_QRS_GL" in client.get("/ecgs/0/export/aecg").content
    pdf = client.get("/ecgs/0/export/pdf")
    assert (pdf.headers["content-type"], pdf.content[:5]) == ("application/pdf", b"%PDF-")


def test_the_journal_lies_beside_the_ecg_alone(client, tmp_path):
    client.get("/ecgs/0", params={"tab": "one"})
    change(client, "correct", correction=MALE)
    assert [file.name for file in tmp_path.iterdir()] == ["ecg.overread.json"]
