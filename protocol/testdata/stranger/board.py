#!/usr/bin/env python3
"""A small board written from protocol/SPEC.md and nothing else.

It shows that the document is enough, in a language and a style that share
nothing with the other boards here. Its motor is one equation. What it leaves
out, as the document allows: current, bus and temperature, inputs, capture, the
powers.

It is given its time on standard input: orders of a letter and a little-endian
32-bit number, answered with a length and so many bytes.
    B n + n bytes   received from the console        -> nothing
    R us            let time pass                    -> bytes sent
    X 0             the power fails and comes back   -> nothing
"""
import math
import struct
import sys

LOOP, WIN, CPT = 2000, 5, 1024                  # us, loops, counts per turn
BAUD = 115200
VMAX, WMAX = 12.0, 400.0                        # hard limits, V and rad/s
BEAT_MIN, BEAT_MAX = 100, 800                   # ms
W_LSB, V_LSB = 0.05, 0.001                      # rad/s, V
LIMITS = "vmax wmax turns stall wrong nocnt vbreak run beat".split()
ZERO_OK = "turns vbreak".split()
GAINS = "kp ki b".split()
OFF, ARMED, DRIVING, LOOPING, RAMPING, TRIPPED = range(6)
STATES = "off armed driving looping ramping tripped".split()
WORDS = {1: "bad crc", 2: "too long", 3: "unknown verb", 4: "bad argument", 5: "wrong state", 6: "old number",
         8: "over a hard limit", 9: "line too full", 10: "moving", 12: "tripped", 13: "not on this board",
         14: "set differs", 16: "limits differ"}

def crc(data):
    r = 0xFFFF
    for byte in data:
        r ^= byte << 8
        for _ in range(8):
            r = (r << 1 ^ 0x1021 if r & 0x8000 else r << 1) & 0xFFFF
    return r

def bits(x):
    return struct.unpack(">I", struct.pack(">f", x))[0]

def value(b):
    return struct.unpack(">f", struct.pack(">I", b))[0]

def set_crc(row):
    return crc("".join("%08X" % b for b in row).encode())

def integer(s, top=4294967295):
    """A decimal integer in its one spelling, or None."""
    digits = s[1:] if s[:1] == "-" else s
    if not digits.isdigit() or not digits.isascii() or len(digits) > 10 or str(int(s)) != s:
        return None
    return int(s) if abs(int(s)) <= top else None

def digits(s, n):
    """n upper-case hex digits, or None."""
    return int(s, 16) if len(s) == n and all(c in "0123456789ABCDEF" for c in s) else None

class No(Exception):
    """A refusal with its code."""

class Store:
    """What outlives the power."""
    def __init__(self):
        self.gains = [bits(0.02), bits(0.3), bits(1.0)]
        self.writes, self.boots, self.seed = 0, 0, 12345

