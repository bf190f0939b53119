"""A real server in a process of its own, and a client that logs in and types slips over HTTP."""

import contextlib
import http.cookiejar
import os
import re
import secrets
import signal
import socket
import subprocess
import sys
import tempfile
import time
import urllib.error
import urllib.parse
import urllib.request
from datetime import UTC, datetime, timedelta
from pathlib import Path

ROOT = Path(__file__).resolve().parents[1]
STATIC = Path(tempfile.gettempdir()) / f"worksheet-static-{os.getpid()}"  # collected once for all servers of a run
KEY = secrets.token_urlsafe(60)
PASSWORD = "seven green kettles hum"


def free_port() -> int:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        return taken.getsockname()[1]


class Site:
    """One installation: a data folder (or a given database) and its commands."""

    def __init__(self, folder: Path, database: str = "") -> None:
        self.folder = folder
        folder.mkdir(parents=True, exist_ok=True)
        self.environment = {
            **os.environ,
            "WORKSHEET_DATA": str(folder),
            "WORKSHEET_STATIC": str(STATIC),
            "WORKSHEET_SECRET_KEY": KEY,
            "DJANGO_SETTINGS_MODULE": "worksheet.settings",
        }
        self.environment.pop("WORKSHEET_DATABASE", None)
        if database:
            self.environment["WORKSHEET_DATABASE"] = database

    def run(self, *arguments: str) -> subprocess.CompletedProcess:
        return subprocess.run(
            [sys.executable, "manage.py", *arguments], cwd=ROOT, env=self.environment, capture_output=True, text=True
        )

    def python(self, code: str) -> str:
        """Output of some code with Django set up."""
        program = f"import django; django.setup()\n{code}"
        done = subprocess.run(
            [sys.executable, "-c", program], cwd=ROOT, env=self.environment, capture_output=True, text=True
        )
        assert done.returncode == 0, done.stderr
        return done.stdout.strip()

    def prepare(self) -> None:
        """Migrate, and make the demo unit with a known password."""
        self.python(
            "from django.core.management import call_command\n"
            "call_command('migrate', verbosity=0)\n"
            "from django.utils import timezone\n"
            "from worksheet.ward import demo\n"
            f"demo.make(timezone.now(), {PASSWORD!r})"
        )

    def count(self) -> int:
        return int(self.python("from worksheet.ward.models import Entry; print(Entry.objects.count())"))


class Server:
    """``serve`` on a free port of this machine; ends with the block."""

    def __init__(self, site: Site, workers: int = 2, port: int = 0) -> None:
        self.site, self.workers, self.port = site, workers, port or free_port()
        self.process: subprocess.Popen | None = None

    @property
    def address(self) -> str:
        return f"http://127.0.0.1:{self.port}"

    def start(self) -> None:
        self.log = (self.site.folder / f"serve-{self.port}.log").open("ab")
        self.process = subprocess.Popen(
            [sys.executable, "manage.py", "serve", "--bind", f"127.0.0.1:{self.port}", "--workers", str(self.workers)],
            cwd=ROOT, env=self.site.environment, stdout=self.log, stderr=self.log, start_new_session=True,
        )  # fmt: skip
        deadline = time.monotonic() + 60
        while time.monotonic() < deadline:
            if self.process.poll() is not None:
                raise RuntimeError((self.site.folder / f"serve-{self.port}.log").read_text())
            with contextlib.suppress(OSError):
                urllib.request.urlopen(f"{self.address}/health/", timeout=2).close()
                return
            time.sleep(0.1)
        raise RuntimeError("the server did not start")

    def kill(self) -> None:
        """As a power cut would: master and workers at once, without a word."""
        os.killpg(self.process.pid, signal.SIGKILL)
        self.process.wait()
        self.log.close()

    def stop(self) -> int:
        """As a service manager would: what is under way is finished."""
        self.process.terminate()
        code = self.process.wait(timeout=30)
        self.log.close()
        return code

    def __enter__(self) -> "Server":
        self.start()
        return self

    def __exit__(self, *_: object) -> None:
        if self.process.poll() is None:
            self.stop()


class Person:
    """A client with cookies that types slips."""

    def __init__(self, address: str, name: str = "nurse") -> None:
        self.address, self.name = address, name
        self.jar = http.cookiejar.CookieJar()
        self.opener = urllib.request.build_opener(urllib.request.HTTPCookieProcessor(self.jar))
        self.token = ""

    def get(self, path: str, **headers: str) -> str:
        request = urllib.request.Request(self.address + path, headers=headers)
        with self.opener.open(request, timeout=30) as answer:
            text = answer.read().decode()
        found = re.search(r'name="csrfmiddlewaretoken" value="([^"]+)"', text)
        self.token = found.group(1) if found else self.token
        return text

    def post(self, path: str, fields: dict[str, str]) -> tuple[str, str]:
        """Final address and text."""
        body = urllib.parse.urlencode({**fields, "csrfmiddlewaretoken": self.token}).encode()
        request = urllib.request.Request(self.address + path, body, {"Referer": self.address + path})
        try:
            with self.opener.open(request, timeout=30) as answer:
                return answer.url, answer.read().decode()
        except urllib.error.HTTPError as refusal:
            if refusal.code != 422:
                raise
            return refusal.url, refusal.read().decode()

    def log_in(self) -> None:
        self.get("/login/")
        where, _ = self.post("/login/", {"username": self.name, "password": PASSWORD})
        assert "/login/" not in where
        self.get("/preferences/")

    def slip(self, reference: str, key: str) -> None:
        """Type bedside readings; returns once the server has acknowledged them."""
        at = datetime.now(UTC) - timedelta(minutes=1)
        fields = {"date": f"{at:%Y-%m-%d}", "clock": f"{at:%H:%M}", "site": "0", "key": key, "begun_by": self.name}
        fields |= {"spo2": "96", "heart_rate": "88", "mean_arterial_pressure": "74"}
        where, text = self.post(f"/u/demo/stay/{reference}/entry/new", fields)
        assert "/entry/new" not in where, text
