#!/usr/bin/env python3
"""Hands every finished run of a drop folder to a command, each once.

    python3 pickup.py DROP DONE COMMAND [ARG …]

A run's folder appears in the drop whole, so nothing has to be waited for; names that
begin with a point are being built and are left alone. The folder is checked against its
SHA256SUMS, then COMMAND ARG … FOLDER is run. When that succeeds, the run's name is put
down in the file DONE, which is synced before the next run is looked at. Call it from a
timer, as often as you like.
"""
import hashlib
import os
import subprocess
import sys


def whole(folder):
    with open(os.path.join(folder, "SHA256SUMS"), encoding="utf-8") as sums:
        for line in sums:
            want, name = line.rstrip("\n").split("  ", 1)
            with open(os.path.join(folder, name), "rb") as f:
                if hashlib.sha256(f.read()).hexdigest() != want:
                    return False
    return True


def main(drop, done_file, command):
    done = set()
    if os.path.exists(done_file):
        with open(done_file, encoding="utf-8") as f:
            done = set(f.read().split())
    for name in sorted(os.listdir(drop)):
        folder = os.path.join(drop, name)
        if name.startswith(".") or name in done or not os.path.isfile(os.path.join(folder, "SHA256SUMS")):
            continue
        if not whole(folder):
            print(f"{name}: a file does not fit SHA256SUMS, left alone", file=sys.stderr)
            continue
        if subprocess.call(command + [folder]) != 0:
            print(f"{name}: the command failed, tried again next time", file=sys.stderr)
            continue
        with open(done_file, "a", encoding="utf-8") as f:
            f.write(name + "\n")
            f.flush()
            os.fsync(f.fileno())


if __name__ == "__main__":
    if len(sys.argv) < 4:
        sys.exit(__doc__)
    main(sys.argv[1], sys.argv[2], sys.argv[3:])
