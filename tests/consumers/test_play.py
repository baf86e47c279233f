#!/usr/bin/python3
"""The theatre plays what it writes: a stream read from a FIFO, from TCP or from a pseudo-terminal
holds the samples of the recorded file at their times; every reader gets a header first."""

import os
import select
import shutil
import socket
import subprocess
import sys
import tempfile
import termios
import time

import numpy as np

THEATRE = os.environ["THEATRE"]
PATIENCE_S = 60
failed = False


def check(good, what, why=""):
    global failed
    failed = failed or not good
    print(("ok " if good else "not ok ") + what + ("" if good or not why else f": {why}"),
          flush=True)


class Stream:
    """EDF+ and BDF+ by the published layout, from bytes; half a record at the end is left out.
    values[label] has a row a record, onsets in seconds; step[label] is what one digit is worth."""

    def __init__(self, raw):
        width = 3 if raw[0] == 0xFF else 2
        self.reserved, self.count = raw[192:236].decode().strip(), int(raw[236:244])
        self.duration, signals, size = float(raw[244:252]), int(raw[252:256]), int(raw[184:192])
        at, fields = 256, []
        for length in (16, 80, 8, 8, 8, 8, 8, 80, 8, 32):
            fields.append([raw[at + i * length : at + (i + 1) * length].decode().strip()
                           for i in range(signals)])
            at += length * signals
        low, high, dlow, dhigh = (np.array(f, float) for f in fields[3:7])
        per = [int(n) for n in fields[8]]
        whole = (len(raw) - size) // (sum(per) * width)
        data = np.frombuffer(raw[size : size + whole * sum(per) * width], np.uint8)
        data = data.reshape(whole, -1)
        self.values, self.step, self.units, at = {}, {}, {}, 0
        for i, n in enumerate(per):
            block = data[:, at : at + n * width]
            at += n * width
            if "Annotations" in fields[0][i]:
                self.onsets = np.array([float(row.tobytes().split(b"\x14")[0]) for row in block])
                continue
            bytes_ = block.reshape(whole, n, width).astype(np.int32)
            value = sum(bytes_[:, :, b] << (8 * b) for b in range(width))
            value = np.where(value >= 1 << (8 * width - 1), value - (1 << (8 * width)), value)
            label = fields[0][i]
            self.step[label] = (high[i] - low[i]) / (dhigh[i] - dlow[i])
            self.units[label] = fields[2][i]
            self.values[label] = (value - dlow[i]) * self.step[label] + low[i]

    def at(self, label):
        """Times of all samples, and the samples."""
        n = self.values[label].shape[1]
        times = self.onsets[:, None] + np.arange(n) * (self.duration / n)
        return times.ravel(), self.values[label].ravel()


class Play:
    """A theatre that plays; `name` is where it says that it plays to."""

    def __init__(self, target, *options, minutes="12"):
        self.process = subprocess.Popen(
            [THEATRE, "--play", target, "--seed", "7", "--minutes", minutes, *options],
            stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True)
        self.first = self.process.stdout.readline()
        self.name = self.first.split()[2].rstrip(",") if self.first.startswith("playing") else ""

    def end(self):
        said = self.process.stdout.read()
        return self.process.wait(PATIENCE_S), said

    def stop(self):
        self.process.terminate()
        self.process.stdout.close()
        self.process.wait(PATIENCE_S)

    def lets_go(self, path):
        """Waits until it does not have the file open."""
        fds = f"/proc/{self.process.pid}/fd"
        until = time.monotonic() + PATIENCE_S
        while time.monotonic() < until:
            try:
                if path not in [os.readlink(os.path.join(fds, fd)) for fd in os.listdir(fds)]:
                    return True
            except FileNotFoundError:
                pass  # one was closed between the listing and the look
        return False

    def connect(self):
        return socket.create_connection(("127.0.0.1", int(self.name.split(":")[2])), PATIENCE_S)


