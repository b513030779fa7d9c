"""Requests that no browser sends: each is refused, and none is an error of the program."""

from __future__ import annotations

from typing import Any

import pytest
from django.test import Client

from tests import factories as make

pytestmark = pytest.mark.django_db
MULTIPART = "multipart/form-data; boundary="


@pytest.fixture
def client() -> Client:
    client = Client(raise_request_exception=False)
    client.force_login(make.make_manager())
    return client


MANY = "&".join(f"site={number}" for number in range(10_000))
PATHS = [
    f"/modules/?{MANY}",
    f"/life/?{MANY}",
    "/m/%00",
    "/m/%ff%fe",
    "/m/" + "x" * 3000,
    "/m/٣",
    "/m/A%0d%0aSet-Cookie:x=1",
    "/sites/../people/",
    "/sites/%2e%2e/",
    "//elsewhere.example/%2f..",
    "/work/00000000-0000-0000-0000-000000000000/",
    "/correct/visit/99999999999999999999999/",
    "/forecast/kept/99999999999999999999999/",
    "/redesigns/X/rollout/99999999999999999999999/",
    "/looks-wrong/99999999999999999999999/",
    "/password/MQ/x-y/",
    "/password/" + "9" * 200 + "/x/",
    "/password/%00/%00/",
]


@pytest.mark.parametrize("path", PATHS, ids=lambda path: path[:30])
def test_an_address_that_is_none(client: Client, path: str) -> None:
    reply = client.get(path)
    assert reply.status_code < 500
    assert "Set-Cookie:x" not in str(reply.headers)


PART = b"--x\r\nContent-Disposition: form-data; name="
BODIES = [
    ("application/x-www-form-urlencoded", MANY.encode()),
    ("application/x-www-form-urlencoded", b"name=%ff%fe&code=%00"),
    ("application/x-www-form-urlencoded; charset=nonsense", b"name=x"),
    ("application/x-www-form-urlencoded; charset=utf-16", b"name=x"),
    ("application/json", b'{"name": NaN}'),
    ("text/plain", b"\xff"),
    (MULTIPART, b""),
    (MULTIPART + "x", b"--x\r\nno header\r\n"),
    (MULTIPART + "x" * 400, b"--x--"),
    (MULTIPART + "x", PART + b'"records"; filename="../../etc/\x00passwd.csv"\r\n\r\nsite\r\n--x--\r\n'),
    (MULTIPART + "x", PART + b'"name"\r\n\r\n' + b"y" * 6_000_000 + b"\r\n--x--\r\n"),
]


@pytest.mark.parametrize("address", ["/sites/new/", "/records/", "/sign-in/", "/stores/order/", "/log/"])
@pytest.mark.parametrize("kind", range(len(BODIES)))
def test_a_body_that_is_none(client: Client, address: str, kind: int) -> None:
    content_type, body = BODIES[kind]
    assert client.generic("POST", address, body, content_type).status_code < 500


HEADS: list[dict[str, Any]] = [
    {"Cookie": "halfnut_session=\x7f\x00; halfnut_csrf=" + "x" * 5000},
    {"HX-Request": "true", "HX-Current-URL": "http://[::1", "HX-Target": "\x00"},
    {"HX-Request": "true", "HX-Current-URL": "javascript:alert(1)//"},
    {"Accept-Language": "x" * 5000, "If-Modified-Since": "never", "Range": "bytes=9-1"},
    {"Host": "elsewhere.example"},
    {"Host": "testserver:99999999"},
    {"X-Forwarded-For": "nowhere", "X-Forwarded-Proto": "gopher", "X-Forwarded-Host": "elsewhere.example"},
]


@pytest.mark.parametrize("signed_in", [True, False])
@pytest.mark.parametrize("kind", range(len(HEADS)))
def test_heads_that_no_browser_sends(client: Client, kind: int, signed_in: bool) -> None:
    asking = client if signed_in else Client(raise_request_exception=False)
    for address in ("/modules/", "/sign-in/", "/log/?q=x"):
        reply = asking.get(address, headers=HEADS[kind])
        assert reply.status_code < 500
        assert "elsewhere.example" not in str(reply.headers) + reply.content.decode()
        assert "javascript:" not in str(reply.headers)
