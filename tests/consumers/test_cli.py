#!/usr/bin/python3
"""The command line end to end: a case from CSV recordings, and what every command says to bad input.

Each bad input must give exit 2, one line on stderr, nothing on stdout, and leave no file behind.
"""
import csv
import io
import json
import os
import shutil
import sqlite3
import subprocess
import sys
import tempfile

INCISURA = os.environ["INCISURA"]
failed = 0


def ok(good, what, detail=""):
    global failed
    failed += not good
    print(("ok " if good else "not ok ") + what + ("" if good else f": {detail}"), flush=True)


def run(*words, **kw):
    return subprocess.run([INCISURA, *words], capture_output=True, text=True, timeout=60, **kw)


def done(what, *words):
    r = run(*words)
    ok(r.returncode == 0, what, f"exit {r.returncode}: {r.stderr}")
    return r.stdout


def refused(what, says, *words, status=2):
    before = sorted(os.listdir("."))
    r = run(*words)
    lines = r.stderr.splitlines()
    good = r.returncode == status and len(lines) == 1 and says in r.stderr and r.stdout == ""
    ok(good and sorted(os.listdir(".")) == before, what,
       f"exit {r.returncode}: {r.stderr!r} {r.stdout[:80]!r}")


folder = tempfile.mkdtemp(prefix="incisura-cli-")
os.chdir(folder)
with open("wave.csv", "w") as f:
    f.write("t,ECG II [mV],EDA [uS]\n")
    for k in range(2500):
        f.write(f"2031-05-20T09:00:{k / 250:09.6f},{(k % 200 == 0) * 1.0},{2 + k / 2500:.6f}\n")
with open("marks.csv", "w") as f:
    f.write("what;when;how much\nincision;09:00:02,5;\npropofol;+4;100,5\n")
with open("bad-book.csv", "w") as f:
    f.write("code,label,key,kind,unit,class,pairs-with,required,help\n"
            "a,A,x,point,,,,,\nb,B,x,point,,,,,\n")
open("empty", "w").close()
with open("random.edf", "wb") as f:
    f.write(os.urandom(5000))
os.mkdir("folder")

# --- the job
done("start", "start", "c.case", "--subject", "S-1", "--procedure", "keyhole", "--rater", "KM")
done("attach", "attach", "c", "wave.csv")
done("mark by time of day", "mark", "c.case", "incision", "--at", "09:00:01.250")
done("mark with value", "mark", "c", "propofol", "--at", "+3", "--value", "0,5", "--unit", "mg",
     "--note", "a, \"b\"")
done("import", "import", "c", "marks.csv", "--column", "code=what", "--column", "time=when",
     "--column", "value=how much")
marks = json.loads(done("marks --json", "marks", "c", "--json"))
ok([(m["code"], m["onset_s"]) for m in marks] ==
   [("incision", 1.25), ("incision", 2.5), ("propofol", 3), ("propofol", 4)],
   "marks are in time order at the right times", marks)
ok(marks[2]["value"] == 0.5 and marks[2]["unit"] == "mg" and marks[3]["value"] == 100.5,
   "values, with decimal comma", marks)
rows = list(csv.DictReader(io.StringIO(done("marks --csv", "marks", "c", "--csv"))))
ok(rows[2]["note"] == 'a, "b"' and rows[0]["rater"] == "KM", "CSV quotes and attributes", rows)
ok(len(run("marks", "c", "--code", "incision").stdout.splitlines()) == 2, "marks --code")
ok(run("history", "c", "--verify").returncode == 0, "history verifies")
history = json.loads(done("history --json", "history", "c", "--json"))
ok([h["seq"] for h in history] == list(range(1, len(history) + 1)),
   "history is numbered without a hole", history)
inspect = json.loads(done("inspect --json", "inspect", "wave.csv", "--json"))
ok(inspect["start"] == "2031-05-20T09:00:00" and abs(inspect["duration_s"] - 10) < 0.01,
   "inspect: start and duration", inspect)
ok([(c["label"], c["unit"], c["role"], c["rate_hz"], c["samples"]) for c in inspect["channels"]] ==
   [("ECG II", "mV", "ecg", 250, 2500), ("EDA", "uS", "eda", 250, 2500)],
   "inspect: channels", inspect["channels"])
ok(set(inspect) == {"format", "start", "duration_s", "channels", "gaps", "annotations", "notes"},
   "inspect: keys", inspect.keys())
text = done("derive from a bare file", "derive", "wave.csv", "channel", "--channel", "EDA",
            "--from", "+1", "--to", "+1.5")
