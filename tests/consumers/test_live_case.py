#!/usr/bin/python3
"""A whole case, live: as many samples as six hours of 250 Hz have, forty typed marks of all kinds,
three kills, a full disk. Then every mark is in the case at the sample that was being taken when its
key was pressed, every part of the stream is attached, and an export finds valid samples around them.

The device plays in real time at a higher rate, so that its clock stays a clock: LIVE_CASE_SECONDS
(40) is how long, LIVE_CASE_HOURS (6) how much of 250 Hz it makes in that time. Samples count, which
is how a mark's place in the stream is known: the value under it is the number of the sample.
"""
import csv
import glob
import os
import shutil
import sqlite3
import subprocess
import sys
import tempfile
import time

import live_driver
from live_driver import Live, done, edflib_samples, marks, ok, run, until
from live_feeder import Feeder

SECONDS = float(os.environ.get("LIVE_CASE_SECONDS", "40"))
HOURS = float(os.environ.get("LIVE_CASE_HOURS", "6"))
RATE_HZ = round(HOURS * 3600 * 250 / SECONDS / 10) * 10
NEAR_S = 0.05  # from key to mark, and from sample to clock
KILLS, FULL = (10, 20, 30), 25  # after how many marks
# Keys, and how many seconds before them the mark's instant is.
TYPED = [("c", 0), ("g", 0), ("p100,5\r", 0), ("P4\r", 0), ("\rcalm\r", 0), ("\x14", 0),
         ("2a", 2), ("f0,1 mg\r", 0), ("k", 0), ("T", 0)] * 4
RECIPE = """[events]
codes = *
[window]
before = 0.05
after = 0.05
rate = 200
valid = 0.9
[signals]
count-1 = channel "Count"
"""

folder = tempfile.mkdtemp(prefix="incisura-case-")
os.environ["XDG_STATE_HOME"] = os.path.join(folder, "state")
disk = os.path.join(folder, "disk")
os.makedirs(disk)
mounted = subprocess.run(["mount", "-t", "tmpfs", "-o", "size=64m", "none", disk],
                         capture_output=True).returncode == 0
case = os.path.join(disk, "W.case")


class Session:
    def __init__(self, feeder, count):
        self.live, self.feeder, self.count = Live(case, "fifo:" + feeder.path), feeder, count
        ok(self.live.wait_saved(count), f"a session begins with {count} marks", self.live.screen())
        ok(self.live.shows("receiving"), "and receives", self.live.screen())
        began = feeder.sent
        until(lambda: feeder.sent > began + RATE_HZ / 2, pause=self.live.pump)

    def stamp(self, keys, ago_s, opens):
        """Types; between which samples the mark's instant is, in the order of marks in the case."""
        before = self.feeder.playing()
        self.live.type(keys)
        self.count += opens
        title = f"{self.count} mark"
        shown = until(lambda: title in self.live.glass.title, pause=self.live.pump)
        after = self.feeder.playing()
        if not shown:
            ok(False, f"{keys!r} makes a mark", self.live.screen())
        return before - ago_s * RATE_HZ, after - ago_s * RATE_HZ


def fill(live, session):
    """Until marks cannot be saved; where nothing can be mounted, the case is moved away instead."""
    filler = os.path.join(disk, "filler")
    if mounted:
        with open(filler, "wb", buffering=0) as file:
            try:
                while True:
                    file.write(bytes(1 << 16))
            except OSError:  # full
                pass
    else:
        os.rename(case, filler)
    for _ in range(50):
        session.stamp("m", 0, 1)
        if until(lambda: live.saved() or "NOT SAVED" in live.glass.title, pause=live.pump) \
                and "NOT SAVED" in live.glass.title:
            break
    ok(live.shows("NOT SAVED"), "the full disk is told", live.screen())
    return filler


def empty(live, filler, count):
    os.unlink(filler) if mounted else os.rename(filler, case)
    ok(live.wait_saved(count), "and is over", live.screen())


