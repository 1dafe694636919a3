"""kill -9 of the daemon at seeded instants of a run: on restart the bench is safe, the run is marked interrupted, and
every reading older than 250 ms at the kill is in the record."""
import os
import random
import signal
import subprocess
import sys
import time

from bench_tools import Bench, read_log

program, source = sys.argv[1], sys.argv[2]
slow_sync = sys.argv[3]
instants = int(os.environ.get("LOADSTAIR_KILLS", "20"))
seed = int(os.environ.get("LOADSTAIR_SEED", "20261201"))

# How long a reply may be on its way: the longest line at 9600 baud and the poll loop's turn.
TRANSIT_NS = 120_000_000
# A stored reply is the one that was sent if it has its text and came within this; on a busy machine it may be late.
ARRIVAL_NS = 1_000_000_000
DURABLE_NS = 250_000_000


def kill(bench):
    """Returns the monotonic instant of the kill."""
    os.kill(bench.daemon.pid, signal.SIGKILL)
    at = time.clock_gettime_ns(time.CLOCK_MONOTONIC)
    bench.daemon.wait()
    return at


def kill_inside_commit(bench, chance):
    """The library preloaded into the daemon stops inside a sync call when the file 'stall' appears, and says so."""
    time.sleep(chance.uniform(1.0, 4.0))
    open(os.path.join(bench.folder, "stall"), "w").close()
    stalled = os.path.join(bench.folder, "stalled")
    bench.wait(lambda: os.path.exists(stalled), "a commit")
    at = kill(bench)
    os.remove(os.path.join(bench.folder, "stall"))
    os.remove(stalled)
    return at


def kill_inside_set_point(bench, before):
    """The load has taken the command and its read-back is still to come."""
    bench.wait(lambda: any(e["kind"] == "set" and e["instrument"] == "ac load" and "POW" in e["query"]
                           for e in read_log(bench.log_path)[before:]), "a set-point change")
    return kill(bench)


def check_readings(bench, run, log, killed_at):
    began = min(row[0] for row in bench.sql("SELECT sent_ns FROM reply WHERE run = ?", run) or [(None,)])
    offset = bench.sql("SELECT utc_offset_ns FROM run WHERE id = ?", run)[0][0]
    stored = {}
    for instrument, text, received in bench.sql("SELECT instrument, text, received_ns FROM reply WHERE run = ?", run):
        stored.setdefault((instrument, text), []).append(received - offset)
    latest = killed_at - DURABLE_NS - TRANSIT_NS
    owed = [e for e in log if e["kind"] in ("reply", "line") and began - offset + 500_000_000 < e["sent_ns"] < latest
            and e["instrument"] in ("output wattmeter", "shunt meter", "thermocouple reader") and e["reply"]
            and not e["query"].startswith("*")]
    # The same text may come often: the one that is owed arrived just after it was sent.
    missing = [e for e in owed if not any(0 < at - e["sent_ns"] < ARRIVAL_NS
                                          for at in stored.get((e["instrument"], e["reply"]), []))]
    assert not missing, (f"{len(missing)} of {len(owed)} replies are lost, the first, sent "
                         f"{(killed_at - missing[0]['sent_ns']) / 1e6:.0f} ms before the kill: {missing[0]}")
    return len(owed)


def check_safe(bench, before):
    """After the restart both outputs were switched off, and then read back as off."""
    def switched_off(instrument, command, query):
        entries = [e for e in read_log(bench.log_path)[before:] if e["instrument"] == instrument]
        sent = [i for i, e in enumerate(entries) if e["kind"] == "set" and command in e["query"]]
        return sent and any(e["kind"] == "reply" and e["query"] == query and e["reply"].strip() == "0"
                            for e in entries[sent[0]:])
    bench.wait(lambda: switched_off("dc source", "OUTP OFF", "OUTP?") and switched_off("ac load", "INP OFF", "INP?"),
               "the safe state after the restart")


def main():
    chance = random.Random(seed)
    print(f"seed {seed}, {instants} kills")
    bench = Bench(program, source, seed=5)
    stair = os.path.join(source, "tests", "whole", "short.stair.json")
    owed = 0
    good = False
    try:
        bench.start_rehearsal()
        for number in range(instants):
            how = ("commit", "set point", "any")[number % 3 if number < 6 else 2]
            extra = {"LD_PRELOAD": slow_sync, "LOADSTAIR_STALL": bench.folder} if how == "commit" else None
            bench.start_daemon(extra)
            bench.wait(lambda: all(i["ready"] or i["state"] == "watching folder"
                                   for i in bench.call("state")["instruments"]), "the instruments")
            before = len(read_log(bench.log_path))
            run = bench.begin(stair)  # answered before the run is on the disk, and before anything is commanded
            if how == "commit":
                killed_at = kill_inside_commit(bench, chance)
            elif how == "set point":
                killed_at = kill_inside_set_point(bench, before)
            else:
                until = time.monotonic() + chance.uniform(0.3, 8.0)
                while time.monotonic() < until:
                    bench.attend()
                    time.sleep(0.05)
                killed_at = kill(bench)
            log = read_log(bench.log_path)
            bench.start_daemon()
            check_safe(bench, len(log))
            bench.wait(lambda: bench.sql("SELECT state FROM run WHERE id = ?", run) == [("interrupted",)],
                       "the run to be marked interrupted")
            assert bench.sql("PRAGMA integrity_check") == [("ok",)]
            if bench.sql("SELECT count(*) FROM reply WHERE run = ?", run)[0][0]:
                owed += check_readings(bench, run, log[before:], killed_at)
            bench.daemon.send_signal(signal.SIGTERM)
            assert bench.daemon.wait(20) == 0
            print(f"kill {number + 1} ({how}): run {run} interrupted, bench safe, nothing owed is missing")
        good = True
    finally:
        bench.close(keep=not good)
    assert owed > 10 * instants, "the check compared too little to mean anything"
    print(f"{owed} replies older than 250 ms at their kill are all in the record")


main()
