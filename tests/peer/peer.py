#!/usr/bin/env python3
"""Motor drivers at the far end of a gripline link, for tests: an implementation of the line's format (version 1) that
shares no code with the program. Python 3, standard library only.

    peer.py --tty PATH      speak on a port, or on the slave of a pseudo-terminal
    peer.py --pty           open a pseudo-terminal and say its path; --link PATH makes a symbolic link to it
    peer.py --replay        no port and no clock: a history on standard input, the answers on standard output

Everything said and heard goes to --log (standard output by default) as one JSON object a line: frames with `dir`
(`in`, `out`), `kind`, `sequence` and the fields of the body; events with `event`. `t` is CLOCK_MONOTONIC in seconds.
Whoever starts it must read its standard output, or give a file: a full pipe would stop it.

Misbehaviour is asked for at standard input, one command a line (answered by {"event": "did", ...} or
{"event": "unknown", ...}):

    mute | unmute          say nothing; speak again
    deaf | undeaf          hear nothing; hear again
    late MS                answer so many milliseconds late; 0 ends it
    garbage N              say N bytes of noise at once
    corrupt N              spoil one bit in each of the next N frames said
    repeat                 say the last frame again
    restart                start anew: another boot number, angles zero, parked
    latch                  latch by itself, as after an unknown fault
    token                  draw a new token for no reason
    stop-input open|close  the stop input
    bits NAME... | bits    set exactly these fault bits: over-current over-temperature under-voltage encoder scaled
    identity KEY VALUE     name, version, flags, channels, speed_lsb, angle_lsb, silence_ms, ramp_max_ms
    identify               send Identity unasked
    channel N free|stuck|runaway COUNTS|frozen
                           follow; stand still; turn at COUNTS whatever is commanded; follow, but measure nothing
    yaw COUNTS|off         yaw rate in 1/2048 rad/s; off: not valid
    supply MV              supply voltage
    clock US               set the clock back or forth by so many microseconds
    state                  log the present state
    quit                   end
"""

import argparse
import errno
import json
import os
import random
import select
import signal
import sys
import termios
import time
import tty

KINDS = {0x01: "ask", 0x02: "drive", 0x03: "stop", 0x04: "clear", 0x81: "identity", 0x82: "feedback"}
MODES = ("park", "hold", "run")
BIT = {
    "latched": 0, "stop-input": 1, "silent": 2, "over-current": 3, "over-temperature": 4, "under-voltage": 5,
    "encoder": 6, "yaw-valid": 7, "torque": 8, "scaled": 9, "out-of-order": 10,
}
FAULT_BITS = ("over-current", "over-temperature", "under-voltage", "encoder", "scaled")
MAX_PLAIN = 200
FEEDBACK_EVERY_US = 20_000


# --- frames -------------------------------------------------------------------------------------------------------

def _crc_table():
    table = []
    for byte in range(256):
        for _ in range(8):
            byte = (byte >> 1) ^ (0x82F63B78 if byte & 1 else 0)  # 0x1EDC6F41 with its bits in reverse
        table.append(byte)
    return table


_TABLE = _crc_table()


def crc32c(data):
    """CRC-32/ISCSI (Castagnoli), RFC 3720 appendix B.4."""
    crc = 0xFFFFFFFF
    for byte in data:
        crc = (crc >> 8) ^ _TABLE[(crc ^ byte) & 0xFF]
    return crc ^ 0xFFFFFFFF


def cobs_encode(data):
    """Consistent overhead byte stuffing (Cheshire and Baker 1999), without the end mark. A frame is at most 200 bytes,
    so no run ever reaches 254."""
    assert len(data) <= MAX_PLAIN
    return b"".join(bytes([len(run) + 1]) + run for run in bytes(data).split(b"\0"))


def cobs_decode(data):
    """The bytes that were stuffed, or None."""
    out, at = bytearray(), 0
    while at < len(data):
        code = data[at]
        if code == 0 or at + code > len(data):
            return None
        out += data[at + 1:at + code]
        at += code
        if code < 0xFF and at < len(data):
            out.append(0)
    return bytes(out)


def seal(kind, sequence, body):
    """A whole frame as it stands on the line, with its end mark."""
    plain = bytes([kind, sequence & 0xFF]) + body
    return cobs_encode(plain + crc32c(plain).to_bytes(4, "little")) + b"\0"


