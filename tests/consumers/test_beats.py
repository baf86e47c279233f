#!/usr/bin/python3
"""R peaks and heart rate of real ECG against detectors and arithmetic that share no code with ours.

The ECG is the five minutes of MIT-BIH record 208 (many ectopic and fusion beats, noise) that scipy
carries. The other detector is written here with scipy.signal; where the two differ nobody says who
is right, so they need only agree on 98 % of the beats, within the 150 ms of ANSI/AAMI EC57.
"""
import csv
import io
import os
import subprocess
import sys
import tempfile
import warnings

import numpy as np
from scipy import signal

warnings.simplefilter("ignore")
try:
    from scipy.datasets import electrocardiogram
    ecg = electrocardiogram()
except Exception:  # before scipy 1.10, or without its downloader
    from scipy.misc import electrocardiogram
    ecg = electrocardiogram()

INCISURA = os.environ["INCISURA"]
RATE = 360
failed = 0


def ok(good, what, detail=""):
    global failed
    failed += not good
    print(("ok " if good else "not ok ") + what + ("" if good else f": {detail}"), flush=True)


def derive(path, *words):
    r = subprocess.run([INCISURA, "derive", path, *words, "--rate", str(RATE)],
                       capture_output=True, text=True, timeout=60)
    if r.returncode != 0:
        sys.exit(f"not ok derive {' '.join(words)}: {r.stderr}")
    return list(csv.DictReader(io.StringIO(r.stdout)))


def write(path, label, samples):
    with open(path, "w") as f:
        f.write(label + "\n")
        f.writelines(f"{v:.3f}\n" for v in samples)  # a missing one is "nan"


def other_beats(x):
    """Energy of the 8-20 Hz band, peaks above a quarter of the local maximum (median over 10 s)."""
    sos = signal.butter(3, [8, 20], "bandpass", fs=RATE, output="sos")
    band = signal.sosfiltfilt(sos, x)
    width = int(0.12 * RATE)
    energy = np.convolve(np.abs(band), np.ones(width) / width, "same")
    seconds = energy[:len(energy) // RATE * RATE].reshape(-1, RATE).max(axis=1)
    level = signal.medfilt(np.pad(seconds, 5, mode="edge"), 11)[5:-5]
    level = np.interp(np.arange(len(x)) / RATE, np.arange(len(level)) + 0.5, level)
    peaks, _ = signal.find_peaks(energy / level, height=0.3, distance=int(0.25 * RATE))
    return peaks / RATE


def agreement(a, b, within=0.15):
    """Share of beats of both trains that have a partner, one to one, in time order."""
    i = j = paired = 0
    while i < len(a) and j < len(b):
        if abs(a[i] - b[j]) <= within:
            paired += 1
            i += 1
            j += 1
        elif a[i] < b[j]:
            i += 1
        else:
            j += 1
    return 2 * paired / (len(a) + len(b))


def rate_of(beats, times, fs):
    """Berger et al. 1986 by the phase of the heart: intervals passed between t - 1/fs and t + 1/fs."""
    phase = np.arange(len(beats))
    n = np.interp(times + 1 / fs, beats, phase) - np.interp(times - 1 / fs, beats, phase)
    return 60 * fs * n / 2


def check_beats(path):
    rows = derive(path, "beats")
    ours = np.array([float(r["t_s"]) for r in rows])
    share = agreement(ours, other_beats(ecg))
    ok(share >= 0.98, "beats agree with a scipy detector on 98 %", f"{100 * share:.2f} %")
    ok(np.all(np.diff(ours) > 0.19), "beats are in order and never closer than refractory")
    return ours


def check_upside_down(beats):
    write("down.csv", "ECG [uV]", -1000 * ecg + 40)
    down = np.array([float(r["t_s"]) for r in derive("down.csv", "beats")])
    share = agreement(beats, down, 0.15)
    ok(share >= 0.999, "beats of the same ECG upside down and in microvolts", f"{100 * share:.2f} %")


def check_rate(path, beats):
    for fs in (4, 10):
        rows = [r for r in derive(path, "heart-rate", "--set", f"rate={fs}") if r["heart-rate"]]
        times = np.array([float(r["t_s"]) for r in rows])
        rates = np.array([float(r["heart-rate"]) for r in rows])
        off = np.max(np.abs(rates - rate_of(beats, times, fs)))
        ok(off < 0.001 and len(rows) > 290 * fs, f"heart rate at {fs} Hz is Berger's of the beats",
           f"off by {off} /min over {len(rows)} samples")
        ok(np.allclose(times * fs, np.round(times * fs)), f"its grid at {fs} Hz goes through 0")


def check_gap():
    cut = ecg.copy()
    cut[100 * RATE:107 * RATE] = np.nan
    write("cut.csv", "ECG [mV]", cut)
    rows = derive("cut.csv", "beats")
    times = np.array([float(r["t_s"]) for r in rows])
    ok(not np.any((times > 100) & (times < 107)), "no beat where the ECG is missing")
    first = rows[int(np.searchsorted(times, 107))]
    flagged = [r["t_s"] for r in rows if "gap" in r["flag"]]
    ok(flagged == [first["t_s"]], "the beat after it, and no other, is flagged", str(flagged))
    rates = derive("cut.csv", "heart-rate")
    inside = [r for r in rates if 100 < float(r["t_s"]) < 107]
    ok(inside and all(r["heart-rate"] == "" for r in inside), "no heart rate across it")


def main():
    with tempfile.TemporaryDirectory() as folder:
        os.chdir(folder)
        write("ecg.csv", "ECG MLII [mV]", ecg)
        beats = check_beats("ecg.csv")
        check_upside_down(beats)
        check_rate("ecg.csv", beats)
        check_gap()
        os.chdir("/")
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
