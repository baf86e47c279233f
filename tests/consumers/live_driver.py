"""A live session on a pseudo-terminal, for scripts: the real program, keys in, cells out.

The glass understands what the program's painter sends (cursor, erase, text) and nothing else. What
it says about saving is taken from title lines that are complete: one in the middle of being painted
is not believed. Waits for what should be there, never for time. Uses the standard library alone.
"""
import codecs
import ctypes
import fcntl
import json
import os
import pty
import re
import select
import signal
import struct
import subprocess
import termios
import time

INCISURA = os.environ["INCISURA"]
PATIENCE_S = 60
failed = 0


def ok(good, what, detail=""):
    global failed
    failed += not good
    print(("ok " if good else "not ok ") + what + ("" if good else f": {detail}"), flush=True)


def run(*words):
    return subprocess.run([INCISURA, *words], capture_output=True, text=True, timeout=PATIENCE_S)


def done(*words):
    r = run(*words)
    if r.returncode != 0:
        raise SystemExit(f"not ok incisura {' '.join(words)}: exit {r.returncode}: {r.stderr}")
    return r.stdout


def marks(case):
    """In the order in which they were entered."""
    return sorted(json.loads(done("marks", case, "--json")), key=lambda mark: mark["id"])


def until(what, limit_s=PATIENCE_S, pause=lambda: time.sleep(0.02)):
    """Waits until what() is true, calling pause() in between; its last answer."""
    end = time.monotonic() + limit_s
    while not (answer := what()) and time.monotonic() < end:
        pause()
    return answer


class Glass:
    """Cells of a terminal. `title` is row 0 as it was when the program last went on to another."""

    def __init__(self, rows, columns):
        self.rows, self.columns = rows, columns
        self.cells = [[" "] * columns for _ in range(rows)]
        self.row = self.column = 0
        self.pending, self.title = "", ""
        self.decode = codecs.getincrementaldecoder("utf-8")("replace").decode

    def text(self, row):
        return "".join(self.cells[row])

    def go(self, row, column):
        if self.row == 0 and row > 0:
            self.title = self.text(0)
        self.row, self.column = row, column

    def control(self, parameters, final):
        numbers = [int(n) for n in parameters.split(";") if n.isdigit()]
        if final == "H":
            self.go((numbers or [1])[0] - 1, numbers[1] - 1 if len(numbers) > 1 else 0)
        elif final == "J" and numbers == [2]:
            self.cells = [[" "] * self.columns for _ in range(self.rows)]

    def feed(self, data):
        text, at = self.pending + self.decode(data), 0
        self.pending = ""
        while at < len(text):
            if text[at] != "\033":
                if text[at] >= " " and self.row < self.rows and self.column < self.columns:
                    self.cells[self.row][self.column] = text[at]
                    self.column += 1
                at += 1
                continue
            found = re.compile(r"\033(?:\[([?>!0-9;]*)([@-~])|[()][A-Z0-9]|[^\[()])").match(text, at)
            if not found:
                self.pending = text[at:]
                return
            if found[2]:
                self.control(found[1], found[2])
            at = found.end()


class Live:
    """`incisura live CASE [SOURCE...]`; before() is called in the new process."""

    def __init__(self, case, *sources, rows=30, columns=100, before=None):
        self.glass = Glass(rows, columns)
        self.status = None
        self.pid, self.fd = pty.fork()
        if self.pid == 0:
            try:
                fcntl.ioctl(0, termios.TIOCSWINSZ, struct.pack("HHHH", rows, columns, 0, 0))
                os.environ.update(TERM="xterm-256color", LC_ALL="C.UTF-8")
                if before:
                    before()
                os.execv(INCISURA, [INCISURA, "live", case, *sources])
            finally:
                os._exit(127)

    def pump(self, wait_s=0.02):
        """Takes in what there is; False when the program is gone."""
        if self.fd < 0:
            return False
        if not select.select([self.fd], [], [], wait_s)[0]:
            return True
        try:
            data = os.read(self.fd, 1 << 16)
        except OSError:  # how Linux says that the other side is closed
            data = b""
        self.glass.feed(data)
        return bool(data)

    def screen(self):
        return "\n".join(self.glass.text(row).rstrip() for row in range(self.glass.rows))

    def shows(self, pattern, limit_s=PATIENCE_S):
        """Waits until the screen matches; the match, None when it never does."""
        end = time.monotonic() + limit_s
        while not (found := re.search(pattern, self.screen())):
            if time.monotonic() > end or not self.pump():
                return re.search(pattern, self.screen())
        return found

    def saved(self):
        """(marks, incomplete ones) of a title that says SAVED, else None."""
        found = re.search(r"(\d+) marks?(?:, (\d+) incomplete)?   SAVED\s*$", self.glass.title)
        return (int(found[1]), int(found[2] or 0)) if found else None

    def wait_saved(self, count, limit_s=PATIENCE_S):
        """Waits until the title says that so many marks are saved, whatever is incomplete."""
        return until(lambda: (self.saved() or (-1,))[0] == count, limit_s, self.pump)

    def type(self, keys):
        os.write(self.fd, keys.encode())

    def gone(self):
        """Reaps the process and what it still showed."""
        self.status = os.waitpid(self.pid, 0)[1]
        while self.pump(0) and select.select([self.fd], [], [], 0)[0]:
            pass
        os.close(self.fd)
        self.fd = -1

    def kill(self):
        os.kill(self.pid, signal.SIGKILL)
        self.gone()

    def leave(self):
        """^Q until it ends; its exit status, None when it does not end."""
        def ended():
            return not self.pump(0.1)
        self.type("\x11")
        if not until(ended, 1, lambda: None):
            self.type("\x11")
        if not until(ended, PATIENCE_S, lambda: None):
            self.kill()
            return None
        self.gone()
        return os.waitstatus_to_exitcode(self.status)


# ---- a file read by somebody else ----

class Header(ctypes.Structure):
    """The beginning of EDFlib's; what follows is its business."""
    _fields_ = [("handle", ctypes.c_int), ("filetype", ctypes.c_int), ("signals", ctypes.c_int),
                ("duration", ctypes.c_longlong), ("rest", ctypes.c_char * (1 << 22))]


def edflib_samples(path, signal_number):
    """Physical values of one signal as EDFlib reads them; a string when it refuses the file."""
    lib, header = ctypes.CDLL("libedf.so.1"), Header()
    if lib.edfopen_file_readonly(path.encode(), ctypes.byref(header), 0) != 0:
        return f"EDFlib says {header.filetype}"
    most = os.path.getsize(path)
    values = (ctypes.c_double * most)()
    count = lib.edfread_physical_samples(header.handle, signal_number, most, values)
    lib.edfclose_file(header.handle)
    return list(values[:max(count, 0)])
