#!/usr/bin/python3
"""An export read back as an analyst would: types, windows against numpy on samples decoded here,
the same bytes again, and what is refused. Recordings are made by the simulated theatre."""
import csv
import json
import math
import os
import resource
import shutil
import signal
import subprocess
import sys
import tempfile

import numpy as np

INCISURA, THEATRE = os.environ["INCISURA"], os.environ["THEATRE"]
failed = 0


def ok(good, what, detail=""):
    global failed
    failed += not good
    print(("ok " if good else "not ok ") + what + ("" if good else f": {detail}"), flush=True)


def run(*words):
    return subprocess.run([INCISURA, *words], capture_output=True, text=True, timeout=120)


def edf_channel(path, label):
    """Samples, rate and start of the runs of one channel of an EDF+ file, decoded from the bytes."""
    raw = open(path, "rb").read()
    count = int(raw[252:256])
    seconds = float(raw[244:252])
    at, fields = 256, {}
    for name, size in (("label", 16), ("t", 80), ("u", 8), ("pmin", 8), ("pmax", 8), ("dmin", 8),
                       ("dmax", 8), ("f", 80), ("n", 8), ("r", 32)):
        fields[name] = [raw[at + i * size:at + (i + 1) * size].decode("latin-1").strip()
                        for i in range(count)]
        at += size * count
    n = [int(x) for x in fields["n"]]
    k = fields["label"].index(label)
    pmin, pmax, dmin, dmax = (float(fields[f][k]) for f in ("pmin", "pmax", "dmin", "dmax"))
    records = np.frombuffer(raw[at:], "<i2").reshape(-1, sum(n))
    first = sum(n[:k])
    values = records[:, first:first + n[k]].astype(float)
    notes = fields["label"].index("EDF Annotations")
    f = sum(n[:notes])
    onsets = [float(records[r, f:f + n[notes]].tobytes().split(b"\x14")[0]) for r in range(len(records))]
    physical = pmin + (values - dmin) * (pmax - pmin) / (dmax - dmin)
    times = np.array(onsets)[:, None] - onsets[0] + np.arange(n[k]) * seconds / n[k]
    return times.ravel(), physical.ravel()


def table(path):
    with open(path, newline="") as f:
        return list(csv.DictReader(f))


folder = tempfile.mkdtemp(prefix="incisura-export-")
os.chdir(folder)
subprocess.run([THEATRE, "--into", ".", "--minutes", "22"], check=True, capture_output=True)
run("start", "S-204", "--rater", "KM")
r = run("attach", "S-204", "S-204-monitor.edf", "S-204-skin.edf", "S-204-head.bdf")
ok(r.returncode == 0, "attach", r.stderr)
r = run("import", "S-204", "S-204-marks.csv")
ok(r.returncode == 0, "import", r.stderr)
with open("r.ini", "w") as f:
    f.write("[events]\ncodes = incision, intubation, cautery\n[window]\nbefore = 10\nafter = 20\n"
            "rate = 125\nbaseline = -10..0\nvalid = 0.8\n[signals]\nhr = heart-rate\n"
            "abp = channel \"ABP\"\n")
r = run("export", "S-204", "--recipe", "r.ini", "--into", "out")
ok(r.returncode == 0, "export", r.stderr)
ok(sorted(os.listdir("out")) == ["dictionary.csv", "features.csv", "provenance.json",
                                 "windows-long.csv", "windows-wide.csv"], "files", os.listdir("out"))

long, wide = table("out/windows-long.csv"), table("out/windows-wide.csv")
features = table("out/features.csv")
ok(list(long[0]) == "case,mark,code,onset_s,t_s,signal,unit,value,valid".split(","), "long columns")
ok(list(wide[0]) == "case,mark,code,onset_s,t_s,hr,abp".split(","), "wide columns")
marks = sorted({r["mark"] for r in wide}, key=int)
ok([r["t_s"] for r in wide[:3750]] == [f"{(k - 1250) * 8 / 1000:.3f}".rstrip("0").rstrip(".")
                                       for k in range(3750)], "t_s are the decimals of the grid",
   [r["t_s"] for r in wide[1248:1254]])