def unseal(stuffed):
    """(kind, sequence, body), or None for whatever fails length or check."""
    plain = cobs_decode(stuffed)
    if plain is None or not 6 <= len(plain) <= MAX_PLAIN:
        return None
    if crc32c(plain[:-4]) != int.from_bytes(plain[-4:], "little"):
        return None
    return plain[0], plain[1], plain[2:-4]


def u16(data, at):
    return int.from_bytes(data[at:at + 2], "little")


def read_to_drivers(kind, body):
    """The fields of a frame for drivers, or None."""
    if kind == 0x01 and len(body) == 0:
        return {}
    if kind == 0x02 and len(body) >= 6 and body[0] < 3 and len(body) == 6 + 2 * body[5]:
        speeds = [int.from_bytes(body[at:at + 2], "little", signed=True) for at in range(6, len(body), 2)]
        if body[0] != 2 and any(speeds):
            return None
        return {"mode": MODES[body[0]], "valid_ms": u16(body, 1), "ramp_ms": u16(body, 3), "speeds": speeds}
    if kind == 0x03 and len(body) == 2:
        return {"ramp_ms": u16(body, 0)}
    if kind == 0x04 and len(body) == 2:
        return {"token": u16(body, 0)}
    return None


# --- drivers ------------------------------------------------------------------------------------------------------

