#!/usr/bin/python3
"""The live screen under 64 channels x 1 kHz: how far a key's stamp is from its typing, what share of
a core the program takes, and whether its memory stays flat.

    bench_screen.py INCISURA THEATRE FOLDER [SECONDS] [SPEED]
"""
import fcntl, json, os, pty, random, select, struct, subprocess, sys, termios, time

incisura, theatre, folder = sys.argv[1:4]
seconds = float(sys.argv[4]) if len(sys.argv) > 4 else 30
speed = sys.argv[5] if len(sys.argv) > 5 else "1"
CHANNELS, RATE = 64, 1000
case = f"{folder}/bench.case"
fifo = f"{folder}/bench.fifo"
for name in os.listdir(folder):
    if name.startswith("bench.") or name.startswith("bench-live"):
        os.unlink(f"{folder}/{name}")
subprocess.run([incisura, "start", case, "--subject", "B-1", "--rater", "KM"], check=True,
               stderr=subprocess.DEVNULL)
os.mkfifo(fifo)
player = subprocess.Popen([theatre, "--play", f"fifo:{fifo}", "--channels", str(CHANNELS), "--rate",
                           str(RATE), "--format", "bdf", "--speed", speed, "--minutes", "480"],
                          stdout=subprocess.DEVNULL)
pid, terminal = pty.fork()
if pid == 0:
    os.environ["TERM"] = "xterm-256color"
    os.environ["LC_ALL"] = "C.UTF-8"
    os.execv(incisura, [incisura, "live", case, f"fifo:{fifo}"])
fcntl.ioctl(terminal, termios.TIOCSWINSZ, struct.pack("HHHH", 60, 200, 0, 0))


def drain(until):
    while time.monotonic() < until:
        ready, _, _ = select.select([terminal], [], [], max(0, until - time.monotonic()))
        if ready:
            os.read(terminal, 1 << 16)


def used():
    fields = open(f"/proc/{pid}/stat").read().rsplit(")", 1)[1].split()
    return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")


def memory():
    for line in open(f"/proc/{pid}/status"):
        if line.startswith("VmRSS"):
            return int(line.split()[1]) / 1024


drain(time.monotonic() + 5)
before, began, memories, typed = used(), time.monotonic(), [memory()], []
rng = random.Random(1)
while time.monotonic() - began < seconds:
    drain(time.monotonic() + rng.uniform(0.05, 0.15))
    typed.append(time.clock_gettime_ns(time.CLOCK_BOOTTIME))
    os.write(terminal, b"c")
    memories.append(memory())
took, share = time.monotonic() - began, used() - before
drain(time.monotonic() + 1)
os.write(terminal, b"\x11\x11")
end = time.monotonic() + 60
while time.monotonic() < end:
    try:
        if select.select([terminal], [], [], 0.2)[0] and not os.read(terminal, 1 << 16):
            break
    except OSError:
        break
os.waitpid(pid, 0)
player.kill()
marks = json.loads(subprocess.run([incisura, "marks", case, "--json"], check=True,
                                  capture_output=True).stdout)
marks = marks["marks"] if isinstance(marks, dict) else marks
stamps = sorted(mark["stamp_ns"] for mark in marks)
off = sorted((stamp - time_ns) / 1e6 for stamp, time_ns in zip(stamps, typed))
print(f"{len(typed)} keys typed, {len(stamps)} stamped, {CHANNELS} channels x {RATE} Hz, "
      f"speed {speed}, {took:.0f} s")
print(f"key to stamp                       p50 {off[len(off) // 2]:8.3f} ms   "
      f"p99 {off[len(off) * 99 // 100]:8.3f} ms   worst {off[-1]:8.3f} ms")
print(f"live, all threads                  {100 * share / took:8.1f} % of one core")
print(f"memory                             {memories[0]:8.1f} MB at first, "
      f"{memories[len(memories) // 2]:.1f} MB in the middle, {memories[-1]:.1f} MB at the end")