ok(len(wide) == len(marks) * 3750 and len(long) == 2 * len(wide), "row counts",
   (len(wide), len(long)))
ok(all((r["value"] == "") == (r["valid"] == "0") for r in long), "empty exactly where not valid")
ok(all(float(r["value"]) is not None for r in long if r["valid"] == "1"), "numbers are numbers")
by_long = {(r["mark"], r["t_s"], r["signal"]): r["value"] for r in long}
ok(all(by_long[(r["mark"], r["t_s"], "abp")] == r["abp"] for r in wide), "long and wide agree")

# the pressure at its own rate: between samples only by the offset of the grid, so compare with a
# band-limited (FFT) shift of the samples decoded here
times, pressure = edf_channel("S-204-monitor.edf", "ABP")
worst = 0.0
means = []
for mark in marks:
    rows = [r for r in wide if r["mark"] == mark]
    onset = float(rows[0]["onset_s"])
    if any(r["abp"] == "" for r in rows):
        continue
    got = np.array([float(r["abp"]) for r in rows])
    first = int(np.searchsorted(times, onset - 10 - 20))
    piece = pressure[first:first + 125 * 70]
    shift = onset - 10 - times[first]
    spectrum = np.fft.rfft(piece * np.hanning(len(piece)) ** 0)
    moved = np.fft.irfft(spectrum * np.exp(2j * np.pi * np.fft.rfftfreq(len(piece), 1 / 125) *
                                           (shift - math.floor(shift * 125) / 125)), len(piece))
    k = math.floor(shift * 125)
    want = moved[k:k + 3750]
    worst = max(worst, float(np.abs(got - want)[200:-200].max()))
    feature = next(f for f in features if f["mark"] == mark and f["signal"] == "abp")
    after = got[1250:]
    before = got[:1250]
    for name, value in (("mean", after.mean()), ("baseline", before.mean()), ("peak", after.max()),
                        ("trough", after.min()), ("area", ((after[1:] + after[:-1]) / 2 / 125).sum())):
        means.append(abs(float(feature[name]) - value) / max(1, abs(value)))
ok(worst < 0.2, "pressure windows equal a band-limited shift of the file's samples (mmHg)", worst)
ok(len(means) >= 10 and max(means) < 1e-5, "features equal numpy's on the same samples",
   max(means, default=None))

dictionary = table("out/dictionary.csv")
described = {(r["file"], r["column"]) for r in dictionary}
for name in ("windows-long.csv", "windows-wide.csv", "features.csv", "dictionary.csv"):
    columns = next(csv.reader(open("out/" + name)))
    ok(all((name, c) in described for c in columns), f"dictionary has every column of {name}",
       [c for c in columns if (name, c) not in described])
ok(any("Berger" in r["source"] for r in dictionary), "dictionary names the published method")

provenance = json.load(open("out/provenance.json"))
text = open("out/provenance.json").read()
ok(provenance["recipe"] == open("r.ini").read(), "provenance holds the recipe")
ok(folder not in text and "S-204-monitor" not in text and "KM" not in text,
   "no paths, file names or raters in provenance")
ok([s["parameters"] for s in provenance["signals"]][0]["rate"] == 4, "every parameter", text[:400])
ok(all(len(r["digest"]) == 64 and r["clock_aligned"] is False
       for r in provenance["case"]["recordings"]), "recordings by digest, clocks unaligned")
left = [e for e in provenance["exclusions"] if e.get("signal")]
short = [f for f in features if float(f["valid_share"]) < 0.8]
ok(len(left) == len(short) and all(f["mean"] == "" for f in short),
   "signals with too few valid samples are empty and told", (left, short))

