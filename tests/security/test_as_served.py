"""The program as it runs behind a reverse proxy with TLS: cookies, redirects, files, and malformed requests."""

import json
import socket
import urllib.error
import urllib.request
from contextlib import closing

import pytest

from tests.serving import PASSWORD, STATIC, Server, Site


@pytest.fixture(scope="module")
def server(tmp_path_factory):
    site = Site(tmp_path_factory.mktemp("served") / "site")
    site.prepare()
    site.environment |= {"WORKSHEET_HTTPS": "1", "WORKSHEET_HOSTS": "127.0.0.1", "WORKSHEET_PROXIES": "1"}
    with Server(site, workers=1) as running:
        yield running


class Stay(urllib.request.HTTPRedirectHandler):
    """Redirects are looked at, not followed."""

    def redirect_request(self, *args):
        return None


def ask(server, path, *, method="GET", body=None, secure=True, **headers):
    told = {"X-Forwarded-Proto": "https", "X-Forwarded-For": "6.6.6.6, 10.0.0.9"} if secure else {}
    request = urllib.request.Request(server.address + path, body, {**told, **headers}, method=method)
    try:
        with urllib.request.build_opener(Stay).open(request, timeout=20) as answer:
            return answer.status, answer.headers, answer.read()
    except urllib.error.HTTPError as error:
        return error.code, error.headers, error.read()


def raw(server, text):
    with closing(socket.create_connection(("127.0.0.1", server.port), timeout=20)) as wire:
        wire.sendall(text)
        return wire.recv(200)


def test_plain_http_is_sent_to_https_but_the_health_page_is_not(server):
    status, headers, _ = ask(server, "/login/", secure=False)
    assert (status, headers["Location"]) == (301, f"https://127.0.0.1:{server.port}/login/")
    status, _, body = ask(server, "/health/", secure=False)
    assert (status, body) == (200, b"ok")


def test_cookies_are_bound_to_this_host_and_to_tls(server):
    status, headers, body = ask(server, "/login/")
    assert status == 200
    assert int(headers["Strict-Transport-Security"].split("max-age=")[1].split(";")[0]) >= 31_536_000
    cookie = headers["Set-Cookie"]
    assert cookie.startswith("__Host-csrf=")
    token = body.decode().split('csrfmiddlewaretoken" value="')[1].split('"')[0]
    form = f"csrfmiddlewaretoken={token}&username=nurse&password={PASSWORD.replace(' ', '+')}".encode()
    given = {"Cookie": cookie.split(";")[0], "Referer": f"https://127.0.0.1:{server.port}/login/"}
    status, headers, _ = ask(server, "/login/", method="POST", body=form, **given)
    assert status == 302
    cookies = headers.get_all("Set-Cookie")
    assert any(text.startswith("__Host-worksheet=") for text in cookies)
    for text in cookies:
        assert "Secure" in text
        assert "HttpOnly" in text
        assert "SameSite=Lax" in text
        assert "Path=/" in text
        assert "Domain" not in text


def test_a_wrong_login_is_told_with_the_address_that_the_proxy_saw(server):
    _, headers, body = ask(server, "/login/")
    token = body.decode().split('csrfmiddlewaretoken" value="')[1].split('"')[0]
    given = {"Cookie": headers["Set-Cookie"].split(";")[0], "Referer": f"https://127.0.0.1:{server.port}/login/"}
    form = f"csrfmiddlewaretoken={token}&username=nurse&password=wrong".encode()
    assert ask(server, "/login/", method="POST", body=form, **given)[0] == 200
    ask_trail = (
        "from worksheet.ward.models import AuditEvent\n"
        "print(AuditEvent.objects.filter(action='login failed').latest('id').detail['address'])"
    )
    assert server.site.python(ask_trail) == "10.0.0.9"


def test_files_are_named_by_their_content_and_carry_the_headers(server):
    names = json.loads((STATIC / "staticfiles.json").read_text())["paths"]
    status, headers, _ = ask(server, f"/static/{names['css/base.css']}")
    assert status == 200
    assert "immutable" in headers["Cache-Control"]
    assert headers["X-Content-Type-Options"] == "nosniff"
    assert "default-src 'self'" in headers["Content-Security-Policy"]
    assert "Access-Control-Allow-Origin" not in headers


@pytest.mark.parametrize("path", ["/static/", "/static/css/", "/.git/config", "/static/../worksheet/settings.py",
                                  "/static/%2e%2e/%2e%2e/etc/passwd", "/worksheet.sqlite3", "/media/"])  # fmt: skip
def test_no_listing_and_nothing_beside_the_static_files(server, path):
    status, _, body = ask(server, path)
    assert status in {302, 404}
    assert b"SECRET_KEY" not in body
    assert b"root:" not in body


@pytest.mark.parametrize(
    "lengths",
    [b"Content-Length: 5\r\nTransfer-Encoding: chunked\r\n", b"Content-Length: 5\r\nContent-Length: 9\r\n",
     b"Content-Length: -1\r\n", b"Transfer-Encoding: chunked, identity\r\n"],
)  # fmt: skip
def test_a_request_with_two_lengths_is_refused(server, lengths):
    answer = raw(
        server, b"POST /login/ HTTP/1.1\r\nHost: 127.0.0.1\r\n" + lengths + b"\r\n0\r\n\r\nGET / HTTP/1.1\r\n\r\n"
    )
    assert answer.split(b" ")[1][:1] in {b"4", b"5"}


def test_another_host_is_refused(server):
    assert ask(server, "/login/", Host="evil.example")[0] == 400


def test_a_form_larger_than_allowed_is_refused(server):
    _, headers, _ = ask(server, "/login/")
    given = {"Cookie": headers["Set-Cookie"].split(";")[0], "Referer": f"https://127.0.0.1:{server.port}/login/"}
    status, _, body = ask(server, "/login/", method="POST", body=b"username=" + b"a" * (3 * 2**20), **given)
    assert status in {400, 413}
    assert b"Traceback" not in body


@pytest.mark.parametrize("path", ["/", "/u/demo/", "/u/demo/trail/", "/preferences/"])
def test_nobody_without_a_login_gets_a_session(server, path):
    status, headers, _ = ask(server, path)
    assert status == 302
    assert "worksheet" not in (headers["Set-Cookie"] or "")
