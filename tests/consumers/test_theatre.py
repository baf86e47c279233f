#!/usr/bin/python3
"""The simulated theatre says the truth: its files, read by a small parser of our own, hold what
truth.csv says, where it says, and the same seed gives the same bytes."""

import csv
import filecmp
import os
import shutil
import subprocess
import sys
import tempfile

import numpy as np

THEATRE = os.environ["THEATRE"]
INCISURA = os.environ["INCISURA"]
FILES = ["S-204-monitor.edf", "S-204-skin.edf", "S-204-head.bdf", "S-204-marks.csv", "truth.csv"]
failed = False


def check(good, what, why=""):
    global failed
    failed = failed or not good
    print(("ok " if good else "not ok ") + what + ("" if good or not why else f": {why}"))


class Edf:
    """EDF and BDF by the published layout, records of one second; times from the file's start."""

    def __init__(self, path):
        raw = open(path, "rb").read()
        width = 3 if raw[0] == 0xFF else 2
        self.reserved = raw[192:236].decode().strip()
        self.start = raw[168:184].decode()
        count, size = int(raw[252:256]), int(raw[184:192])
        records = int(raw[236:244])
        at, fields = 256, []
        for length in (16, 80, 8, 8, 8, 8, 8, 80, 8, 32):
            fields.append([raw[at + i * length : at + (i + 1) * length].decode().strip()
                           for i in range(count)])
            at += length * count
        self.labels, self.units = fields[0], fields[2]
        low, high, dlow, dhigh = (np.array(f, float) for f in fields[3:7])
        per = [int(n) for n in fields[8]]
        data = np.frombuffer(raw[size:], np.uint8).reshape(records, sum(per) * width)
        self.onsets, self.notes, self.signals, self.rates = [], [], {}, {}
        at = 0
        for i, n in enumerate(per):
            block = np.ascontiguousarray(data[:, at : at + n * width])
            at += n * width
            if "Annotations" in self.labels[i]:
                for row in block:
                    self.annotations(row.tobytes())
                continue
            bytes_ = block.reshape(records, n, width).astype(np.int32)
            value = sum(bytes_[:, :, b] << (8 * b) for b in range(width))
            value = np.where(value >= 1 << (8 * width - 1), value - (1 << (8 * width)), value)
            gain = (high[i] - low[i]) / (dhigh[i] - dlow[i])
            self.signals[self.labels[i]] = (value - dlow[i]) * gain + low[i]
            self.rates[self.labels[i]] = n
        self.onsets = np.array(self.onsets)

    def annotations(self, text):
        for k, tal in enumerate(part for part in text.split(b"\0") if part):
            onset, *texts = tal.split(b"\x14")
            onset = float(onset.split(b"\x15")[0])
            if k == 0:
                self.onsets.append(onset)
            self.notes += [(onset, t.decode()) for t in texts if t]

    def times(self, label):
        n = self.rates[label]
        return (self.onsets[:, None] + np.arange(n) / n).ravel()


def play(folder, *options):
    subprocess.run([THEATRE, "--into", folder, "--minutes", "12", *options], check=True)
    return folder


def truth_of(folder):
    rows = list(csv.DictReader(open(os.path.join(folder, "truth.csv"))))
    return lambda name: [(float(r["time_s"]), float(r["value"])) for r in rows
                         if r["event"] == name]


def check_beats(monitor, truth):
    time, ecg = monitor.times("ECG II"), monitor.signals["ECG II"].ravel()
    burst = truth("cautery")
    beats = np.array([t for t, _ in truth("beat")])
    off, clean = [], 0
    for t in beats:
        if any(b - 1 < t < b + d + 1 for b, d in burst):
            continue
        near = np.flatnonzero(np.abs(time - t) < 0.15)
        if len(near) < 140:
            continue
        clean += 1
        off.append(time[near[np.argmax(ecg[near])]] - t)
    off = np.abs(off)
    check(clean > 600 and off.max() <= 0.006,
          "greatest ECG II value within 300 ms is at the beat that truth names, to 6 ms",
          f"{clean} beats, worst {off.max():.4f} s")
    interval = 60 / np.diff(beats)
    check(40 < interval.min() and interval.max() < 150, "heart rates are those of a living adult",
          f"{interval.min():.0f}..{interval.max():.0f}")
    incision = truth("incision")[0][0]
    middle = beats[:-1]
    before = interval[(middle > incision - 30) & (middle < incision)].mean()
    after = interval[(middle > incision + 10) & (middle < incision + 40)].mean()
    check(after > before + 5, "incision raises the heart rate", f"{before:.1f} to {after:.1f}")


def check_derived_beats(path, truth):
    """The program's beats against the simulator's, away from cautery, the gap and the ends."""
    out = subprocess.run([INCISURA, "derive", path, "beats"], capture_output=True, text=True,
                         check=True).stdout
    found = np.array([float(row["t_s"]) for row in csv.DictReader(out.splitlines())])
    beats = np.array([t for t, _ in truth("beat")])
    rough = [(b - 2, b + d + 2) for b, d in truth("cautery") + truth("gap")]

    def fair(times):
        inside = (times > 2) & (times < beats[-1] - 2)
        return times[inside & ~np.any([(times > a) & (times < b) for a, b in rough], axis=0)]

    missed = [t for t in fair(beats) if np.abs(found - t).min() > 0.02]
    extra = [t for t in fair(found) if np.abs(beats - t).min() > 0.02]
    check(len(fair(beats)) > 600 and len(missed) + len(extra) <= 2,
          "beats that the program derives are those of truth, to 20 ms",
          f"missed {missed[:5]}, extra {extra[:5]}")