run("export", "S-204", "--recipe", "r.ini", "--into", "again")
ok(all(open(f"out/{n}", "rb").read() == open(f"again/{n}", "rb").read() for n in os.listdir("out")),
   "the same bytes again")
before = {n: open(f"out/{n}", "rb").read() for n in os.listdir("out")}
r = run("export", "S-204", "--recipe", "absent.ini", "--into", "out")
ok(r.returncode == 2 and "absent.ini" in r.stderr, "a missing recipe is one line", r.stderr)
with open("bad.ini", "w") as f:
    f.write("[events]\ncodes = *\n[window]\nbefore = 1\nafter = 1\nrate = 4\n[signals]\n"
            "x = channel \"XYZ\"\n")
r = run("export", "S-204", "--recipe", "bad.ini", "--into", "out")
ok(r.returncode == 2 and "bad.ini:8" in r.stderr and len(r.stderr.splitlines()) == 1,
   "a channel that is not there is told with the recipe's line", r.stderr)
ok({n: open(f"out/{n}", "rb").read() for n in os.listdir("out")} == before,
   "a refused export leaves the earlier one")
os.mkdir("mine")
open("mine/thesis.txt", "w").close()
r = run("export", "S-204", "--recipe", "r.ini", "--into", "mine")
ok(r.returncode == 2 and os.path.exists("mine/thesis.txt"), "other people's folders are kept", r.stderr)
r = run("export", "S-204", "--recipe", "r.ini", "--into", "no/such/place")
ok(r.returncode == 2 and len(r.stderr.splitlines()) == 1, "a folder that cannot be made", r.stderr)

def contents(path):
    return {n: open(f"{path}/{n}", "rb").read() for n in sorted(os.listdir(path))}


def kept(what, path, says):
    """An export into `path` is refused in one line, and everything in it stays."""
    held = contents(path)
    r = run("export", "S-204", "--recipe", "r.ini", "--into", path)
    ok(r.returncode == 2 and len(r.stderr.splitlines()) == 1 and says in r.stderr and
       contents(path) == held, what, r.stderr)


with open("again/analysis.R", "w") as f:
    f.write("1 + 1\n")
kept("a script kept among the tables is refused, not removed", "again", "analysis.R")
os.rename("again/analysis.R", "again/.notes")
kept("a hidden file too", "again", ".notes")
os.unlink("again/.notes")
os.mkdir("foreign")
with open("foreign/provenance.json", "w") as f:
    f.write('{"program": "another 1.0"}\n')
kept("another program's provenance.json is no earlier export", "foreign", "no earlier export")
with open("foreign/provenance.json", "w") as f:
    f.write("not JSON")
kept("nor is one that is no JSON", "foreign", "no earlier export")

os.symlink("again", "link")
r = run("export", "S-204", "--recipe", "r.ini", "--into", "link")
ok(r.returncode == 0 and os.path.islink("link") and contents("again") == before,
   "through a link its folder is replaced, the link kept", r.stderr)


def little_room():
    """Stands in for a full disk: no file may grow beyond 100 kB, told by an error, not a signal."""
    signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
    resource.setrlimit(resource.RLIMIT_FSIZE, (100000, 100000))


r = subprocess.run([INCISURA, "export", "S-204", "--recipe", "r.ini", "--into", "out"],
                   capture_output=True, text=True, timeout=120, preexec_fn=little_room)
ok(r.returncode == 2 and len(r.stderr.splitlines()) == 1 and "windows-" in r.stderr and
   contents("out") == before, "a disk that fills up leaves the earlier export", r.stderr)
ok(not [n for n in os.listdir(".") if ".part-" in n], "no half-made folder is left")
with open("none.ini", "w") as f:
    f.write(open("r.ini").read().replace("incision, intubation, cautery", "clamp")
            .replace("before", "states = rejected\n; before", 0))
r = run("history", "S-204", "--verify")
ok(r.returncode == 0, "history verifies after exports", r.stdout)

os.chdir("/")
shutil.rmtree(folder)
sys.exit(failed > 0)
