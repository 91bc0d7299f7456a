#!/usr/bin/python3
"""A real evdev path without hardware: under umockdev-wrapper, with a gamepad that can be plugged and unplugged.

Runs `PROGRAM pads --live --json` as its child and checks what it says. Usage: device.py PROGRAM. Exit 0 and the line
PASS when all is as it should be. (umockdev mocks the device files of this process tree only; the ioctls answer with the
state that stands in the description, so sticks held over and buttons held before the start are part of it.)
"""
import json, os, struct, subprocess, sys, tempfile, threading, time
import gi
gi.require_version("UMockdev", "1.0")
from gi.repository import UMockdev

HERE = os.path.dirname(os.path.abspath(__file__))
DEVICE, EVENT = "/dev/input/event7", "/sys/devices/virtual/input/input7/event7"
KEYS = [0x130, 0x131, 0x133, 0x134, 0x136, 0x137, 0x13A, 0x13B, 0x13C, 0x13D, 0x13E]
SOUTH, EAST, START = 0x130, 0x131, 0x13B
# code: (value now, least, most)
AXES = {0: (0, -32768, 32767), 1: (-32768, -32768, 32767), 2: (0, 0, 255), 3: (0, -32768, 32767),
        4: (0, -32768, 32767), 5: (255, 0, 255), 16: (0, -1, 1), 17: (0, -1, 1)}


def bits(size, codes):
    out = bytearray(size)
    for code in codes:
        out[code // 8] |= 1 << (code % 8)
    return bytes(out)


def ioctls():
    """The device's answers. Sizes must be those that the readers ask for (name 128, keys 96, axes 8, effects 16)."""
    def line(name, result, data):
        return f"{name} {result} {data.hex().upper()}"
    lines = [f"@DEV {DEVICE}", line("EVIOCGVERSION", 0, struct.pack("<I", 0x010001)),
             line("EVIOCGID", 0, struct.pack("<4H", 3, 0x1209, 0x7001, 0x0111)),
             line("EVIOCGNAME(0)", 8, b"Bay Pad".ljust(128, b"\0")), line("EVIOCGBIT(0)", 8, bits(8, [0, 1, 3])),
             line("EVIOCGBIT(1)", 96, bits(96, KEYS)), line("EVIOCGBIT(3)", 8, bits(8, AXES)),
             line("EVIOCGBIT(21)", 16, bits(16, [])), line("EVIOCGKEY(0)", 96, bits(96, [START]))]
    for code, (value, least, most) in AXES.items():
        name = "EVIOCGABS" if code == 0 else f"EVIOCGABS({code})"
        lines.append(line(name, 0, struct.pack("<6i", value, least, most, 0, 0, 0)))
    return "\n".join(lines) + "\n"


class Live:
    """The program's lines, as they come."""

    def __init__(self, program):
        self.child = subprocess.Popen([program, "pads", "--live", "--json"], stdout=subprocess.PIPE, text=True)
        self.lines = []
        threading.Thread(target=self.read, daemon=True).start()

    def read(self):
        for line in self.child.stdout:
            self.lines.append(json.loads(line))

    def waits_for(self, what, is_so):
        until = time.monotonic() + 15
        start = len(self.lines)
        while time.monotonic() < until:
            for line in self.lines[max(0, start - 1):]:
                if is_so(line):
                    print("ok:", what, flush=True)
                    return
            time.sleep(0.01)
        sys.exit(f"FAIL: {what}; it said {self.lines[-5:]}")


def main():
    program = sys.argv[1]
    bed = UMockdev.Testbed.new()
    bed.add_from_file(os.path.join(HERE, "pad.umockdev"))
    with tempfile.NamedTemporaryFile("w", suffix=".ioctl") as file:
        file.write(ioctls())
        file.flush()
        bed.load_ioctl(None, file.name)

    def emit(*events):
        now = time.time()
        events = events + ((0, 0, 0),)
        data = [struct.pack("<qqHHi", int(now), int(now % 1 * 1e6), *event) for event in events]
        os.write(bed.get_dev_fd(DEVICE), b"".join(data))

    found = json.loads(subprocess.run([program, "pads", "--json"], capture_output=True, text=True, check=True).stdout)
    pad = found["pads"][0]
    if pad["name"] != "Bay Pad" or not pad["id"].startswith("1209:7001") or not pad["readable"]:
        sys.exit(f"FAIL: found as {found}")
    print("ok: found and named", flush=True)

    live = Live(program)
    live.waits_for("a stick held over, a trigger and a button held before the start are seen, and are no press",
                   lambda it: it["present"] and it["forward"] > 0.99 and it["hold"] > 0.99 and it["down"] == ["ready"]
                   and it["pressed"] == [])
    emit((3, 1, 0), (3, 5, 0), (1, START, 0))
    live.waits_for("let go", lambda it: abs(it["forward"]) < 0.01 and it["hold"] < 0.01 and it["down"] == [])
    emit((3, 0, -32768))
    live.waits_for("the stick to the left is left", lambda it: it["left"] > 0.99)
    emit((3, 0, 0), (3, 5, 200))
    live.waits_for("the trigger half way is told as it is", lambda it: 0.7 < it["hold"] < 0.85)
    emit((1, EAST, 1))
    emit((1, EAST, 0))
    live.waits_for("a short press of stop is not lost", lambda it: it["pressed"] == ["stop"])
    emit((0, 3, 0), (3, 0, 0))
    emit((3, 4, 0), (3, 3, 32767))
    live.waits_for("after dropped events it goes on; turn right is right", lambda it: it["turn_left"] < -0.99)
    bed.uevent(EVENT, "remove")
    live.waits_for("unplugged: nothing is left of it", lambda it: not it["present"] and it["hold"] == 0
                   and it["turn_left"] == 0 and it["down"] == [])
    bed.uevent(EVENT, "add")
    live.waits_for("plugged again, it is taken again with its true state", lambda it: it["present"])
    live.child.terminate()
    live.child.wait()
    print("PASS", flush=True)


main()