class Drivers:
    """The drivers' side of the line: bytes and time in, bytes and commanded speeds out. Knows no port and no clock."""

    def __init__(self, identity, boot, tokens, note):
        self.identity = identity
        self.boot = boot & 0xFFFF
        self.tokens = tokens            # an endless iterator
        self.note = note                # called with one dictionary a frame or event
        self.stop_input_open = False
        self.fault_bits = set()
        self.yaw = 0
        self.yaw_valid = bool(identity["flags"] & 2)
        self.supply_mv = 24_000
        self._start(0)

    def _start(self, now_us):
        n = self.identity["channels"]
        self.started_us = now_us
        self.token = next(self.tokens) & 0xFFFF
        self.mode = "park"
        self.parked_once = False
        self.latched = False
        self.went_silent = False
        self.out_of_order = False
        self.speeds = [0] * n           # last commanded, counts
        self.valid_until_us = None
        self.ramp_ms = 0                # what the last Drive said
        self.ramp = None                # (from speeds, begun, length) while latched with torque
        self.torque = False
        self.ack = 0
        self.sequence = 0
        self.refused = 0
        self.angles = [0] * n           # measured, counts
        self.measured = [0] * n
        self.heard = bytearray()
        self.overlong = False
        self.out = bytearray()
        self.feedback_due_us = now_us + FEEDBACK_EVERY_US
        if self.stop_input_open:
            self.latch(now_us, "stop input")

    def restart(self, now_us):
        self.boot = (self.boot + 1) & 0xFFFF
        self._start(now_us)
        self.note({"event": "restarted", "boot": self.boot})

    def latch(self, now_us, why, ramp_ms=None):
        """Latches with the ramp given, else with that of the last Drive; a latch that stands may be shortened. Draws a
        new token."""
        ramp_ms = min(self.ramp_ms if ramp_ms is None else ramp_ms, self.identity["ramp_max_ms"])
        begin = self.commanded(now_us)
        if not self.latched:
            self.latched = True
            if self.torque and ramp_ms > 0:
                self.ramp = (begin, now_us, ramp_ms * 1000)
            else:
                self._torque_off()
        elif self.ramp is not None:
            remaining = self.ramp[1] + self.ramp[2] - now_us
            if ramp_ms == 0 or remaining <= 0:
                self._torque_off()
            elif ramp_ms * 1000 < remaining:
                self.ramp = (begin, now_us, ramp_ms * 1000)
        self.token = next(self.tokens) & 0xFFFF
        self.note({"event": "latched", "why": why, "ramp_ms": ramp_ms, "token": self.token})

    def _torque_off(self):
        self.torque = False
        self.ramp = None
        self.speeds = [0] * len(self.speeds)
        self.mode = "park"

    def commanded(self, now_us):
        """Speeds that the channels are to turn at, counts (fractions while ramping)."""
        if self.ramp is None:
            return list(self.speeds)
        speeds, begun_us, length_us = self.ramp
        left = max(0, begun_us + length_us - now_us) / length_us
        return [speed * left for speed in speeds]

    def status(self):
        bits = set(self.fault_bits)
        for name, on in (("latched", self.latched), ("stop-input", self.stop_input_open), ("silent", self.went_silent),
                         ("yaw-valid", self.yaw_valid), ("torque", self.torque), ("out-of-order", self.out_of_order)):
            if on:
                bits.add(name)
        return sum(1 << BIT[name] for name in bits)

    def set_stop_input(self, is_open, now_us):
        self.expire(now_us)
        if is_open and not self.stop_input_open and not self.latched:
            self.latch(now_us, "stop input")
        self.stop_input_open = is_open

    def step(self, now_us):
        """Whatever time alone brings about."""
        self.expire(now_us)
        if now_us >= self.feedback_due_us:
            self.say_feedback(now_us)

    def expire(self, now_us):
        """Validity and ramps that have run out."""
        if not self.latched and self.mode != "park" and self.valid_until_us is not None \
                and now_us >= self.valid_until_us:
            self.went_silent = True
            self.latch(self.valid_until_us, "silence")
        if self.ramp is not None and now_us >= self.ramp[1] + self.ramp[2]:
            self._torque_off()

    def hear(self, data, now_us):
        for byte in data:
            if byte:
                if len(self.heard) < MAX_PLAIN + 1:
                    self.heard.append(byte)
                else:
                    self.overlong = True
                continue
            stuffed, self.heard = bytes(self.heard), bytearray()
            overlong, self.overlong = self.overlong, False
            if stuffed:
                self._frame(None if overlong else unseal(stuffed), now_us)

    def _frame(self, frame, now_us):
        fields = frame and read_to_drivers(frame[0], frame[2])
        if fields is None:
            self.refused = (self.refused + 1) & 0xFFFF
            self.note({"dir": "in", "kind": "garbled"})
            return
        kind, sequence = KINDS[frame[0]], frame[1]
        taken = getattr(self, "_take_" + kind)(fields, now_us)
        self.note({"dir": "in", "kind": kind, "sequence": sequence, "taken": taken, **fields})
        if not taken:
            self.refused = (self.refused + 1) & 0xFFFF
            return
        self.ack = sequence
        if kind == "ask":
            self.say_identity()
        if kind == "drive":
            self.say_feedback(now_us)

    def _take_ask(self, _fields, _now_us):
        return True

    def _take_drive(self, fields, now_us):
        if self.latched or len(fields["speeds"]) != self.identity["channels"] \
                or fields["valid_ms"] > self.identity["silence_ms"]:
            return False
        mode = fields["mode"]
        if (mode == "hold" and not self.parked_once) or (mode == "run" and self.mode == "park"):
            self.out_of_order = True
            return False
        if mode == "park":
            self.out_of_order = False       # it stands until the host begins from the beginning
        self.parked_once = True
        self.mode = mode
        self.torque = mode != "park"
        self.speeds = list(fields["speeds"])
        self.ramp_ms = fields["ramp_ms"]
        self.valid_until_us = now_us + 1000 * fields["valid_ms"]
        return True

    def _take_stop(self, fields, now_us):
        self.latch(now_us, "stop", fields["ramp_ms"])
        return True

    def _take_clear(self, fields, now_us):
        if not self.latched or fields["token"] != self.token or self.ramp is not None or self.stop_input_open:
            return False
        self.latched = self.went_silent = self.out_of_order = self.parked_once = False
        self.mode = "park"
        self.valid_until_us = None
        self.ramp_ms = 0
        self.note({"event": "unlatched"})
        return True

    def _say(self, kind, body, fields):
        self.last_said = seal(kind, self.sequence, body)
        self.out += self.last_said
        self.note({"dir": "out", "kind": KINDS[kind], "sequence": self.sequence, **fields})
        self.sequence = (self.sequence + 1) & 0xFF

    def say_identity(self):
        i = self.identity
        body = bytes([i["version"], i["flags"], i["channels"]])
        body += i["speed_lsb"].to_bytes(4, "little") + i["angle_lsb"].to_bytes(4, "little")
        body += i["silence_ms"].to_bytes(2, "little") + i["ramp_max_ms"].to_bytes(2, "little")
        body += self.boot.to_bytes(2, "little") + i["name"].encode()[:24]
        self._say(0x81, body, {**i, "boot": self.boot})

    def say_feedback(self, now_us):
        clock = (now_us - self.started_us) & 0xFFFFFFFF
        f = {"ack": self.ack, "status": self.status(), "token": self.token, "boot": self.boot, "clock_us": clock,
             "supply_mv": self.supply_mv, "yaw_rate": self.yaw, "refused": self.refused,
             "angles": list(self.angles), "speeds": list(self.measured)}
        body = bytes([f["ack"]]) + f["status"].to_bytes(2, "little") + f["token"].to_bytes(2, "little")
        body += f["boot"].to_bytes(2, "little") + clock.to_bytes(4, "little")
        body += f["supply_mv"].to_bytes(2, "little") + f["yaw_rate"].to_bytes(2, "little", signed=True)
        body += f["refused"].to_bytes(2, "little") + bytes([len(self.angles)])
        for angle, speed in zip(self.angles, self.measured):
            body += ((angle + 2**31) % 2**32 - 2**31).to_bytes(4, "little", signed=True)
            body += max(-32768, min(32767, speed)).to_bytes(2, "little", signed=True)
        self._say(0x82, body, f)
        self.feedback_due_us = now_us + FEEDBACK_EVERY_US

    def take_out(self):
        out, self.out = bytes(self.out), bytearray()
        return out


