#!/usr/bin/python3
"""The README's walk, command by command, as a new user would type it. Commands that open the
screen are left to the terminal tests."""
import os
import re
import shutil
import subprocess
import sys
import tempfile

readme = open(os.path.join(os.environ["TESTS"], "..", "README.md"), encoding="utf-8").read()
walk = readme[readme.index("## Ten minutes"):readme.index("## Formats")]
folder = tempfile.mkdtemp(prefix="incisura-readme-")
path = os.pathsep.join([os.path.dirname(os.environ["INCISURA"]),
                        os.path.dirname(os.environ["THEATRE"]), os.environ["PATH"]])
failed = 0


def ok(good, what, detail=""):
    global failed
    failed += not good
    print(("ok " if good else "not ok ") + "README: " + what + ("" if good else f": {detail}"),
          flush=True)


for block in re.findall(r"```sh\n(.*?)```", walk, re.S):
    # a here-document goes with the line that opens it
    for command in re.findall(r"[^\n]*<<'END'\n.*?\nEND\n|[^\n]+\n", block, re.S):
        name = command.split("\n")[0][:70]
        if command.startswith("incisura review"):
            continue
        r = subprocess.run(["sh", "-c", command], cwd=folder, env={**os.environ, "PATH": path},
                           capture_output=True, text=True, timeout=120)
        ok(r.returncode == 0, name, r.stderr[:200])
tables = os.path.join(folder, "windows")
for name in ("windows-long.csv", "windows-wide.csv", "features.csv", "dictionary.csv",
             "provenance.json"):
    ok(os.path.exists(os.path.join(tables, name)), f"{name} is there")
header = open(os.path.join(tables, "windows-long.csv")).readline().strip()
ok(f"`{header}`" in readme, "the long table's columns are as written", header)
for topic in set(re.findall(r"`incisura help (\w+)`", readme)):
    r = subprocess.run([os.environ["INCISURA"], "help", topic], capture_output=True, text=True)
    ok(r.returncode == 0 and len(r.stdout) > 80, f"help {topic} is there")
shutil.rmtree(folder)
sys.exit(failed > 0)