def check_gap(monitor, truth):
    gap_at, gap_span = truth("gap")[0]
    steps = np.diff(monitor.onsets)
    at = np.flatnonzero(steps > 1.5)
    check(monitor.reserved == "EDF+D" and len(at) == 1, "the monitor's file has one gap")
    check(monitor.onsets[at[0]] + 1 == gap_at and steps[at[0]] - 1 == gap_span,
          "the gap is where truth says")


def check_waves(monitor, truth):
    time, abp = monitor.times("ABP"), monitor.signals["ABP"].ravel()
    flush, span = truth("flush")[0]
    flushed = (time > flush + 0.1) & (time < flush + span - 0.1)
    check(abp[flushed].min() > 250, "the line flush is on the arterial pressure")
    calm = (np.abs(time - flush) > 10)
    check(40 < np.percentile(abp[calm], 1) and np.percentile(abp[calm], 99) < 190,
          "pressures are those of a living adult",
          f"{np.percentile(abp[calm], 1):.0f}..{np.percentile(abp[calm], 99):.0f}")
    notched = looked = 0
    for t, rate in truth("beat"):
        part = abp[(time >= t + 0.2) & (time < t + 0.19 + min(60 / rate, 0.7))]
        if len(part) > 40 and abs(t - flush) > 10:
            looked += 1
            falls = np.diff(part[np.argmax(part):])
            notched += bool(np.any((falls[:-1] < 0) & (falls[1:] > 0)))
    check(notched > 0.95 * looked > 300, "each pressure wave has its notch", f"{notched}/{looked}")
    off, lasts = truth("lead-off")[0]
    t5, v5 = monitor.times("ECG V5"), monitor.signals["ECG V5"].ravel()
    check(v5[(t5 > off) & (t5 < off + lasts)].min() > 4, "V5 sticks at its rail while its lead is off")
    check(("Cuff inflated" in [n for _, n in monitor.notes]), "the monitor's own notes are there")


def check_skin(skin, truth):
    begin = truth("skin-start")[0][0]
    time, eda = skin.times("EDA") + np.floor(begin), skin.signals["EDA"].ravel()
    rises = 0
    large = [(t, v) for t, v in truth("skin-response") if v > 0.75 and t > begin]
    for onset, size in large:
        before = eda[np.abs(time - onset) < 0.2].mean()
        rises += eda[(time > onset) & (time < onset + 4)].max() - before > 0.5 * size
    check(len(large) >= 3 and rises == len(large), "large skin responses rise where truth says",
          f"{rises}/{len(large)}")


def check_head(head, truth):
    begin = truth("head-start")[0][0]
    time, eeg = head.times("EEG Fp1") + np.floor(begin), head.signals["EEG Fp1"].ravel()
    silent = [eeg[(time > t + 0.5) & (time < t + v)].std() for t, v in truth("suppression")]
    awake = eeg[time < truth("propofol")[0][0]]
    check(len(silent) >= 2 and max(silent) < 0.35 * awake.std(), "suppressed EEG is flat")

    def share(part, low, high):
        power = np.abs(np.fft.rfft(part[: len(part) // 1000 * 1000].reshape(-1, 1000))) ** 2
        hz = np.fft.rfftfreq(1000, 1 / 250)
        return power[:, (hz >= low) & (hz < high)].sum() / power[:, (hz >= 0.5) & (hz < 40)].sum()

    incision = truth("incision")[0][0]
    deep = eeg[(time > incision - 20) & (time < incision + 20)]
    check(share(deep, 13, 30) < 0.5 * share(awake, 13, 30), "sleep takes the fast waves away")


def main():
    top = tempfile.mkdtemp()
    try:
        one, two, three = (os.path.join(top, n) for n in "abc")
        play(one, "--seed", "7")
        play(two, "--seed", "7")
        play(three, "--seed", "8")
        same = filecmp.cmpfiles(one, two, FILES, shallow=False)[0]
        check(sorted(same) == sorted(FILES), "two runs of one seed give the same bytes")
        equal = filecmp.cmpfiles(one, three, FILES, shallow=False)[0]
        check(not equal, "another seed gives other bytes", " ".join(equal))
        truth = truth_of(one)
        monitor, skin, head = (Edf(os.path.join(one, f)) for f in FILES[:3])
        check([e.start for e in (monitor, skin, head)]
              == ["20.05.3108.55.00", "20.05.3108.55.37", "20.05.3108.55.52"],
              "each device starts at an instant of its own")
        check(monitor.units[:3] == ["mV", "mV", "mm[Hg]"], "units are the trade's")
        check_beats(monitor, truth)
        check_derived_beats(os.path.join(one, FILES[0]), truth)
        check_gap(monitor, truth)
        check_waves(monitor, truth)
        check_skin(skin, truth)
        check_head(head, truth)
        bad = subprocess.run([THEATRE, "--into", one, "--minutes", "2"], capture_output=True)
        check(bad.returncode == 2 and bad.stderr.count(b"\n") == 1, "a bad length is one line")
    finally:
        shutil.rmtree(top)
    return 1 if failed else 0


sys.exit(main())