# --- channels -----------------------------------------------------------------------------------------------------

class Channels:
    """Motors of first order with encoders, in the drivers' counts."""

    def __init__(self, count, identity, lag_s):
        self.identity, self.lag_s = identity, lag_s
        self.count = count
        self.as_is = [("free", 0)] * count
        self.reset()

    def reset(self):
        self.speed = [0.0] * self.count     # counts of speed
        self.angle = [0.0] * self.count     # counts of angle

    def step(self, commanded, torque, dt_s):
        per_s = self.identity["speed_lsb"] / self.identity["angle_lsb"]
        for i, (how, counts) in enumerate(self.as_is):
            if how == "stuck":
                self.speed[i] = 0.0
                continue
            aim = counts if how == "runaway" and torque else commanded[i] if torque else 0.0
            self.speed[i] += (aim - self.speed[i]) * min(1.0, dt_s / (self.lag_s if torque else 10 * self.lag_s))
            if how != "frozen":
                self.angle[i] += self.speed[i] * per_s * dt_s

    def show(self, drivers):
        drivers.angles = [round(angle) for angle in self.angle]
        drivers.measured = [0 if how == "frozen" else round(speed) for speed, (how, _) in zip(self.speed, self.as_is)]


# --- on a port, in real time --------------------------------------------------------------------------------------