def read_some(fd, least):
    """At least so many bytes, or what there was until the end."""
    got = bytearray()
    while len(got) < least:
        if not select.select([fd], [], [], PATIENCE_S)[0]:
            break
        part = os.read(fd, 65536)
        if not part:
            break
        got += part
    return bytes(got)


def read_all(fd):
    return read_some(fd, 1 << 40)


def header_size(signals):
    return 256 * (signals + 1)


def same_samples(stream, file, what):
    labels = list(file.values)
    check(list(stream.values) == labels and stream.units == file.units,
          f"{what}: the channels are those of the file")
    for label in labels:
        times, values = stream.at(label)
        file_times, file_values = file.at(label)
        if not np.allclose(times, file_times, rtol=0, atol=1e-6):
            check(False, f"{what}: {label} has the times of the file", f"{len(times)} samples")
            continue
        # Both were rounded, each to a digit of its own.
        room = 0.5001 * (file.step[label] + stream.step[label])
        off = np.abs(values - file_values).max()
        check(off <= room, f"{what}: {label} has the times and values of the file", f"{off:g}")


def check_fifo(top, file):
    path = os.path.join(top, "fifo")
    play = Play("fifo:" + path, "--speed", "100000")
    raw = read_all(os.open(path, os.O_RDONLY))
    status, said = play.end()
    stream = Stream(raw)
    check(status == 0 and stream.reserved == "BDF+D" and stream.count == -1
          and stream.duration == 0.04, "FIFO: BDF+ of records of 40 ms and no count")
    same_samples(stream, file, "FIFO")
    incision = next((line for line in said.splitlines() if line.endswith(" incision")), "")
    check(incision == "00:04:48 incision", "it says when the incision is", said[:200])
    times = [line.split()[0] for line in said.splitlines()]
    check(len(times) > 30 and times == sorted(times), "and all that happens, in order")


def check_tcp(file):
    play = Play("tcp:0", "--speed", "200")
    one, two = play.connect(), play.connect()  # the second is served when the first has gone
    first = Stream(read_some(one.fileno(), 200000))
    one.close()
    second = Stream(read_all(two.fileno()))
    two.close()
    check(play.end()[0] == 0, "TCP: a reader that goes away does not end the play")
    check(first.onsets[0] == 0, "TCP: the first reader has it from the start")
    check(second.onsets[0] > first.onsets[-1] and second.onsets[-1] == file.onsets[-1] + 0.96,
          "TCP: the next one has it from where it is to the end, after a header",
          f"{second.onsets[0]} {second.onsets[-1]}")
    times, values = second.at("ABP")
    file_times, file_values = file.at("ABP")
    part = file_values[np.searchsorted(file_times, times - 1e-4)]
    check(np.abs(values - part).max() <= file.step["ABP"], "TCP: with the file's samples")


def check_second_fifo_reader(top):
    path = os.path.join(top, "again")
    play = Play("fifo:" + path, "--speed", "50")
    one = os.open(path, os.O_RDONLY)
    first = Stream(read_some(one, 20000))
    os.close(one)
    check(play.lets_go(path), "FIFO: the theatre notices that its reader went")
    two = os.open(path, os.O_RDONLY | os.O_NONBLOCK)
    raw = read_some(two, header_size(7) + 20000)
    os.close(two)
    play.stop()
    second = raw[raw.find(b"\xffBIOSEMI"):]
    check(b"\xffBIOSEMI" in raw and Stream(second).onsets[0] > first.onsets[-1],
          "FIFO: a second reader gets a header again")


