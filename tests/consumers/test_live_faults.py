#!/usr/bin/python3
"""A live session through a full disk, a case that is moved, removed, made read-only, and kills in
the midst of it: the loud line is there, marks lie in the second place, and when the fault is gone
all of them are in the case, once.

The disk is a small tmpfs where the script may mount one; else a limit of the size of files.
"""
import atexit
import glob
import os
import resource
import shutil
import signal
import subprocess
import sys
import tempfile

import live_driver
from live_driver import Live, done, edflib_samples, marks, ok, run, until
from live_feeder import RATE_HZ, Feeder

ROOM = 1 << 20
CODES = {"c": "incision", "a": "in-theatre", "T": "team-pause", "m": "mask-airway"}
folder = tempfile.mkdtemp(prefix="incisura-faults-")
atexit.register(shutil.rmtree, folder)  # after the disks in it, which are registered later
state = os.path.join(folder, "state")
os.environ["XDG_STATE_HOME"] = state


def lying():
    return glob.glob(os.path.join(state, "incisura", "unsaved", "*", "*"))


def make_case(name):
    case = os.path.join(folder, name, "F.case")
    os.makedirs(os.path.dirname(case), exist_ok=True)
    done("start", case, "--subject", "F", "--rater", "KM")
    return case


def begin(case, *sources, count=0, before=None):
    live = Live(case, *sources, before=before)
    ok(live.wait_saved(count), "a session begins", live.screen())
    return live


def check_case(case, keys, what):
    codes = [mark["code"] for mark in marks(case)]
    ok(codes == [CODES[key] for key in keys], what, f"{codes} of {keys}")
    ok(run("history", case, "--verify").returncode == 0, "the history verifies")
    ok(not lying(), "the second place is empty", lying())


class Disk:
    """A folder that can be full."""

    def __init__(self, name):
        self.path = os.path.join(folder, name)
        os.makedirs(self.path)
        self.mounted = subprocess.run(
            ["mount", "-t", "tmpfs", "-o", f"size={ROOM}", "none", self.path],
            capture_output=True).returncode == 0
        self.filler = os.path.join(self.path, "filler")
        atexit.register(self.end)

    @staticmethod
    def before():
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)

    def fill(self, live):
        if not self.mounted:
            size = os.path.getsize(glob.glob(os.path.join(self.path, "*.case-wal"))[0])
            resource.prlimit(live.pid, resource.RLIMIT_FSIZE, (size, resource.RLIM_INFINITY))
            return
        with open(self.filler, "wb", buffering=0) as filler:
            try:
                while True:
                    filler.write(bytes(4096))
            except OSError:  # full
                pass

    def free(self, live):
        if self.mounted:
            os.unlink(self.filler)
        elif live:
            resource.prlimit(live.pid, resource.RLIMIT_FSIZE,
                             (resource.RLIM_INFINITY, resource.RLIM_INFINITY))

    def end(self):
        if self.mounted:
            subprocess.run(["umount", "--lazy", self.path], check=True)


def stamp_until_failing(live, count):
    """A log that was emptied has room in it even on a full disk; how many marks there are then."""
    for _ in range(300):
        live.type("c")
        count += 1
        shown = until(lambda: live.saved() == (count, 0) or "NOT SAVED" in live.glass.title,
                      pause=live.pump)
        if not shown or "NOT SAVED" in live.glass.title:
            break
    return count


def full_disk():
    disk = Disk("full")
    case = make_case("full")
    feeder = Feeder(os.path.join(folder, "device"))
    live = begin(case, "fifo:" + feeder.path, before=disk.before)
    ok(live.shows("receiving"), "a stream comes in", live.screen())
    disk.fill(live)
    count = stamp_until_failing(live, 0)
    ok(live.shows(r"NOT SAVED \d+, kept in the second place, trying again"),
       "a full disk is told loudly", live.screen())
    live.type("caTm")
    count += 4
    ok(live.shows(rf"{count} marks   NOT SAVED"), "and letters go on", live.screen())
    ok(until(lambda: lying(), pause=live.pump), "marks lie in the second place")
    ok(live.shows(r"cough"), "the codes are still in sight", live.screen())
    disk.free(live)
    ok(live.wait_saved(count), "all is SAVED when there is room again", live.screen())
    ok(until(lambda: not lying(), pause=live.pump), "and the second place is empty", lying())
    sent = feeder.sent
    feeder.paused = True
    status = live.leave()
    ok(status == 0, "leaves", f"{status}: {live.screen()}")
    check_case(case, "c" * (count - 4) + "caTm", "the full disk lost no mark")
    parts = sorted(glob.glob(os.path.join(disk.path, "*.bdf")))
    values = edflib_samples(parts[0], 0) if parts else []
    counted = [round(v) for v in values] if isinstance(values, list) else []
    ok(len(counted) > 0 and counted == list(range(counted[0], counted[0] + len(counted)))
       and counted[-1] + 1 >= sent - RATE_HZ,
       "nor any sample: those that came meanwhile waited in memory",
       f"{len(parts)} parts, {len(counted)} of {sent}, {values if not counted else ''}")
    feeder.end()