class Peer:
    def __init__(self, options, log):
        self.log = log
        self.random = random.Random(options.seed)
        self.identity = identity_of(options)
        self.drivers = Drivers(self.identity, options.boot, iter(lambda: self.random.randrange(0x10000), None), self.note)
        self.channels = Channels(options.channels, self.identity, options.lag_s)
        self.mute = self.deaf = False
        self.late_s = 0.0
        self.corrupt = 0
        self.waiting = []                   # (due, bytes)
        self.origin = time.monotonic()
        self.clock_shift_us = 0
        self.wheels_at = self.origin

    def note(self, what):
        self.log.write(json.dumps({"t": round(time.monotonic(), 6), **what}) + "\n")
        self.log.flush()

    def now_us(self):
        return int((time.monotonic() - self.origin) * 1e6) + self.clock_shift_us

    def heard(self, data):
        if not self.deaf:
            self.drivers.hear(data, self.now_us())

    def turn(self):
        """One turn of the loop; gives what is to be written now."""
        now = time.monotonic()
        self.channels.step(self.drivers.commanded(self.now_us()), self.drivers.torque, min(0.1, now - self.wheels_at))
        self.wheels_at = now
        self.channels.show(self.drivers)
        self.drivers.step(self.now_us())
        said = self.drivers.take_out()
        if said and not self.mute:
            if self.corrupt:
                self.corrupt -= 1
                spoilt = bytearray(said)
                at = self.random.randrange(len(spoilt) - 1)
                spoilt[at] ^= 1 << self.random.randrange(8)
                said = bytes(spoilt)
            self.waiting.append((now + self.late_s, said))
        due = [data for at, data in self.waiting if at <= now]
        self.waiting = [(at, data) for at, data in self.waiting if at > now]
        return b"".join(due)

    def command(self, line):
        """Does what a line of standard input asks; False ends the peer."""
        words = line.split()
        if not words:
            return True
        try:
            going = self._do(words[0], words[1:])
            self.note({"event": "did", "command": line})
            return going
        except (ValueError, KeyError, IndexError, OverflowError) as trouble:
            self.note({"event": "unknown", "command": line, "why": str(trouble)})
            return True

    def _do(self, word, rest):
        d, now_us = self.drivers, self.now_us()
        if word in ("mute", "unmute"):
            self.mute = word == "mute"
        elif word in ("deaf", "undeaf"):
            self.deaf = word == "deaf"
        elif word == "late":
            self.late_s = float(rest[0]) / 1000
        elif word == "garbage":
            self.waiting.append((0.0, self.random.randbytes(int(rest[0]))))
        elif word == "corrupt":
            self.corrupt = int(rest[0])
        elif word == "repeat":
            self.waiting.append((0.0, d.last_said))
        elif word == "restart":
            self.channels.reset()
            self.origin, self.clock_shift_us = time.monotonic(), 0
            d.restart(0)
        elif word == "latch":
            if not d.latched:
                d.latch(now_us, "asked at standard input")
        elif word == "token":
            d.token = next(d.tokens)
        elif word == "stop-input":
            d.set_stop_input({"open": True, "close": False}[rest[0]], now_us)
        elif word == "bits":
            if any(name not in FAULT_BITS for name in rest):
                raise ValueError("bits are " + " ".join(FAULT_BITS))
            d.fault_bits = set(rest)
        elif word == "identity":
            key = rest[0]
            if key not in self.identity:
                raise ValueError("identity has " + " ".join(self.identity))
            self.identity[key] = " ".join(rest[1:]) if key == "name" else int(rest[1])
        elif word == "identify":
            d.say_identity()
        elif word == "channel":
            if rest[1] not in ("free", "stuck", "runaway", "frozen"):
                raise ValueError("a channel is free, stuck, runaway or frozen")
            self.channels.as_is[int(rest[0])] = (rest[1], int(rest[2]) if rest[1] == "runaway" else 0)
        elif word == "yaw":
            d.yaw_valid = rest[0] != "off"
            d.yaw = int(rest[0]) if d.yaw_valid else 0
        elif word == "supply":
            d.supply_mv = int(rest[0]) & 0xFFFF
        elif word == "clock":
            self.clock_shift_us += int(rest[0])
            d.feedback_due_us += int(rest[0])
            if d.valid_until_us is not None:
                d.valid_until_us += int(rest[0])
            d.ramp = d.ramp and (d.ramp[0], d.ramp[1] + int(rest[0]), d.ramp[2])
        elif word == "state":
            self.note({"event": "state", "mode": d.mode, "latched": d.latched, "torque": d.torque, "token": d.token,
                       "status": d.status(), "refused": d.refused, "commanded": d.commanded(now_us),
                       "speeds": d.measured, "angles": d.angles})
        elif word == "quit":
            return False
        else:
            raise ValueError("no such command")
        return True


def serve(options, log):
    peer = Peer(options, log)
    if options.pty:
        port, slave = os.openpty()          # the slave stays open, so that the port outlives whoever opens it
        tty.setraw(slave)
        path = os.ttyname(slave)
        if options.link:
            if os.path.islink(options.link):
                os.unlink(options.link)
            os.symlink(path, options.link)
    else:
        path = options.tty
        port = os.open(path, os.O_RDWR | os.O_NOCTTY)
        tty.setraw(port)
        if options.baud:
            set_baud(port, options.baud)
    os.set_blocking(port, False)
    peer.note({"event": "open", "path": path})
    going, ears, typed, unsaid = True, [port], b"", b""
    if not options.no_commands:
        ears.append(sys.stdin.fileno())
    while going:
        ready, _, _ = select.select(ears, [port] if unsaid else [], [], 0.001)
        if port in ready:
            try:
                data = os.read(port, 4096)
            except OSError as trouble:
                if trouble.errno not in (errno.EIO, errno.EAGAIN):
                    raise
                data = b""                  # nobody at the other end
                time.sleep(0.001)
            peer.heard(data)
        if sys.stdin.fileno() in ready and sys.stdin.fileno() in ears:
            data = os.read(sys.stdin.fileno(), 4096)
            if not data:
                ears.remove(sys.stdin.fileno())
                going = not options.until_eof
            *lines, typed = (typed + data).split(b"\n")
            for line in lines:
                going = going and peer.command(line.decode(errors="replace"))
        unsaid += peer.turn()
        if unsaid:
            try:
                unsaid = unsaid[os.write(port, unsaid):]
            except BlockingIOError:
                unsaid = unsaid[-4096:]     # nobody reads: a real line would lose it as well
            except OSError as trouble:
                if trouble.errno != errno.EIO:
                    raise
                unsaid = b""
    peer.note({"event": "closed"})