def play(feeder):
    """All that is typed; [code key, first sample, last sample] of each typed mark in order."""
    places, session, open_spans = [], Session(feeder, 0), set()
    pause_s = SECONDS / len(TYPED) / 2
    for number, (keys, ago_s) in enumerate(TYPED):
        if number in KILLS:
            session.live.wait_saved(session.count)
            session.live.kill()
            said = run("marks", case)
            ok("not attached yet" in said.stderr, f"after kill {number}, reading says what waits",
               said.stderr)
            session = Session(feeder, session.count)
        if number == FULL:
            filler = fill(session.live, session)
        if number == FULL + 3:
            empty(session.live, filler, session.count)
        opens = keys not in open_spans
        place = session.stamp(keys, ago_s, opens)
        if keys in "gk":
            open_spans ^= {keys}
        if opens:
            places.append(place)
        end = time.monotonic() + pause_s
        until(lambda: time.monotonic() > end, pause=session.live.pump)
    ok(session.live.wait_saved(session.count), "all is SAVED at the end", session.live.screen())
    until(lambda: feeder.playing() > SECONDS * RATE_HZ, SECONDS, session.live.pump)
    ok(session.live.leave() is not None, "leaves")
    return places, session.count


def check_parts():
    parts = {os.path.realpath(path) for path in glob.glob(os.path.join(disk, "*.bdf"))}
    with sqlite3.connect(f"file:{case}?mode=ro", uri=True) as store:
        attached = {row[0] for row in store.execute("SELECT path FROM recordings")}
    ok(parts == attached and len(parts) >= 1 + len(KILLS), "all parts are attached",
       f"{parts ^ attached}")
    samples, whole = 0, True
    for path in sorted(parts):
        values = edflib_samples(path, 0)
        good = not isinstance(values, str) and len(values) > 0 and all(
            round(value) == round(values[0]) + k for k, value in enumerate(values))
        whole = whole and good
        samples += len(values) if good else 0
    ok(whole, "no sample of them is lost or doubled")
    return samples


def check_marks(places):
    """The value under a typed mark says which sample was taken then. Each part of the stream is a
    recording, and all of them together one channel."""
    recipe, out = os.path.join(folder, "r.ini"), os.path.join(folder, "out")
    with open(recipe, "w") as file:
        file.write(RECIPE)
    done("export", case, "--recipe", recipe, "--into", out)
    with open(os.path.join(out, "windows-long.csv"), newline="") as file:
        rows = list(csv.DictReader(file))
    typed = [mark for mark in marks(case) if mark["code"] != "mask-airway"]
    values = {int(row["mark"]): float(row["value"]) for row in rows
              if abs(float(row["t_s"])) < 1e-9 and row["value"] and row["valid"] == "1"}
    ok(len(typed) == len(places), "every typed mark is there, once", f"{len(typed)} {len(places)}")
    late, bad = [], []
    for mark, (first, last) in zip(typed, places):
        value = values.get(mark["id"])
        if value is None or not first - NEAR_S * RATE_HZ <= value <= last + NEAR_S * RATE_HZ:
            bad.append((mark["id"], mark["code"], first, value, last))
        else:
            late.append((value - first) / RATE_HZ * 1000)
    ok(not bad, "each on the sample that was taken when its key was pressed", bad)
    late.sort(key=abs)
    return late


def main():
    done("start", case, "--subject", "W", "--rater", "KM")
    feeder = Feeder(os.path.join(folder, "device"), RATE_HZ)
    began = time.monotonic()
    places, count = play(feeder)
    feeder.end()
    ok(run("history", case, "--verify").returncode == 0, "the history verifies")
    ok(not glob.glob(os.path.join(folder, "state", "incisura", "unsaved", "*")),
       "the second place is empty")
    samples = check_parts()
    late = check_marks(places)
    if late:
        print(f"# {samples / 250 / 3600:.2f} h of 250 Hz in {time.monotonic() - began:.0f} s, "
              f"{count} marks; from key to sample: median {late[len(late) // 2]:.1f} ms, "
              f"farthest {late[-1]:.1f} ms")
    return live_driver.failed > 0


def clean():
    if mounted:
        subprocess.run(["umount", "--lazy", disk], check=True)
    shutil.rmtree(folder)


try:
    sys.exit(main())
finally:
    clean()
