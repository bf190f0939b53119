"""The listener: frames however they are cut, acknowledged after commit, duplicates once, killed at any moment."""

import asyncio
import contextlib
import json
import os
import signal
import socket
import sqlite3
import subprocess
import sys
import time
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from worksheet.transfer import hl7_message, routes
from worksheet.transfer.mllp import Listener
from worksheet.transfer.models import MessageState, RawMessage
from worksheet.transfer.people import machine
from worksheet.transfer.receive import receive
from worksheet.transfer.rows import Refused
from worksheet.ward.models import Entry

ROOT = Path(__file__).parents[2]
GAS = (
    "MSH|^~\\&|POC|LAB|HIS|U|20260211060000||ORU^R01|{id}|P|2.5.1\rPID|||K-2041^^^UNIT7^MR\r"
    "OBR|1|||24336-0^Gas panel - Arterial blood^LN|||{when}\rOBX|1|NM|2744-1^pH^LN||7.3||||||F\r"
    "OBX|2|NM|2703-7^pO2^LN||12.4|kPa|||||F\r"
)


def gas(id="M1", when="20260211054000"):
    return GAS.format(id=id, when=when).encode()


def framed(raw):
    return b"\x0b" + raw + b"\x1c\r"


@pytest.fixture
def units(unit, tmp_path):
    path = tmp_path / "units.json"
    path.write_text(json.dumps({"POC|LAB": {"unit": "u7", "zone": "Europe/Zurich"}}))
    return routes.read(path)


@pytest.fixture
def take(units, stay):
    user = machine("interface")
    return lambda raw: receive(raw, units, user)


def test_acknowledged_stored_and_kept_raw(take):
    answer = take(gas())
    assert (answer.code, Entry.objects.count()) == ("AA", 1)
    kept = RawMessage.objects.get()
    assert bytes(kept.content) == gas()
    assert kept.state == MessageState.STORED
    assert kept.report["fates"] == {"new": 2}
    text = answer.encoded().decode()
    assert text.startswith("MSH|^~\\&|HIS|U|POC|LAB|")
    assert "\rMSA|AA|M1|\r" in text


def test_a_duplicate_is_acknowledged_and_not_stored_twice(take):
    take(gas())
    assert take(gas()).code == "AA"
    assert (RawMessage.objects.count(), Entry.objects.count()) == (1, 1)


def test_the_same_id_with_other_content_is_not_lost(take):
    take(gas())
    assert take(gas(when="20260211064000")).code == "AA"
    assert Entry.objects.count() == 2


@pytest.mark.parametrize(
    "raw,code,words",
    [
        (b"garbage", "AR", "does not begin with MSH"),
        (gas().replace(b"ORU^R01", b"ADT^A01"), "AR", "only ORU"),
        (gas().replace(b"POC|LAB", b"XXX|YYY"), "AR", "no unit is mapped"),
        (gas().replace(b"|P|", b"|T|"), "AR", "training or test"),
        (gas()[:48], "AR", "version"),
        (gas().split(b"OBR")[0], "AR", "no result"),
        (gas() + b"\x00", "AR", "NUL"),
    ],
)
def test_refused_messages_are_kept_with_their_reason(take, raw, code, words):
    answer = take(raw)
    assert answer.code == code
    assert words in answer.reason
    kept = RawMessage.objects.get()
    assert (kept.state, kept.reason) == (MessageState.DEAD, answer.reason)
    assert f"MSA|{code}|" in answer.encoded().decode()
    assert not Entry.objects.exists()


def test_an_error_here_is_ae_and_can_be_sent_again(take, monkeypatch):
    from worksheet.transfer import pipeline

    def fail(*args, **kwargs):
        raise RuntimeError("disk")

    with monkeypatch.context() as patched:
        patched.setattr(pipeline, "store", fail)
        assert take(gas()).code == "AE"
    assert RawMessage.objects.get().state == MessageState.DEAD
    assert take(gas()).code == "AA"
    assert (RawMessage.objects.get().state, Entry.objects.count()) == (MessageState.STORED, 1)


def test_unmatched_results_wait_and_are_acknowledged(take, unit):
    assert take(gas().replace(b"K-2041", b"K-9999")).code == "AA"
    assert {q.fate for q in unit.queued_rows.all()} == {"unmatched"}
    assert not Entry.objects.exists()


@pytest.mark.parametrize(
    "text,words",
    [
        ("{", "not valid JSON"),
        ("{}", "has to look like"),
        ('{"*": "nowhere"}', "no unit 'nowhere'"),
        ('{"*": 3}', "has to name a unit"),
        ('{"*": {"unit": "u7", "zone": "Mars/Base"}}', "unknown time zone"),
        ('{"*": {"unit": "u7", "codes": {"X": "sodium"}}}', "unknown quantities"),
    ],
)
def test_unit_maps_that_cannot_be_used_are_one_sentence(unit, tmp_path, text, words):
    path = tmp_path / "units.json"
    path.write_text(text)
    with pytest.raises(Refused, match=words):
        routes.read(path)


def test_local_codes_of_the_unit_map(unit, stay, tmp_path):
    path = tmp_path / "units.json"
    path.write_text('{"POC": {"unit": "u7", "codes": {"LAC1": "lactate"}}}')
    raw = gas().replace(b"2744-1^pH^LN||7.3|", b"LAC1^local^L||2.1|mmol/L")
    assert receive(raw, routes.read(path), machine("interface")).code == "AA"
    assert Entry.objects.get().lactate == 2.1