rows = list(csv.reader(io.StringIO(text)))
ok(rows[0] == ["t_s", "EDA"] and len(rows) == 126 and float(rows[1][0]) == 1.0,
   "derive: window of a channel", rows[:3])
ok(run("--version").stdout.startswith("incisura "), "--version")
ok("start" in run("help").stdout and "--until" in run("mark", "--help").stdout,
   "help, and --help of a command")
ok(run("help", "--man").stdout.startswith(".TH INCISURA 1"), "man page")

# --- a recording that does not say when it starts
open("plain.csv", "w").write("lead\n" + "".join(f"{k % 7}\n" for k in range(1000)))
done("start of a case without a clock", "start", "p.case", "--rater", "KM")
refused("a rate beyond reason", "--rate", "attach", "p", "plain.csv", "--rate", "1e99")
refused("a start that is no date", "--start", "attach", "p", "plain.csv", "--rate", "100", "--start", "9")
refused("a start for a file that says its own", "says itself", "attach", "p", "wave.csv", "--start",
        "2031-05-20T09:00:00")
done("attach with what the file lacks", "attach", "p", "plain.csv", "--rate", "100", "--start",
     "2031-05-20T09:00:00", "--role", "lead=ecg", "--unit", "lead=mV")
done("and then times of day work", "mark", "p", "incision", "--at", "09:00:02")
r = run("derive", "p", "channel", "--channel", "lead", "--from", "09:00:01", "--to", "09:00:01.02")
ok(r.stdout == "t_s,lead\n1,2\n1.01,3\n", "what was told is kept with the case", r.stdout + r.stderr)

# --- moved and changed recordings
os.mkdir("moved")
shutil.copy("c.case", "moved")
os.rename("wave.csv", "moved/another-name.csv")
r = run("derive", "moved/c", "channel", "--channel", "EDA", "--to", "+1")
ok(r.returncode == 0 and len(r.stdout.splitlines()) == 251, "a moved recording is found by digest",
   r.stderr)
text = open("moved/another-name.csv").read()
open("moved/wave.csv", "w").write(text.replace("2.000400", "9.000400"))
os.remove("moved/another-name.csv")
r = run("derive", "moved/c", "channel", "--channel", "EDA")
ok(r.returncode == 2 and "wave.csv: changed since" in r.stderr, "a changed one is refused", r.stderr)
r = run("marks", "moved/c")
ok(r.returncode == 0 and "incision" in r.stdout, "and the marks are there all the same", r.stderr)
open("wave.csv", "w").write(text)

# --- a lost recording does not lend its names to the next
os.mkdir("two")
os.chdir("two")
for name, sign in (("one.csv", 1), ("two.csv", -1)):
    open(name, "w").write("t,lead\n" + "".join(f"{k / 100:.2f},{sign * k}\n" for k in range(200)))
done("start", "start", "c", "--rater", "KM")
done("attach two with one label", "attach", "c", "one.csv", "two.csv", "--role", "lead=ecg")
r = run("derive", "c", "channel", "--channel", "lead @2", "--from", "+1", "--to", "+1.01")
ok(r.stdout.endswith("1,-100\n"), "the second is told apart", r.stdout + r.stderr)
os.remove("one.csv")
refused("the second is not taken for the lost first", "one.csv: not there", "derive", "c", "channel",
        "--channel", "lead")
refused("nor by role", "one.csv: not there", "derive", "c", "beats")
os.chdir("..")

# --- tampering
db = sqlite3.connect("c.case")
db.execute("UPDATE marks SET onset_ns = onset_ns + 1 WHERE id = 2")
db.commit()
db.close()
r = run("history", "c", "--verify")
ok(r.returncode == 1 and "mark 2" in r.stdout, "verify names a mark altered with SQL",
   r.stdout + r.stderr)

# --- bad input, one line each
refused("no such command", "no command 'frobnicate'", "frobnicate")
refused("no such option", "--colour", "marks", "c", "--colour", "x")
refused("option without value", "--at", "mark", "c", "incision", "--at")
refused("too few arguments", "usage", "attach", "c")
refused("start over an existing case", "c.case", "start", "c.case", "--rater", "KM")
refused("start without a rater", "--rater", "start", "d.case")
refused("start with a bad codebook", "bad-book.csv:3", "start", "d.case", "--rater", "KM",
        "--codebook", "bad-book.csv")
refused("start with a missing codebook", "nobook.csv", "start", "d.case", "--rater", "KM",
        "--codebook", "nobook.csv")