def set_baud(port, baud):
    name = "B%d" % baud
    if not hasattr(termios, name):
        sys.exit("peer.py: termios has no %s; leave out --baud on a pseudo-terminal" % name)
    settings = termios.tcgetattr(port)
    settings[4] = settings[5] = getattr(termios, name)
    termios.tcsetattr(port, termios.TCSANOW, settings)


# --- a history without clock or port ------------------------------------------------------------------------------

def replay(options):
    """One JSON object a line in, one out. In: `at_us` and any of `angles`, `speeds`, `yaw`, `yaw_valid`, `supply_mv`
    (measurements), `stop_input`, `bits`, `restart`, `latch`, `hex` (bytes heard), `clear` (a Clear with the present
    token and this sequence). Out: `hex` (bytes said), `commanded`, `torque`."""
    tokens = iter([int(t) for t in options.tokens.split(",") if t]) if options.tokens else iter(lambda: random.randrange(0x10000), None)
    drivers = Drivers(identity_of(options), options.boot, tokens, lambda _: None)
    for line in sys.stdin:
        if not line.strip():
            continue
        step = json.loads(line)
        now_us = step["at_us"]
        drivers.angles = step.get("angles", drivers.angles)
        drivers.measured = step.get("speeds", drivers.measured)
        drivers.yaw = step.get("yaw", drivers.yaw)
        drivers.yaw_valid = step.get("yaw_valid", drivers.yaw_valid)
        drivers.supply_mv = step.get("supply_mv", drivers.supply_mv)
        drivers.fault_bits = set(step.get("bits", drivers.fault_bits))
        if step.get("restart"):
            drivers.restart(now_us)
        if "stop_input" in step:
            drivers.set_stop_input(step["stop_input"], now_us)
        if step.get("latch") and not drivers.latched:
            drivers.latch(now_us, "asked")
        drivers.step(now_us)
        if "hex" in step:
            drivers.hear(bytes.fromhex(step["hex"]), now_us)
        if "clear" in step:
            drivers.hear(seal(0x04, step["clear"], drivers.token.to_bytes(2, "little")), now_us)
        said = drivers.take_out()
        print(json.dumps({"hex": said.hex(), "commanded": drivers.commanded(now_us), "torque": drivers.torque}), flush=True)


# --- command line -------------------------------------------------------------------------------------------------

def identity_of(options):
    return {"version": 1, "flags": options.flags, "channels": options.channels, "speed_lsb": options.speed_lsb,
            "angle_lsb": options.angle_lsb, "silence_ms": options.silence_ms, "ramp_max_ms": options.ramp_max_ms,
            "name": options.name}


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    where = parser.add_mutually_exclusive_group(required=True)
    where.add_argument("--tty", metavar="PATH")
    where.add_argument("--pty", action="store_true")
    where.add_argument("--replay", action="store_true")
    parser.add_argument("--link", metavar="PATH", help="with --pty: a symbolic link to make")
    parser.add_argument("--baud", type=int, default=0)
    parser.add_argument("--channels", type=int, default=4)
    parser.add_argument("--name", default="bay cart drivers")
    parser.add_argument("--flags", type=int, default=7, help="1 simulated, 2 has yaw rate, 4 has stop input")
    parser.add_argument("--speed-lsb", type=int, default=2000, help="urad/s a count")
    parser.add_argument("--angle-lsb", type=int, default=500, help="urad a count")
    parser.add_argument("--silence-ms", type=int, default=1000)
    parser.add_argument("--ramp-max-ms", type=int, default=5000)
    parser.add_argument("--boot", type=int, default=1)
    parser.add_argument("--lag-s", type=float, default=0.03, help="time constant of the motors")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--tokens", default="", help="with --replay: the tokens to draw, comma between")
    parser.add_argument("--log", default="-", metavar="FILE")
    parser.add_argument("--no-commands", action="store_true", help="leave standard input alone")
    parser.add_argument("--until-eof", action="store_true", help="end when standard input is closed")
    options = parser.parse_args()
    if options.replay:
        replay(options)
        return
    signal.signal(signal.SIGTERM, lambda *_: sys.exit(0))
    try:
        serve(options, sys.stdout if options.log == "-" else open(options.log, "w", encoding="utf-8"))
    except KeyboardInterrupt:
        pass
    except OSError as trouble:
        sys.exit("peer.py: %s" % trouble)


if __name__ == "__main__":
    main()
