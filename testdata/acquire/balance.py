#!/usr/bin/env python3
"""An independent balance with bad habits, for testing the daemon from outside.

It shares no code with the daemon: its own cell, its own lines, its own noise. It
lives on a pseudo-terminal behind a link (balance.py pty LINK) or on TCP (balance.py
tcp), plays a session of weighings and says on its standard output what a patient
person would have written down:

    port WHERE        where to find it
    expect MASS       a load has come to rest and is shown as MASS, in g
    tare              it waits for the tare command
    done              the session is over

It runs some twenty times as fast as a real one: 300 lines a second, and a load is left
alone for 0.5 s. Standard library only.
"""

import math
import os
import random
import select
import socket
import sys
import termios
import time

RATE = 300.0
DIGIT = 0.0001


def make_raw(fd):
    attrs = termios.tcgetattr(fd)
    attrs[0] = attrs[1] = attrs[3] = 0
    attrs[6][termios.VMIN], attrs[6][termios.VTIME] = 1, 0
    termios.tcsetattr(fd, termios.TCSANOW, attrs)


class Terminal:
    """A pseudo-terminal behind a link; unplugging takes it away."""

    def __init__(self, link):
        self.link = link
        self.plug()

    def plug(self):
        self.master, self.slave = os.openpty()
        make_raw(self.slave)
        os.set_blocking(self.master, False)
        beside = self.link + ".new"
        os.symlink(os.ttyname(self.slave), beside)
        os.replace(beside, self.link)

    def unplug(self):
        os.close(self.master)
        os.close(self.slave)

    def where(self):
        return self.link

    def write(self, data):
        try:
            os.write(self.master, data)
        except BlockingIOError:
            pass

    def read(self):
        if select.select([self.master], [], [], 0)[0]:
            try:
                return os.read(self.master, 256)
            except OSError:
                pass
        return b""


class Server:
    """A serial device server that knows one client."""

    def __init__(self):
        self.listener = socket.create_server(("127.0.0.1", 0))
        self.listener.settimeout(30)
        self.client = None

    def plug(self):
        self.client, _ = self.listener.accept()
        self.client.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)

    def unplug(self):
        self.client.close()

    def where(self):
        return "127.0.0.1:%d" % self.listener.getsockname()[1]

    def write(self, data):
        self.client.sendall(data)

    def read(self):
        if select.select([self.client], [], [], 0)[0]:
            return self.client.recv(256)
        return b""


class Balance:
    def __init__(self, line, seed):
        self.line = line
        self.rng = random.Random(seed)
        self.load = 0.0       # g on the pan
        self.value = 0.0      # behind the filter
        self.tare = 0.0
        self.resting = 0      # updates for which the value has been calm
        self.habits = set()
        self.commands = b""
        self.tared = False

    # --- what it prints

    def shown(self):
        return self.value - self.tare

    def text(self, value, stable):
        sign = "-" if round(value / DIGIT) < 0 else "+"
        if "hidden plus" in self.habits and sign == "+":
            sign = " "
        number = "%9.4f" % abs(value)
        if "comma" in self.habits:
            number = number.replace(".", ",")
        body = sign + number + " " + ("g  " if stable else "   ")
        return body if "short" in self.habits else "N     " + body

    def stat(self, body):
        body = body.ljust(14)
        return body if "short" in self.habits else "Stat  " + body

    def update(self):
        """One update of the display."""
        target = self.load
        if "hand" in self.habits:
            target += 40 + 15 * self.rng.random()
        if "draught" in self.habits:
            target += self.rng.gauss(0, 0.01)
        self.value += (target - self.value) * 0.3
        calm = abs(target - self.value) < 0.4 * DIGIT
        self.resting = self.resting + 1 if calm else 0
        if calm and self.resting > 4:
            self.value = target
        stable = self.resting > 12
        if "flickering unit" in self.habits and self.rng.random() < 0.1:
            stable = False
        if self.shown() > 220.0:
            self.send(self.stat("      H"))
            return
        shown = self.shown()
        if stable and self.rng.random() < 0.15:
            shown += self.rng.choice((-DIGIT, DIGIT))
        self.send(self.text(shown, stable))

    # --- how it sends

    def send(self, text):
        data = text.encode("ascii") + b"\r\n"
        if "parity" in self.habits:
            data = bytes(c | 0x80 if bin(c).count("1") % 2 else c for c in data)
        if "garbage" in self.habits and self.rng.random() < 0.1:
            data = bytes(self.rng.randrange(256) for _ in range(self.rng.randrange(1, 30))) + data
        if "nul" in self.habits and self.rng.random() < 0.2:
            at = self.rng.randrange(len(data) - 2)
            data = data[:at] + b"\0" + data[at + 1:]
        if "lost bytes" in self.habits and self.rng.random() < 0.2:
            at = self.rng.randrange(len(data) - 2)
            data = data[:at] + data[at + 1 + self.rng.randrange(3):]
        if "other codes" in self.habits and self.rng.random() < 0.3:
            code = self.rng.choice(("T1    ", "wRef  ", "Nom.  ", "Total ", "Setp  "))
            data = code.encode() + b"+  77.7777 g  \r\n" + data
        if "flow" in self.habits and self.rng.random() < 0.3:
            data = b"\x13" + data[:5] + b"\x11" + data[5:]
        if "splits" in self.habits:
            while data:
                n = self.rng.randrange(1, 9)
                self.line.write(data[:n])
                data = data[n:]
                time.sleep(0.0003)
            return
        self.line.write(data)

    def report(self):
        dash = "-" * 20
        for text in (dash, "02.12.2026     09:43", "Type          PY-220", "Ser.no.     00778899", "Vers.   1.1007.12.1", dash,
                     "Cal. Ext.", "Nom.  +  200.0000 g  ", "Diff. +    0.0003 g  ", dash, "Name:", "", dash):
            self.line.write(text.encode() + b"\r\n")

    def obey(self):
        self.commands += self.line.read()
        for name, reply in ((b"\x1bx1_", b"PY-220\r\n"), (b"\x1bx2_", b"001,234,567\r\n"), (b"\x1bx3_", b"00-42-01\r\n")):
            if name in self.commands:
                self.commands = self.commands.replace(name, b"", 1)
                self.line.write(reply)
        if b"\x1bT" in self.commands:
            self.commands = self.commands.replace(b"\x1bT", b"", 1)
            for _ in range(3):
                self.line.write(self.stat("").encode() + b"\r\n")
            self.tare = self.value
            self.tared = True

    # --- how it lives

    def live(self, seconds):
        for _ in range(int(seconds * RATE)):
            start = time.monotonic()
            self.obey()
            self.update()
            time.sleep(max(0.0, 1 / RATE - (time.monotonic() - start)))

    def put(self, mass, *habits):
        """Puts a load on the pan and lets it rest, with habits on the way and at rest."""
        self.habits |= set(habits)
        self.load = mass
        self.live(0.5)
        self.habits -= set(habits)
        say("expect %.4f" % round(self.shown(), 4))