refused("start where nothing can be written", "/proc/x.case", "start", "/proc/x.case", "--rater",
        "KM")
NAMES = ("absent.case", "folder", "empty", "random.edf")
with open("r.ini", "w") as f:
    f.write("[events]\ncodes = *\n[window]\nbefore = 1\nafter = 1\nrate = 4\n[signals]\n"
            "hr = heart-rate\n")
for command, rest in (("marks", ()), ("history", ()), ("mark", ("incision", "--at", "+1")),
                      ("attach", ("wave.csv",)), ("import", ("marks.csv",)), ("frame", ()),
                      ("derive", ("beats",)), ("export", ("--recipe", "r.ini", "--into", "out"))):
    for name in NAMES:
        refused(f"{command} of {name}", name, command, name, *rest)
for name in ("absent.edf", "folder", "empty", "random.edf"):
    refused(f"inspect {name}", name, "inspect", name)
    refused(f"attach {name}", name, "attach", "c", name)
    refused(f"import {name}", name, "import", "c", name)
refused("attach the same file twice", "wave.csv", "attach", "c", "wave.csv")
refused("mark with an unknown code", "no code 'incison'", "mark", "c", "incison", "--at", "+1")
refused("mark without a time", "--at", "mark", "c", "incision")
refused("mark at no time", "time 'noon'", "mark", "c", "incision", "--at", "noon")
refused("mark that ends before it begins", "ends before", "mark", "c", "cautery", "--at", "+2",
        "--until", "+1")
refused("mark with a bad value", "value 'lots'", "mark", "c", "propofol", "--at", "+1", "--value",
        "lots")
refused("mark with a bad unit", "unit 'spoons'", "mark", "c", "propofol", "--at", "+1", "--value",
        "1", "--unit", "spoons")
refused("marks in no such state", "no state", "marks", "c", "--state", "fine")
with open("bad-marks.csv", "w") as f:
    f.write("code,time\nincision,+1\nincison,+2\n")
count = len(json.loads(run("marks", "c", "--json").stdout))
refused("import with a bad row names its line", "bad-marks.csv:3", "import", "c", "bad-marks.csv")
ok(len(json.loads(run("marks", "c", "--json").stdout)) == count,
   "a refused import leaves nothing")
refused("import without its columns", "no column 'code'", "import", "c", "wave.csv")
refused("derive nothing known", "no derivation", "derive", "wave.csv", "mood")
refused("derive from no such channel", "no channel", "derive", "wave.csv", "channel", "--channel",
        "EEG")
refused("derive with an unknown parameter", "colour", "derive", "wave.csv", "heart-rate", "--set",
        "colour=1")
refused("help of nothing known", "no command or topic", "help", "mood")
db = sqlite3.connect("c.case")
db.execute("PRAGMA user_version = 1000")
db.commit()
db.close()
r = run("marks", "c")
ok(r.returncode == 0 and "incision" in r.stdout and "newer" in r.stderr,
   "a case of a newer program is read, and told so", r.stderr)
refused("change a case of a newer program", "newer", "mark", "c", "incision", "--at", "+1")
shutil.copy("c.case", "cut.case")
with open("cut.case", "r+b") as f:
    f.truncate(3000)
refused("a case cut short", "cut.case", "marks", "cut.case")
db = sqlite3.connect("other.case")
db.execute("CREATE TABLE t (x)")
db.commit()
db.close()
refused("somebody else's database", "other.case", "marks", "other.case")

# files that a session was killed over before the case knew of them are told, and left alone
done("a case for strays", "start", "stray", "--subject", "S", "--rater", "KM")
for name in ("stray-live-3.bdf", "strayed-live-1.bdf", "stray-live-3.txt"):
    open(name, "w").close()
r = run("mark", "stray", "incision", "--at", "+1")
ok(r.returncode == 0 and "note: 1 file named like a stream" in r.stderr
   and os.path.exists("stray-live-3.bdf"), "a stray file of a stream is told", r.stderr)

# what `live` cannot take
refused("live without a terminal", "needs a terminal", "live", "stray")

with open("/dev/full", "w") as full:
    r = subprocess.run([INCISURA, "derive", "wave.csv", "channel", "--channel", "EDA"],
                       stdout=full, stderr=subprocess.PIPE, text=True)
ok(r.returncode == 2 and len(r.stderr.splitlines()) == 1,
   "a full disk on standard output is told", r.stderr)

os.chdir("/")
shutil.rmtree(folder)
sys.exit(failed > 0)
