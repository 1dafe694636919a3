"""What the black-box tests share: the program as processes, its record as plain SQL, the rehearsal's own log."""
import json
import os
import shutil
import signal
import socket
import sqlite3
import subprocess
import tempfile
import time
import urllib.request


def unescape(text):
    """Undoes the escapes of the rehearsal's log: \\t \\n \\r \\\\ \\xHH."""
    out, i = [], 0
    while i < len(text):
        if text[i] != "\\":
            out.append(text[i])
            i += 1
        elif text[i + 1] == "x":
            out.append(chr(int(text[i + 2:i + 4], 16)))
            i += 4
        else:
            out.append({"t": "\t", "n": "\n", "r": "\r", "\\": "\\"}[text[i + 1]])
            i += 2
    return "".join(out)


def read_log(path):
    """Entries of the rehearsal's log as dictionaries."""
    names = ["sent_ns", "sent_wall_ns", "instrument", "kind", "number", "fault", "query", "reply"]
    entries = []
    with open(path, encoding="latin-1") as lines:
        for line in lines:
            parts = line.rstrip("\n").split("\t")
            if len(parts) != len(names) or not parts[0].isdigit():
                continue
            entry = dict(zip(names, parts))
            entry["sent_ns"] = int(entry["sent_ns"])
            entry["sent_wall_ns"] = int(entry["sent_wall_ns"])
            entry["query"] = unescape(entry["query"])
            entry["reply"] = unescape(entry["reply"])
            entries.append(entry)
    return entries


