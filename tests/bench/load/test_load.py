"""200 people who watch a unit and 20 who type, on one machine: bounded in count and time, loopback only."""

import asyncio
import os
import random
import statistics
import time
import urllib.parse
import uuid
from datetime import UTC, datetime, timedelta

import pytest

from tests.serving import Person, Server, Site

VIEWERS, RECORDERS, SECONDS = 200, 20, 60
RUN = uuid.uuid4().hex[:8]  # the PostgreSQL of the environment may remember an earlier run
EVERY, PAUSE = 5.0, 30.0  # s between polls; s that a slip takes to type
pytestmark = [pytest.mark.bench, pytest.mark.slow]


class Wire:
    """One request at a time over asyncio, without a client library between the clock and the server."""

    def __init__(self, port: int, cookie: str) -> None:
        self.port, self.cookie = port, cookie

    async def ask(self, method: str, path: str, headers: dict[str, str], body: bytes = b"") -> tuple[int, dict, bytes]:
        reader, writer = await asyncio.open_connection("127.0.0.1", self.port)
        head = {"Host": f"127.0.0.1:{self.port}", "Connection": "close", "Cookie": self.cookie, **headers}
        if body:
            head |= {"Content-Length": str(len(body)), "Content-Type": "application/x-www-form-urlencoded"}
        lines = "".join(f"{name}: {value}\r\n" for name, value in head.items())
        writer.write(f"{method} {path} HTTP/1.1\r\n{lines}\r\n".encode() + body)
        await writer.drain()
        answer = await reader.read()
        writer.close()
        top, _, text = answer.partition(b"\r\n\r\n")
        first, *rest = top.decode("latin-1").split("\r\n")
        got = {name.lower(): value for name, _, value in (line.partition(": ") for line in rest)}
        return int(first.split()[1]), got, text


async def watch(wire, until, times, statuses, seen):
    """Poll the unit review as the page does."""
    tag = ""
    await asyncio.sleep(random.uniform(0, EVERY))
    while time.monotonic() < until:
        start = time.monotonic()
        headers = {"HX-Request": "true", "HX-Trigger": "live", "HX-Target": "live"}
        if tag:
            headers["If-None-Match"] = tag
        status, got, _ = await wire.ask("GET", "/u/demo/?window=12", headers)
        took = time.monotonic() - start
        times.append(took)
        statuses.append(status)
        tag = got.get("etag", tag)
        if status == 200:
            seen.append(time.monotonic())
        await asyncio.sleep(max(0.0, EVERY - took))


async def type_slips(wire, person, until, times, statuses, number):
    """A slip every few seconds."""
    await asyncio.sleep(random.uniform(0, EVERY))
    count = 0
    while time.monotonic() < until:
        at = datetime.now(UTC) - timedelta(minutes=1)
        fields = {"date": f"{at:%Y-%m-%d}", "clock": f"{at:%H:%M}", "site": "0", "key": f"load-{RUN}-{number}-{count}",
                  "begun_by": "nurse", "spo2": "96", "heart_rate": "88", "mean_arterial_pressure": "74",
                  "csrfmiddlewaretoken": person.token}  # fmt: skip
        path = "/u/demo/stay/K-2080/entry/new"
        headers = {"Referer": person.address + path, "Origin": person.address}
        start = time.monotonic()
        status, _, _ = await wire.ask("POST", path, headers, urllib.parse.urlencode(fields).encode())
        times.append(time.monotonic() - start)
        statuses.append(status)
        count += 1
        await asyncio.sleep(PAUSE)


async def crowd(server, person):
    cookie = "; ".join(f"{c.name}={c.value}" for c in person.jar)
    wire, until = Wire(server.port, cookie), time.monotonic() + SECONDS
    looks, slips, look_codes, slip_codes, seen = [], [], [], [], []
    people = [watch(wire, until, looks, look_codes, seen) for _ in range(VIEWERS)]
    people += [type_slips(wire, person, until, slips, slip_codes, n) for n in range(RECORDERS)]
    await asyncio.gather(*people)
    return looks, slips, look_codes, slip_codes


def p95(times):
    return statistics.quantiles(times, n=20)[-1]


@pytest.mark.parametrize("backend", ["sqlite", "postgresql"])
def test_two_hundred_watch_and_twenty_type(tmp_path, ratio_row, backend):
    database = ""
    if backend == "postgresql":
        database = os.environ.get("WORKSHEET_TEST_POSTGRES", "")
        if not database:
            pytest.skip("WORKSHEET_TEST_POSTGRES names no PostgreSQL")
    site = Site(tmp_path / "site", database)
    site.prepare()
    with Server(site, workers=3) as server:
        person = Person(server.address)
        person.log_in()
        alone = []
        for _ in range(20):
            start = time.monotonic()
            person.get("/u/demo/?window=12")
            alone.append(time.monotonic() - start)
        before = site.count()
        looks, slips, look_codes, slip_codes = asyncio.run(crowd(server, person))
    stored = site.count() - before
    ratio_row(f"p95 of a look, {VIEWERS} viewers and {RECORDERS} recorders ({backend})", p95(looks),
              "one viewer alone", statistics.median(alone), "< 300 ms", f"{len(looks) / SECONDS:.0f}/s")  # fmt: skip
    ratio_row(f"p95 of a slip at the same time ({backend})", p95(slips), "one viewer alone", statistics.median(alone))
    assert set(look_codes) <= {200, 304}
    assert set(slip_codes) <= {302, 303}
    assert stored == len(slip_codes)
    assert p95(looks) < 0.3