def say(text):
    print(text, flush=True)


def session(b):
    line, rng = b.line, b.rng
    say("port " + line.where())
    if isinstance(line, Server):
        line.plug()
    b.live(2.0)                       # it prints from the start, and is asked who it is
    say("expect 0.0000")
    mass = lambda: round(40 + 60 * rng.random(), 4)
    b.put(mass()); b.put(0.0)
    b.put(mass(), "splits"); b.put(0.0, "splits")
    b.put(mass(), "comma", "hidden plus"); b.put(mass(), "short"); b.put(0.0, "flow")
    b.habits.add("garbage")
    b.live(0.5)
    b.habits.discard("garbage")
    b.put(mass())
    b.habits.add("nul")
    b.live(0.5)
    b.habits.discard("nul")
    b.put(mass(), "other codes"); b.put(0.0, "other codes")
    b.put(mass(), "parity"); b.put(0.0, "parity")

    again = mass()                    # a report in the middle, unasked
    b.put(again)
    b.report()
    b.live(1.0)
    b.put(0.0)

    b.habits.add("hand")              # a hand holds on to the pan
    b.load = mass()
    b.live(0.7)
    b.habits.discard("hand")
    b.put(b.load); b.put(0.0)

    b.habits.add("lost bytes")        # nothing is to be taken from a line that loses bytes
    b.habits.add("flickering unit")
    b.load = mass()
    b.live(0.6)
    b.habits -= {"lost bytes", "flickering unit"}
    b.put(b.load)

    b.load = 300.0                    # overload
    b.live(0.5)
    b.put(mass()); b.put(0.0)

    b.put(mass())                     # the adapter is pulled; the load stays: no new weight
    line.unplug()
    time.sleep(0.3)
    line.plug()
    b.live(2.0)
    b.put(mass())
    line.unplug()                     # the load changes meanwhile
    time.sleep(0.3)
    line.plug()
    b.load = b.value = mass()
    b.live(2.0)
    say("expect %.4f" % round(b.shown(), 4))

    say("tare")                       # on command; its zero counts
    for _ in range(200):
        b.live(0.1)
        if b.tared:
            break
    b.live(1.0)
    say("expect 0.0000")
    b.put(b.load + 10.0123)

    b.habits.add("draught")           # never calm: never a weight
    b.load = mass()
    b.live(1.5)
    b.habits.discard("draught")
    b.put(b.load)
    say("done")
    sys.stdin.readline()


if __name__ == "__main__":
    where, seed = sys.argv[1], int(sys.argv[-1])
    session(Balance(Terminal(sys.argv[2]) if where == "pty" else Server(), seed))