class Bench:
    """A rehearsed bench and a daemon as processes of their own, in a folder of their own."""

    def __init__(self, program, source, seed=1, faults=None):
        self.program, self.source = program, source
        self.folder = tempfile.mkdtemp(prefix="ls-", dir="/tmp")
        self.env = dict(os.environ, LOADSTAIR_RUNTIME=os.path.join(self.folder, "rt"), NO_COLOR="1")
        self.record = os.path.join(self.folder, "record.db")
        self.log_path = os.path.join(self.folder, "rehearsal.log")
        self.hookup = os.path.join(source, "sample-captures", "north_bench.hookup.json")
        self.seed = seed
        self.faults = faults
        self.rehearsal = None
        self.daemon = None
        self.daemon_out = open(os.path.join(self.folder, "daemon.out"), "ab")

    def start_rehearsal(self):
        arguments = [self.program, "rehearse", self.hookup, "--folder", os.path.join(self.folder, "b"), "--captures",
                     os.path.join(self.folder, "captures"), "--log", self.log_path, "--seed", str(self.seed)]
        if self.faults:
            path = os.path.join(self.folder, "faults.txt")
            with open(path, "w") as out:
                out.write(self.faults)
            arguments += ["--faults", path]
        self.rehearsal = subprocess.Popen(arguments, env=self.env, stdout=self.daemon_out, stderr=self.daemon_out)
        self.wait(lambda: os.path.exists(os.path.join(self.folder, "b", "hookup.json")), "the rehearsal to start")

    def start_daemon(self, extra_env=None):
        env = dict(self.env, **(extra_env or {}))
        self.daemon = subprocess.Popen(
            [self.program, "daemon", "--hookup", os.path.join(self.folder, "b", "hookup.json"), "--record", self.record],
            env=env, stdout=self.daemon_out, stderr=self.daemon_out)
        self.wait(lambda: self.address() is not None, "the daemon to publish its address")

    def address(self):
        runtime = self.env["LOADSTAIR_RUNTIME"]
        for name in os.listdir(runtime) if os.path.isdir(runtime) else []:
            if not name.endswith(".json"):
                continue
            with open(os.path.join(runtime, name)) as text:
                found = json.load(text)
            if found["process"] == self.daemon.pid:
                return found
        return None

    def call(self, path, body=None):
        address = self.address()
        request = urllib.request.Request(f"http://127.0.0.1:{address['port']}/api/v1/{path}")
        data = None
        if body is not None:
            data = json.dumps(body).encode()
            request.add_header("Content-Type", "application/json")
            request.add_header("Authorization", "Bearer " + address["token"])
        with urllib.request.urlopen(request, data, timeout=20) as reply:
            return json.load(reply)

    def ask(self, line):
        """One line to the rehearsal's control socket."""
        with socket.socket(socket.AF_UNIX) as talk:
            talk.settimeout(20)
            talk.connect(os.path.join(self.folder, "b", "control"))
            talk.sendall((line + "\n").encode())
            answer = b""
            while not answer.endswith(b"\n"):
                part = talk.recv(4096)
                if not part:
                    break
                answer += part
        return answer.decode().strip()

    def begin(self, stair):
        with open(stair) as text:
            return self.call("runs", {"stair": text.read(), "file": stair})["run"]

    def attend(self):
        """Answers whatever is asked, once; returns the state of the run. The one hand prompt of short.stair.json is
        about two lamps."""
        run = self.call("state")["run"]
        prompt = run["prompt"]
        if prompt and prompt["kind"] == "hand":
            self.ask("hand lamps 2")
            self.call("prompt/answer", {"prompt": prompt["id"], "by": "rehearsal"})
        elif prompt:
            value, unit, full, digit = self.ask("typed " + prompt["channel"]).split()
            self.call("prompt/typed", {"prompt": prompt["id"], "value": value, "unit": unit, "range": full,
                                       "last_digit": digit, "by": "rehearsal",
                                       "confirmed": prompt["kind"] == "confirm"})
        return run

    def wait(self, ready, what, limit_s=20.0):
        until = time.monotonic() + limit_s
        while not ready():
            if time.monotonic() > until:
                raise AssertionError(f"waited {limit_s} s for {what}; see {self.folder}")
            time.sleep(0.02)

    def sql(self, text, *values):
        with sqlite3.connect(f"file:{self.record}?mode=ro", uri=True) as connection:
            return connection.execute(text, values).fetchall()

    def command(self, *arguments):
        return subprocess.run([self.program, *arguments], env=self.env, capture_output=True, text=True, timeout=300)

    def close(self, keep=False):
        for process in (self.daemon, self.rehearsal):
            if process and process.poll() is None:
                process.send_signal(signal.SIGTERM)
        for process in (self.daemon, self.rehearsal):
            if process:
                try:
                    process.wait(15)
                except subprocess.TimeoutExpired:
                    process.kill()
        self.daemon_out.close()
        if not keep:
            shutil.rmtree(self.folder, ignore_errors=True)


USABLE_FORBIDDEN = 1 | 2 | 4 | 8 | 128 | 256  # overload, invalid, stale, unit changed, superseded, missing


def check_readings_against_log(bench, run):
    """Every reading flagged good is the reply to its own query, as the rehearsal logged it. Returns how many."""
    by_key = {}
    for entry in read_log(bench.log_path):
        if entry["kind"] in ("reply", "line"):
            by_key.setdefault((entry["instrument"], entry["query"], entry["reply"]), []).append(entry)
    rows = bench.sql("""SELECT DISTINCT reply.instrument, reply.query, reply.text, reply.sent_ns, reply.received_ns
                        FROM reading JOIN reply ON reply.id = reading.reply
                        WHERE reading.run = ? AND (reading.flags & ?) = 0""", run, USABLE_FORBIDDEN)
    offset = bench.sql("SELECT utc_offset_ns FROM run WHERE id = ?", run)[0][0]
    assert rows, "the run has no good reading at all"
    slack = 5_000_000
    for instrument, query, text, sent, received in rows:
        entries = by_key.get((instrument, query, text), [])
        # A query's reply begins to leave the instrument between query and its last byte's arrival; a printed line
        # begins before its first byte arrives.
        low = sent - slack if query else sent - 1_500_000_000
        fits = [e for e in entries if low <= e["sent_ns"] + offset <= received + slack]
        assert fits, f"{instrument}: {query!r} -> {text!r} at {sent} is no reply to its own query"
    return len(rows)