@given(
    st.lists(st.binary(max_size=20).map(lambda b: b.replace(b"\x0b", b"").replace(b"\x1c", b"")), max_size=6), st.data()
)
def test_frames_come_out_whole_however_the_stream_is_cut(payloads, data):
    stream = b"".join(framed(p) for p in payloads)
    cuts = sorted(data.draw(st.lists(st.integers(0, len(stream)), max_size=8)))
    buffer, out = bytearray(), []
    for a, b in zip([0, *cuts], [*cuts, len(stream)], strict=True):
        buffer += stream[a:b]
        out += list(hl7_message.frames(buffer))
    assert out == payloads


def test_the_loop_answers_split_and_merged_segments():
    async def talk():
        seen = []

        def handle(raw):
            seen.append(raw)
            return b"ACK" + raw

        listener, where = Listener("127.0.0.1", 0, handle), asyncio.get_running_loop().create_future()
        server = asyncio.create_task(listener.serve(lambda host, port: where.set_result((host, port))))
        reader, writer = await asyncio.open_connection(*await where)
        for piece in (b"\x0bon", b"e\x1c", b"\r\x0btwo\x1c\r\x0bthr", b"ee\x1c\r"):
            writer.write(piece)
            await writer.drain()
            await asyncio.sleep(0.01)
        got = b""
        while got.count(b"\x1c\r") < 3:
            got += await asyncio.wait_for(reader.read(1000), 5)
        writer.close()
        listener.stop()
        await server
        return seen, got

    with ThreadPoolExecutor(1) as apart:  # a browser test of the same run may hold a loop in this thread
        seen, got = apart.submit(lambda: asyncio.run(talk())).result()
    assert seen == [b"one", b"two", b"three"]
    assert got == framed(b"ACKone") + framed(b"ACKtwo") + framed(b"ACKthree")


def free_port():
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return probe.getsockname()[1]


class Running:
    """A listener process with a database of its own."""

    def __init__(self, folder):
        self.folder, self.port = folder, free_port()
        self.env = {**os.environ, "WORKSHEET_DATA": str(folder), "WORKSHEET_DATABASE": "", "PYTHONWARNINGS": "error"}
        (folder / "units.json").write_text('{"*": {"unit": "u7", "unknown_stays": "create"}}')
        self.manage("migrate", "-v0")
        self.manage("shell", "-c", "from worksheet.ward.models import Unit; Unit.objects.create(name='U', slug='u7')")

    def manage(self, *args):
        subprocess.run([sys.executable, "manage.py", *args], cwd=ROOT, env=self.env, check=True, capture_output=True)

    def start(self):
        command = [
            sys.executable,
            "manage.py",
            "hl7_listener",
            "--bind",
            f"127.0.0.1:{self.port}",
            "--unit-map",
            str(self.folder / "units.json"),
        ]
        process = subprocess.Popen(command, cwd=ROOT, env=self.env, stdout=subprocess.PIPE, text=True)
        assert "Listening" in process.stdout.readline()
        return process

    def stored(self):
        with sqlite3.connect(self.folder / "worksheet.sqlite3") as db:
            rows = db.execute("select stay_id, time, site, count(*) from ward_entry group by 1, 2, 3").fetchall()
            messages = db.execute("select control_id, state from transfer_rawmessage").fetchall()
        db.close()
        return rows, dict(messages)


@pytest.mark.slow
def test_killed_at_any_moment_nothing_acknowledged_is_lost_and_nothing_stored_twice(tmp_path):
    running = Running(tmp_path)
    acknowledged, sent = set(), 0
    for round_number in range(6):
        process = running.start()
        line = socket.create_connection(("127.0.0.1", running.port), timeout=10)
        deadline = time.monotonic() + 0.25 + 0.11 * round_number
        waiting = b""
        try:
            while time.monotonic() < deadline:
                sent += 1
                line.sendall(
                    framed(gas(f"K{sent}", f"202602{1 + sent // 1440:02d}{sent // 60 % 24:02d}{sent % 60:02d}00"))
                )
                if sent % 3 == 0:  # sends ahead of the answers
                    line.settimeout(0.05)
                    with contextlib.suppress(TimeoutError):
                        waiting += line.recv(65536)
        finally:
            process.send_signal(signal.SIGKILL)
            process.wait()
            process.stdout.close()
        line.settimeout(1)
        try:
            while piece := line.recv(65536):
                waiting += piece
        except (TimeoutError, ConnectionError):
            pass
        line.close()
        acknowledged |= {part.split(b"|")[2].decode() for part in waiting.split(b"\r") if part.startswith(b"MSA|AA|")}
    assert len(acknowledged) > 20
    rows, messages = running.stored()
    assert all(messages.get(name) == "stored" for name in acknowledged)
    process = running.start()
    with socket.create_connection(("127.0.0.1", running.port), timeout=20) as line:
        got = b""
        for number in range(1, sent + 1):  # the sender repeats everything it is not sure of
            line.sendall(
                framed(gas(f"K{number}", f"202602{1 + number // 1440:02d}{number // 60 % 24:02d}{number % 60:02d}00"))
            )
            while got.count(b"\x1c\r") < number:
                got += line.recv(65536)
    process.send_signal(signal.SIGTERM)
    assert process.wait(10) == 0
    process.stdout.close()
    rows, messages = running.stored()
    assert len(rows) == sent
    assert {count for *_, count in rows} == {1}
