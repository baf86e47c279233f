#!/usr/bin/python3
"""kill -9 at any instant of a live session loses nothing that the screen said is saved.

One case, a stream of counted samples, marks typed at random, and SIGKILL at a random instant; again
and again. After each: the marks in the case are what was typed, in order, none twice, at least as
many as the title had called SAVED; the history verifies; and what the stream's file held when the
program was killed is in the recording that the next start makes of it, sample for sample.
LIVE_KILL_ROUNDS says how often (50: a round takes about a second and a half with the sanitizers).
"""
import glob
import os
import random
import shutil
import sqlite3
import sys
import tempfile
import time

from live_driver import INCISURA, Live, done, edflib_samples, marks, ok, run, until
import live_driver
from live_feeder import RATE_HZ, Feeder, header

ROUNDS = int(os.environ.get("LIVE_KILL_ROUNDS", "50"))
SYNC_S = 2  # the program syncs a file that often
SETTLED = 10  # every so many rounds the stream pauses, and all of it must be in the file
POINTS, SPANS, DOSES = "aTimxctozduLyhenJ", "gkjwC", {"p": "100", "R": "50", "f": "0,1 mg"}
CODES = dict(zip(POINTS, "in-theatre team-pause intubation mask-airway extubation incision trocar "
                         "organ-out closure head-down head-up level movement cough eyes-open "
                         "unresponsive sample".split()))
CODES.update(zip(SPANS, "gas cautery traction washout recruitment".split()))
CODES.update(zip(DOSES, "propofol rocuronium fentanyl".split()))


class Round:
    """One session until it is killed; `typed` holds the codes of all marks of the case so far."""

    def __init__(self, case, source, typed, open_spans):
        self.typed, self.open = typed, open_spans
        self.live = Live(case, source)
        self.up = bool(self.live.shows(r"SAVED"))
        self.acknowledged, self.incomplete = 0, 0
        self.look()

    def look(self):
        saved = self.live.saved()
        if saved and saved[0] >= self.acknowledged:
            self.acknowledged, self.incomplete = saved

    def watch(self, span_s):
        end = time.monotonic() + span_s
        while (left := end - time.monotonic()) > 0 and self.live.pump(left):
            self.look()

    def stamp(self):
        kind = random.random()
        key = random.choice(POINTS if kind < 0.6 else SPANS if kind < 0.8 else list(DOSES))
        self.live.type(key + (DOSES[key] + "\r" if key in DOSES else ""))
        if key in self.open:
            self.open.remove(key)
        else:
            self.typed.append(CODES[key])
            self.open.update(key if key in SPANS else "")

    def kill(self):
        self.live.kill()
        self.look()  # what was still on its way to the glass had been said


def check_marks(case, round_, known, number):
    """The marks of the case go on as they were typed; the rest of what was typed is forgotten."""
    stored = marks(case)
    codes = [mark["code"] for mark in stored]
    spans = {code: key for key, code in CODES.items() if key in SPANS}
    good = codes == round_.typed[:len(codes)] and len(codes) >= max(round_.acknowledged, known)
    # The title does not count spans that are still open.
    lacking = sum(mark["state"] == "incomplete" and
                  not (mark["code"] in spans and mark["until_s"] is None)
                  for mark in stored[:round_.acknowledged])
    good = good and lacking <= round_.incomplete
    if not good:
        ok(False, f"round {number}: what was SAVED is there",
           f"{len(codes)} marks, SAVED said {round_.acknowledged} ({round_.incomplete} incomplete, "
           f"found {lacking}); typed {round_.typed[known:]}, there {codes[known:]}")
    round_.open.clear()
    round_.open.update(spans[mark["code"]] for mark in stored
                       if mark["code"] in spans and mark["until_s"] is None)
    del round_.typed[len(codes):]
    return good, len(codes)


def in_file(path, record_bytes=25 * 3 + 30):
    """Whole records' samples in a file that is being written."""
    size = os.path.getsize(path) - len(header(25)) if path else 0
    return max(size, 0) // record_bytes * 25


def newest_part(folder, known):
    fresh = set(glob.glob(os.path.join(folder, "*.bdf"))) - known
    return fresh.pop() if fresh else None