def check_lines(top, file):
    path = os.path.join(top, "lines")
    play = Play("fifo:" + path, "--speed", "100000", "--format", "lines")
    lines = read_all(os.open(path, os.O_RDONLY)).decode().splitlines()
    play.end()
    check(lines[0] == "t,ECG II [mV],ECG V5 [mV],ABP [mm[Hg]],PLETH [%],RESP [Ohm],CO2 [mm[Hg]]",
          "lines: the header", lines[0])
    table = np.loadtxt(lines[1:], delimiter=",")
    times, ecg = file.at("ECG II")
    check(table.shape == (len(times), 7) and np.allclose(table[:, 0], times, rtol=0, atol=1e-6),
          "lines: a row for each sample of the fastest channel, at its time", str(table.shape))
    for column, label, times_each in ((1, "ECG II", 1), (3, "ABP", 4), (6, "CO2", 20)):
        values = np.repeat(file.at(label)[1], times_each)
        # The file rounds to its digit, a line to six figures.
        room = 0.5001 * file.step[label] + 5.001e-6 * np.abs(table[:, column])
        off = np.abs(table[:, column] - values)
        check((off <= room).all(), f"lines: {label}, {times_each} rows a sample",
              f"{(off - room).max():g} too far")


def check_pty(top):
    link = os.path.join(top, "serial")
    play = Play("pty:" + link, "--speed", "50")
    fd = os.open(link, os.O_RDONLY | os.O_NOCTTY)
    local = termios.tcgetattr(fd)[3]
    raw = read_some(fd, 20000)
    check(not local & (termios.ECHO | termios.ICANON), "pseudo-terminal: raw")
    stream = Stream(raw)
    check(list(stream.values)[0] == "ECG II" and len(stream.onsets) > 50
          and np.allclose(np.diff(stream.onsets), 0.04), "pseudo-terminal: header and records")
    os.close(fd)
    play.stop()


def check_pace():
    """Sent no sooner than its time, however late this script comes to read."""
    play = Play("tcp:0", "--speed", "20", "--drift", "50000", "--channels", "3", "--rate", "100",
                minutes="10")
    began = time.monotonic()
    with play.connect() as one:
        raw = read_some(one.fileno(), header_size(4) + 500 * (3 * 4 * 3 + 24))
        lasted = time.monotonic() - began
    play.stop()
    stream = Stream(raw)
    check(len(stream.onsets) >= 500 and list(stream.values) == ["Sine 1", "Sine 2", "Sine 3"],
          "sines: so many channels")
    # Its clock is slow by 5 %: 20 s of it take 21 s.
    check(lasted >= len(stream.onsets) * 0.04 * 1.05 / 20, "a slow clock takes longer",
          f"{lasted}")
    times, values = stream.at("Sine 2")
    check(np.abs(values - np.sin(2 * np.pi * 2 * times)).max() < 1e-6, "sines: are sines")


def check_bursts():
    play = Play("tcp:0", "--speed", "10", "--burst", "4", "--channels", "1", "--rate", "25")
    with play.connect() as one:
        left = header_size(2)
        while left > 0 and (part := one.recv(left)):
            left -= len(part)
        sizes = [len(one.recv(1 << 20)) for _ in range(3)]
    play.stop()
    check(all(size > 0 and size % (100 * (3 + 24)) == 0 for size in sizes), "bursts: 4 s of records at once",
          str(sizes))


def check_refusals(top):
    file = os.path.join(top, "file")
    for words in (["--play", "udp:1"], ["--play", "tcp:70000"], ["--play", "tcp:1", "--speed", "0"],
                  ["--play", "fifo:" + file],
                  ["--play", "tcp:0", "--channels", "3"], ["--format", "xml", "--play", "tcp:0"]):
        bad = subprocess.run([THEATRE, *words], capture_output=True, timeout=PATIENCE_S)
        check(bad.returncode == 2 and bad.stderr.count(b"\n") == 1,
              "refused in one line: " + " ".join(words).replace(top, "DIR"))


def main():
    top = tempfile.mkdtemp()
    try:
        open(os.path.join(top, "file"), "w").close()
        subprocess.run([THEATRE, "--into", top, "--minutes", "12", "--seed", "7"], check=True)
        file = Stream(open(os.path.join(top, "S-204-monitor.edf"), "rb").read())
        check_fifo(top, file)
        check_tcp(file)
        check_second_fifo_reader(top)
        check_lines(top, file)
        check_pty(top)
        check_pace()
        check_bursts()
        check_refusals(top)
    finally:
        shutil.rmtree(top)
    return 1 if failed else 0


sys.exit(main())