def both_full():
    """The second place is on the same disk."""
    disk = Disk("both")
    case = make_case("both")
    os.environ["XDG_STATE_HOME"] = os.path.join(disk.path, "state")
    live = begin(case, before=disk.before)
    disk.fill(live)
    if not disk.mounted:
        resource.prlimit(live.pid, resource.RLIMIT_FSIZE, (0, resource.RLIM_INFINITY))
    count = stamp_until_failing(live, 0)
    ok(live.shows(r"NOWHERE but here, trying again"), "two full disks are told", live.screen())
    disk.free(live)
    ok(live.wait_saved(count), "and all is saved when there is room", live.screen())
    ok(live.leave() is not None, "leaves")
    os.environ["XDG_STATE_HOME"] = state
    check_case(case, "c" * count, "no mark was lost between two full disks")


def kill_on_full_disk():
    disk = Disk("killed")
    case = make_case("killed")
    live = begin(case, before=disk.before)
    disk.fill(live)
    count = stamp_until_failing(live, 0)
    ok(live.shows("kept in the second place"), "kept", live.screen())
    live.kill()
    ok(len(lying()) == 1, "killed while failing: marks lie in the second place", lying())
    disk.free(None)
    live = begin(case, count=count)
    ok(live.leave() is not None, "the next session leaves")
    check_case(case, "c" * count, "the next start brought them in, once")


def moved(kill):
    case = make_case("moved-killed" if kill else "moved")
    away = case + ".away"
    live = begin(case)
    live.type("ca")
    ok(live.wait_saved(2), "two marks", live.screen())
    os.rename(case, away)
    ok(live.shows("NOT SAVED 2, kept in the second place.*moved or removed"),
       "a case that is moved away is told without any key", live.screen())
    live.type("Tm")
    ok(live.shows("NOT SAVED 4, kept in the second place"), "letters go on", live.screen())
    if kill:
        live.kill()
        os.rename(away, case)
        live = begin(case, count=4)
    else:
        os.rename(away, case)
        ok(live.wait_saved(4), "SAVED when it is back", live.screen())
    ok(live.leave() is not None, "leaves")
    check_case(case, "caTm", "all marks are there, once, after a move" + (" and a kill" if kill else ""))


def removed():
    case = make_case("removed")
    shutil.copy(case, case + ".copy")
    live = begin(case)
    live.type("ca")
    ok(live.wait_saved(2), "two marks", live.screen())
    for path in glob.glob(case + "*"):
        if not path.endswith(".copy"):
            os.unlink(path)
    live.type("T")
    ok(live.shows("NOT SAVED 3, kept in the second place.*moved or removed"),
       "a case that is removed is told", live.screen())
    status = live.leave()
    said = live.screen()
    ok(status == 2 and "3 changes are not in the case" in said, "leaving says where they lie",
       f"{status}: {said}")
    os.rename(case + ".copy", case)
    live = begin(case, count=3)
    ok(live.leave() is not None, "leaves")
    check_case(case, "caT", "a copy that was put back got all marks, once")


def read_only():
    """Root may write all the same: then nothing is to be told."""
    case = make_case("read-only")
    live = begin(case)
    live.type("c")
    ok(live.wait_saved(1), "a mark", live.screen())
    paths = glob.glob(case + "*")
    for path in paths:
        os.chmod(path, 0o400)
    os.chmod(os.path.dirname(case), 0o500)
    live.type("aT")
    ok(live.shows(r"3 marks   (SAVED|NOT SAVED)"), "letters go on in a read-only folder",
       live.screen())
    os.chmod(os.path.dirname(case), 0o700)
    for path in paths:
        os.chmod(path, 0o600)
    ok(live.wait_saved(3), "SAVED at the latest when it can be written again", live.screen())
    ok(live.leave() is not None, "leaves")
    check_case(case, "caT", "all marks are there")


def main():
    full_disk()
    both_full()
    kill_on_full_disk()
    moved(kill=False)
    moved(kill=True)
    removed()
    read_only()
    return live_driver.failed > 0


sys.exit(main())