def attached(case):
    with sqlite3.connect(f"file:{case}?mode=ro", uri=True) as store:
        return {row[0] for row in store.execute("SELECT path FROM recordings")}


def check_part(case, path, least, number):
    """The part of a killed session, after the next start."""
    path = os.path.realpath(path)
    if path not in attached(case):
        good = least < SYNC_S * RATE_HZ  # killed before it was noted, and before it was synced
        if not good:
            ok(False, f"round {number}: the stream's file is in the case", f"{path}, {least}")
        return good
    values = edflib_samples(path, 0)
    listed = run("inspect", path, "--json")
    counted = [round(value) for value in values] if isinstance(values, list) else []
    good = (listed.returncode == 0 and len(counted) >= least
            and counted == list(range(counted[0], counted[0] + len(counted))))
    if not good:
        ok(False, f"round {number}: what the file held is in the recording",
           f"{path}: {len(counted)} samples of {least}, {values if not counted else ''} "
           f"{listed.stderr}")
    return good


def settle(live, feeder, folder, known):
    """Lets some seconds come in, stops the device, waits until the file has it all."""
    live.watch(3)
    feeder.paused = True
    whole = (feeder.sent - feeder.since) // RATE_HZ * RATE_HZ
    if not until(lambda: in_file(newest_part(folder, known)) >= whole, pause=live.live.pump):
        ok(False, "the file has every full second that was sent", f"{whole} samples")
    return whole


def main():
    folder = tempfile.mkdtemp(prefix="incisura-kill-")
    os.environ["XDG_STATE_HOME"] = os.path.join(folder, "state")
    case, seed = os.path.join(folder, "K.case"), random.randrange(1 << 30)
    random.seed(seed)
    done("start", case, "--subject", "K", "--rater", "KM")
    feeder = Feeder(os.path.join(folder, "device"))
    typed, open_spans, count, parts, acked, streamed = [], set(), 0, set(), 0, 0
    all_marks = all_parts = verified = started = True
    waiting = None  # the last part, to be looked at after the next start
    for number in range(1, ROUNDS + 1):
        at = Round(case, "fifo:" + feeder.path, typed, open_spans)
        started = started and at.up and at.acknowledged == count
        if not (at.up and at.acknowledged == count):
            ok(False, f"round {number}: begins with all marks",
               f"{at.acknowledged} of {count}:\n{at.live.screen()}")
        if waiting:
            all_parts = check_part(case, *waiting, number) and all_parts
            streamed += waiting[1]
        least = settle(at, feeder, folder, parts) if number % SETTLED == 0 else 0
        feeder.paused = False
        for _ in range(random.randrange(5)):
            at.watch(random.expovariate(8))
            at.stamp()
        at.watch(random.expovariate(5))
        part = newest_part(folder, parts)
        least = max(least, in_file(part))
        at.kill()
        good, count = check_marks(case, at, count, number)
        all_marks, acked = all_marks and good, acked + at.acknowledged
        verified = run("history", case, "--verify").returncode == 0 and verified
        waiting = (part, least) if part else None
        parts.update([part] if part else [])
    feeder.end()
    last = Live(case)
    last.shows("SAVED")
    ok(last.leave() is not None, "a last session begins and ends")
    if waiting:
        all_parts = check_part(case, *waiting, ROUNDS) and all_parts
    ok(started, f"{ROUNDS} sessions began with every mark of the one that was killed")
    ok(all_marks and count > ROUNDS, f"all that was SAVED is there, in order, none twice (seed {seed})",
       f"{count} marks")
    ok(verified, "the history verifies after every kill")
    ok(all_parts and len(parts) > ROUNDS // SETTLED,
       "what streamed into the files is in the recordings", f"{len(parts)} parts")
    ok(not glob.glob(os.path.join(folder, "state", "incisura", "unsaved", "*")),
       "nothing is left in the second place")
    print(f"# {ROUNDS} kills, {count} marks, {len(parts)} parts, {streamed / RATE_HZ:.0f} s of stream")
    if live_driver.failed:
        print("# left for a look:", folder)
    else:
        shutil.rmtree(folder)
    return live_driver.failed > 0


sys.exit(main())