class Board:
    def __init__(self, store):
        self.store = store
        store.boots = (store.boots + 1) % 65536
        self.us = 0
        self.angle = self.speed = 0.0            # the motor
        self.volts = 0.0
        self.window = [0] * (WIN + 1)
        self.moved = 0
        self.out, self.sent = bytearray(), 0.0
        self.line, self.long, self.grumbled = bytearray(), False, -10**9
        self.state, self.trip, self.cuts = OFF, 0, 0
        self.nonce, self.token, self.k = None, None, 0
        self.beat_at = self.drive_at = 0
        self.log, self.stops = [], 0
        self.last = None
        self.gains, self.gains_staged = list(store.gains), list(store.gains)
        hard = {"vmax": VMAX, "wmax": WMAX, "stall": 1, "wrong": 0.5, "nocnt": 1, "run": 10, "beat": BEAT_MAX / 1000}
        self.limits = [bits(hard.get(n, 0)) for n in LIMITS]
        self.limits_staged, self.limits_used = list(self.limits), False
        self.every = self.wait = self.seq = self.since_v = 0
        self.mean = []
        self.target = self.integral = 0.0
        self.out += b"\n"
        self.say("ev boot %d power" % store.boots)

    # ---- lines ----

    def say(self, body):
        b = body.encode()
        self.out += b + b";%04X\n" % crc(b)

    def receive(self, byte):
        if byte == 0x18:
            self.cut()
            self.line, self.long = bytearray(), False
        elif byte == 0x0A:
            line, long = bytes(self.line), self.long
            self.line, self.long = bytearray(), False
            if line.endswith(b"\r"):
                line = line[:-1]
            if long:
                self.grumble(2)
            elif line:
                self.take(line)
        elif len(self.line) < 127 or byte == 0x0D:
            self.line.append(byte)
        else:
            self.long = True

    def grumble(self, code):
        if self.us - self.grumbled >= 10000:
            self.grumbled = self.us
            self.say("no 0 %d %s" % (code, WORDS[code]))

    def take(self, line):
        if line == b"id":
            return self.identity(0)
        if line == b"tel":
            return self.sample("t")
        if line == b"stop":
            return self.cut()
        body, tail = line[:-5], line[-5:]
        if any(c < 0x20 or c > 0x7E for c in line) or tail[:1] != b";" or digits(tail[1:].decode(), 4) != crc(body):
            return self.grumble(1)
        words = body.decode().split(" ")
        n = integer(words[1], 65535) if len(words) > 1 else None
        if n is None or n < 0:
            return
        if words[0] in ("dv", "ds", "hb"):
            return self.motion(words[0], n, words[2:])
        if n == 0:
            return
        if self.last and self.last[0] == (n, tail):
            self.out += self.last[1]
            return
        start = len(self.out)
        try:
            answer = self.answer(words[0], n, words[2:])
            if answer is not None:
                self.say(("ok %d %s" % (n, answer)).strip())
        except No as no:
            self.say("no %d %d %s" % (n, no.args[0], WORDS[no.args[0]]))
        self.last = ((n, tail), bytes(self.out[start:]))

    # ---- stopping ----

    def cut(self):
        self.halt(1, self.us)
        self.cuts = (self.cuts + 1) % 65536
        self.say("cut %d %d" % (self.cuts, self.us % 2**32))

    def halt(self, cause, seen):
        self.volts, self.nonce, self.token = 0.0, None, None
        if self.state in (OFF, TRIPPED):
            return
        self.stops += 1
        self.log.insert(0, (cause, seen, self.beat_at, self.us, round(self.reported() * 1000)))
        del self.log[6:]
        self.state = OFF
        if cause >= 10:
            self.state, self.trip = TRIPPED, cause
        self.say("ev %s %d %d" % ("trip" if cause >= 10 else "off", cause, seen % 2**32))

    # ---- requests ----

    def answer(self, verb, n, args):
        """What stands behind ok; None: the answer has been given."""
        if verb in ("id", "tel", "stop", "in", "cap", "ramp", "dis"):
            return self.plain(verb, n, args)
        if verb not in ("nonce", "arm", "reset", "lim", "gain", "log", "rate"):
            raise No(3)
        return getattr(self, "do_" + verb)(args)

    def want(self, args, n):
        if len(args) != n:
            raise No(4)

    def plain(self, verb, n, args):
        """The requests without arguments that have no page of their own."""
        if verb in ("cap", "ramp"):
            raise No(13)
        self.want(args, 0)
        if verb == "id":
            return self.identity(n)
        if verb == "tel":
            self.sample("t")
        if verb == "stop":
            self.cut()
        if verb == "dis":
            self.halt(3, self.us)
        return "0000" if verb == "in" else ""

    def do_nonce(self, args):
        self.want(args, 0)
        self.store.seed = (self.store.seed * 1664525 + 1013904223) % 2**32   # runs on over restarts, never twice
        self.nonce = (self.store.seed, self.us)
        return "%08X" % self.store.seed

    def do_arm(self, args):
        nonce, self.nonce = self.nonce, None
        self.want(args, 2)
        number, limits = digits(args[0], 8), digits(args[1], 4)
        if number is None or limits is None:
            raise No(4)
        if self.state == TRIPPED:
            raise No(12)
        if self.state != OFF:
            raise No(5)
        if nonce is None or nonce[0] != number or self.us - nonce[1] > 2000000:
            raise No(6)
        if not self.limits_used or limits != set_crc(self.limits):
            raise No(16)
        if not self.rests():
            raise No(10)
        self.token = (number >> 8) & 0xFFFF
        self.state, self.k = ARMED, 0
        self.beat_at = self.drive_at = self.us
        return "%04X" % self.token

    def do_reset(self, args):
        self.want(args, 0)
        if self.state not in (OFF, TRIPPED):
            raise No(5)
        if not self.rests():
            raise No(10)
        self.state, self.trip = OFF, 0
        return ""

    def slot(self, args, i, names):
        s = integer(args[i], len(names) - 1)
        if s is None or s < 0:
            raise No(4)
        return s

    def do_lim(self, args):
        what = args[0] if args else ""
        self.want(args, {"crc": 1, "get": 2, "set": 3, "use": 2}.get(what, -1))
        s = self.slot(args, 1, LIMITS) if what in ("get", "set") else 0
        if what == "crc":
            return "%04X %d" % (set_crc(self.limits), len(LIMITS))
        if what == "get":
            return "%d %s %08X" % (s, LIMITS[s], self.limits[s])
        b = digits(args[-1], 8 if what == "set" else 4)
        if b is None:
            raise No(4)
        if self.state != OFF:
            raise No(5)
        if what == "set":
            self.limits_staged[s] = self.checked(LIMITS[s], b)
            return str(s)
        if b != set_crc(self.limits_staged):
            raise No(14)
        self.limits, self.limits_used = list(self.limits_staged), True
        return ""

    def checked(self, name, b):
        if not math.isfinite(value(b)) or b >= 0x80000000 or b == 0 and name not in ZERO_OK:
            raise No(4)
        top = {"vmax": VMAX, "wmax": WMAX, "beat": BEAT_MAX / 1000}.get(name)
        if top and b > bits(top) or name == "beat" and b < bits(BEAT_MIN / 1000):
            raise No(8)
        return b

    def do_gain(self, args):
        what = args[0] if args else ""
        self.want(args, {"get": 3, "crc": 2, "set": 3, "use": 2, "store": 2}.get(what, -1))
        if what in ("get", "crc"):
            row = {"run": self.gains, "store": self.store.gains}.get(args[1])
            if row is None:
                raise No(4)
            if what == "crc":
                return "%04X %d" % (set_crc(row), len(GAINS))
            s = self.slot(args, 2, GAINS)
            return "%d %s %08X" % (s, GAINS[s], row[s])
        s = self.slot(args, 1, GAINS) if what == "set" else 0
        b = digits(args[-1], 8 if what == "set" else 4)
        if b is None or what == "set" and not math.isfinite(value(b)):
            raise No(4)
        if self.state != OFF:
            raise No(5)
        if not self.rests():
            raise No(10)
        if what == "set":
            self.gains_staged[s] = b
            return str(s)
        if b != set_crc(self.gains_staged if what == "use" else self.gains):
            raise No(14)
        if what == "use":
            self.gains = list(self.gains_staged)
            return ""
        self.store.gains = list(self.gains)
        self.store.writes += 1
        return "%04X %d" % (b, self.store.writes)

    def do_log(self, args):
        self.want(args, 1)
        i = integer(args[0])
        if i is None or not 0 <= i < len(self.log):
            raise No(4)
        cause, seen, beat, off, speed = self.log[i]
        return "%d %d %d %d %d %d %d" % (i, self.stops, cause, seen % 2**32, beat % 2**32, off % 2**32, speed)

    def do_rate(self, args):
        self.want(args, 3)
        hz = integer(args[0])
        if hz is None or hz < 0 or args[1] not in ("d", "x") or args[2] not in ("t", "tu"):
            raise No(4)
        if hz == 0:
            self.every = 0
            return "0"
        every = max(1, math.ceil(1e6 / LOOP / hz - 1e-9))
        real = 1e6 / LOOP / every
        lines = real * len(args[2])
        load = lines * 64 if args[1] == "d" else (lines + min(real, 5)) * 24
        if load > 0.7 * BAUD / 10:
            raise No(9)
        self.every, self.wait, self.form, self.extra = every, every, args[1], args[2] == "tu"
        self.mean, self.since_v = [], 10**9
        return str(round(real))

    def identity(self, n):
        def f(x):
            return "%08X" % bits(x)
        lines = ["proto 1.0", "fw stranger 1", "board py-1", "boot %d power" % self.store.boots, "baud %d" % BAUD,
                 "loop %d" % LOOP, "delay 0", "win %d" % WIN, "law pi", "form parallel", "deriv measurement",
                 "disc backward-euler", "windup clamp", "num float", "gains " + " ".join(GAINS),
                 "limits " + " ".join(LIMITS[:5]), "limits " + " ".join(LIMITS[5:]), "input V", "bus nominal " + f(VMAX),
                 "quad 4", "off coast", "enc %s motor %s" % (f(CPT), f(1)),
                 "scale %s %s %s %s" % (f(W_LSB), f(V_LSB), f(0), f(0)), "max %s %s %s" % (f(VMAX), f(WMAX), f(0)),
                 "beat %d %d" % (BEAT_MIN, BEAT_MAX)]
        for line in lines:
            self.say("id " + line)
        self.say("ok %d %d" % (n, len(lines)))

    # ---- driving ----

    def motion(self, verb, k, args):
        if self.state not in (ARMED, DRIVING, LOOPING) or len(args) != (1 if verb == "hb" else 2):
            return
        if digits(args[0], 4) != self.token or not 0 < (k - self.k) % 65536 < 32768:
            return
        v = integer(args[1]) if verb != "hb" else 0
        wanted = {"dv": DRIVING, "ds": LOOPING, "hb": self.state}[verb]
        if v is None or self.state not in (ARMED, wanted):
            return
        self.k, self.beat_at = k, self.us
        if verb == "hb":
            return
        self.drive_at = self.us
        if abs(v / 1000) > self.limit("vmax" if verb == "dv" else "wmax"):
            return self.halt(12 if verb == "dv" else 11, self.us)
        if self.state == ARMED:
            self.run_at, self.run_angle, self.integral, self.state = self.us, self.angle, 0.0, wanted
        self.target = v / 1000

    def reported(self):
        return (self.window[-1] - self.window[0]) * 2 * math.pi / CPT / (WIN * LOOP * 1e-6)

    def rests(self):
        return self.us - self.moved > 100000

    def limit(self, name):
        return value(self.limits[LIMITS.index(name)])

    def judge(self):
        w = self.reported()
        if self.us - self.beat_at > self.limit("beat") * 1e6:
            return 10
        if self.state == ARMED:
            return 3 if self.us - self.drive_at > 60000000 else 0
        if abs(w) > self.limit("wmax"):
            return 11
        if self.limit("turns") and abs(self.angle - self.run_angle) / 2 / math.pi > self.limit("turns"):
            return 17
        if self.limit("vbreak") and abs(self.volts) > self.limit("vbreak") and self.us - self.moved > self.limit("stall") * 1e6:
            return 18
        if self.us - self.run_at > self.limit("run") * 1e6:
            return 23
        return 3 if self.us - self.drive_at > 60000000 else 0

    def loop(self):
        self.speed += (50.0 * self.volts - self.speed) * LOOP * 1e-6 / 0.08
        self.speed -= math.copysign(min(abs(self.speed), 40.0 * LOOP * 1e-6 / 0.08), self.speed)
        self.angle += self.speed * LOOP * 1e-6
        self.mean.append(self.volts)
        count = math.floor(self.angle / 2 / math.pi * CPT)
        if count != self.window[-1]:
            self.moved = self.us
        self.window = self.window[1:] + [count]
        if self.state in (ARMED, DRIVING, LOOPING):
            cause = self.judge()
            if cause:
                self.halt(cause, self.us)
        if self.state == DRIVING:
            self.volts = self.target
        if self.state == LOOPING:
            kp, ki, b = (value(x) for x in self.gains)
            top, e = min(VMAX, self.limit("vmax")), self.target - self.reported()
            self.integral = max(-top, min(top, self.integral + ki * e * LOOP * 1e-6))
            self.volts = max(-top, min(top, kp * (b * self.target - self.reported()) + self.integral))
        if self.every:
            self.wait -= 1
            if self.wait <= 0:
                self.wait = self.every
                self.sample(self.form)

    def sample(self, form):
        """One sample: form t for tel, d decimal, x hex."""
        self.seq = (self.seq + 1) % 256
        volts = sum(self.mean) / len(self.mean) if self.mean else self.volts
        self.mean = []
        flags, clock = self.state | (16 if self.trip else 0), self.us % 2**24
        counts = self.window[-1] % 65536
        goal = self.target if self.state == LOOPING else 0.0

        def fixed(text):
            self.out += text.encode() + b"%04X\n" % crc(text.encode())
        if form != "x":
            if form == "d" and self.extra:
                self.say("u %d 0 0 %d %d" % (self.seq, round(goal * 1000), counts))
            self.say("t %d %d %s %d %d %02X" % (self.seq, clock, STATES[self.state], round(self.reported() * 1000), round(volts * 1000), flags))
            return
        if self.extra:
            fixed("U%02X00000000%04X%04X" % (self.seq, round(goal / W_LSB) % 65536, counts))
        self.since_v += self.every * LOOP
        if self.since_v >= 200000:
            self.since_v = 0
            fixed("V%02X80000000%02XFF%04X" % (self.seq, self.trip, self.store.boots))
        fixed("T%02X%06X%02X%04X%04X" % (self.seq, clock, flags, round(self.reported() / W_LSB) % 65536, round(volts / V_LSB) % 65536))

    def pass_time(self, us):
        """Lets time pass and returns what the line carried in it."""
        end = self.us + us
        while self.us // LOOP < end // LOOP:
            self.us = (self.us // LOOP + 1) * LOOP
            self.loop()
        self.us = end
        self.sent = min(self.sent + us * BAUD / 1e7, len(self.out))
        n = int(self.sent)
        sent, self.out = bytes(self.out[:n]), self.out[n:]
        self.sent -= n
        return sent

def main():
    store = Store()
    board = Board(store)
    read, write = sys.stdin.buffer.read, sys.stdout.buffer
    while True:
        head = read(5)
        if len(head) < 5:
            return
        op, n = struct.unpack("<cI", head)
        reply = b""
        if op == b"B":
            for byte in read(n):
                board.receive(byte)
        elif op == b"R":
            reply = board.pass_time(n)
        elif op == b"X":
            board = Board(store)
        write.write(struct.pack("<I", len(reply)) + reply)
        write.flush()

if __name__ == "__main__":
    main()
