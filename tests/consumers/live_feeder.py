"""A device that streams counted samples: BDF+ records of 100 ms into a FIFO, one channel whose every
sample is one more than the one before. What is lost, doubled or late shows. Its clock goes on while
nobody reads, as a monitor's does."""
import os
import select
import threading
import time

RATE_HZ, RECORD_S = 250, 0.1
ANNOTATION = 30
LOWEST, HIGHEST = -(1 << 23), (1 << 23) - 1


def header(samples):
    def fields(*pairs):
        return "".join(f"{text:<{width}}" for text, width in pairs).encode()

    def each(width, *texts):
        return "".join(f"{text:<{width}}" for text in texts).encode()

    return (b"\xffBIOSEMI" + fields(("X X X X", 80), ("Startdate 20-MAY-2031 X X X", 80),
                                    ("20.05.31", 8), ("09.00.00", 8), (768, 8), ("BDF+C", 44),
                                    (-1, 8), (RECORD_S, 8), (2, 4))
            + each(16, "Count", "BDF Annotations") + each(80, "", "") + each(8, "uV", "")
            + each(8, LOWEST, -1) + each(8, HIGHEST, 1)
            + each(8, LOWEST, LOWEST) + each(8, HIGHEST, HIGHEST)
            + each(80, "", "") + each(8, samples, ANNOTATION // 3) + each(32, "", ""))


def record(first, samples, onset_s):
    values = b"".join([k.to_bytes(3, "little") for k in range(first, first + samples)])
    return values + f"+{onset_s:.1f}\x14\x14\0".encode().ljust(ANNOTATION, b"\0")


class Feeder:
    """Plays in real time to whoever reads: who reads now has samples [since, sent)."""

    def __init__(self, path, rate_hz=RATE_HZ):
        os.mkfifo(path)
        self.path, self.rate_hz, self.paused = path, rate_hz, False
        self.since = self.sent = 0
        self.samples = round(rate_hz * RECORD_S)
        self.began = time.monotonic()
        self.ending = threading.Event()
        self.thread = threading.Thread(target=self.work, daemon=True)
        self.thread.start()

    def playing(self):
        """Which sample is being taken now."""
        return (time.monotonic() - self.began) * self.rate_hz

    def end(self):
        self.ending.set()
        self.thread.join()

    def work(self):
        while not self.ending.is_set():
            try:
                fd = os.open(self.path, os.O_WRONLY | os.O_NONBLOCK)
            except OSError:  # nobody reads yet
                self.ending.wait(0.01)
                continue
            try:
                self.serve(fd)
            except OSError:  # the reader is gone
                pass
            os.close(fd)

    def send(self, fd, data):
        while data and not self.ending.is_set():
            try:
                data = data[os.write(fd, data):]
            except BlockingIOError:
                select.select([], [fd], [], 0.1)

    def serve(self, fd):
        reader = select.poll()
        reader.register(fd, 0)  # only that nobody reads any more is of interest
        self.send(fd, header(self.samples))
        first = number = int(self.playing() / self.samples) + 1
        self.since = self.sent = first * self.samples
        while not self.ending.is_set():
            wait_s = self.began + (number + 1) * RECORD_S - time.monotonic()
            if reader.poll(max(0, wait_s) * 1000 + 1):
                return  # at once, so that the next reader gets a header
            if self.paused:
                self.began += max(0, -wait_s)
                continue
            if time.monotonic() < self.began + (number + 1) * RECORD_S:
                continue
            self.send(fd, record(number * self.samples, self.samples, (number - first) * RECORD_S))
            number += 1
            self.sent = number * self.samples
