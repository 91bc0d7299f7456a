#!/usr/bin/python3
"""The outside of the small machine: boots it, is the cable between its USB adaptor and the stand-in's port, pulls and
plugs the adaptor, and reads along on the line by a decoder of its own (the format is in the README).

Usage: host.py WORK PROGRAM. Prints the checks' lines; the last is `N passed, N failed, N skipped`."""
import json, os, re, shutil, socket, struct, subprocess, sys, termios, threading, time, tty

HERE = os.path.dirname(os.path.abspath(__file__))
REPO = os.path.dirname(os.path.dirname(HERE))
WORK, PROGRAM = os.path.abspath(sys.argv[1]), os.path.abspath(sys.argv[2])
RUN = os.path.join(WORK, "run")
MOST_S = 330
BEGAN = time.monotonic()


def configuration():
    """The example, its port by the rules' name, and guards that bear an emulated machine."""
    text = open(os.path.join(REPO, "config/four-mecanum.toml")).read()
    changes = [(r'port = "[^"]*"', 'port = "/dev/gripline-tray-cart"'), (r"valid_ms = \d+", "valid_ms = 5000"),
               (r"\[guard\]\n", "[guard]\nlate_ms = 600.0\nfeedback_quiet_ms = 700.0\nnot_heard_ms = 700.0\n"
                                "follow_s = 4.0\nslowing_s = 3.0\nskid_s = 5.0\nstop_margin_s = 4.0\nrunaway_s = 3.0\n"),
               (r"clear_m = [\d.]+", "clear_m = 9.0")]
    for pattern, by in changes:
        text, count = re.subn(pattern, by, text)
        assert count, f"no {pattern} in the example"
    return text + "\n[console]\nreset = true\n"


def payload():
    """A disk with the repository as its user has it, the README's install lines, and the checks."""
    folder = os.path.join(RUN, "payload")
    shutil.rmtree(folder, ignore_errors=True)
    os.makedirs(os.path.join(folder, "tree/target/release"))
    shutil.copy(PROGRAM, os.path.join(folder, "tree/target/release/gripline"))
    subprocess.run(["strip", os.path.join(folder, "tree/target/release/gripline")], check=False, stderr=subprocess.DEVNULL)
    shutil.copytree(os.path.join(REPO, "systemd"), os.path.join(folder, "tree/systemd"))
    rules = os.path.join(folder, "tree/systemd/70-gripline.rules")
    text = open(rules).read().replace("EXAMPLE0001", "BAY001")
    # The line for a pad's raw reports, as the comment says, with the numbers of the pad that the checks make.
    text = re.sub(r'#(SUBSYSTEM=="hidraw".*)', lambda it: it[1].replace("1234", "1209").replace("5678", "7002"), text)
    open(rules, "w").write(text)
    open(os.path.join(folder, "tree/base.toml"), "w").write(configuration())
    readme = open(os.path.join(REPO, "README.md")).read()
    section = readme[readme.index("## Installing as a service"):]
    lines = re.search(r"```sh\n(.*?)```", section, re.S)[1]
    open(os.path.join(folder, "install"), "w").write("set -ex\n" + lines)
    for name in ("guest.py", "pads.py", "begin"):
        shutil.copy(os.path.join(HERE, name), folder)
    # For whoever works on the checks: only those whose name has this word.
    open(os.path.join(folder, "only"), "w").write(os.environ.get("KERNEL_ONLY", ""))
    image = os.path.join(RUN, "payload.img")
    subprocess.run(["mke2fs", "-q", "-F", "-t", "ext4", "-O", "^has_journal", "-d", folder, image, "120M"], check=True, stdout=subprocess.DEVNULL)
    return image


def plain(frame):
    """COBS (Cheshire & Baker 1999) undone; None when it is not."""
    out, at = bytearray(), 0
    while at < len(frame):
        code = frame[at]
        if code == 0 or at + code > len(frame):
            return None
        out += frame[at + 1:at + code]
        at += code
        if code < 255 and at < len(frame):
            out.append(0)
    return bytes(out)


class Line:
    """Both ways between the adaptor's socket and the stand-in's port, and what was seen on it."""

    def __init__(self, adaptor, port):
        self.adaptor, self.port = adaptor, port
        self.lock = threading.Lock()
        self.status = self.speed = self.stops = self.motion = 0
        self.angles = self.mark_angles = None
        self.mark_time = time.monotonic()
        self.motion_at = self.stop_at = self.standing_at = self.moving_at = 0.0
        for read, write, look in ((self.from_host, self.to_port, self.to_drivers),
                                  (self.from_port, self.to_host, self.from_drivers)):
            threading.Thread(target=self.carry, args=(read, write, look), daemon=True).start()

    def from_host(self):
        return self.adaptor.recv(4096)

    def from_port(self):
        return os.read(self.port, 4096)

    def to_port(self, data):
        os.write(self.port, data)

    def to_host(self, data):
        # While the adaptor is out nobody takes anything: lost, as in the air.
        self.adaptor.send(data, socket.MSG_DONTWAIT)

    def carry(self, read, write, look):
        buffer = b""
        while True:
            try:
                data = read()
            except OSError:
                return
            if not data:
                return
            try:
                write(data)
            except OSError:
                pass
            buffer += data
            *frames, buffer = buffer.split(b"\0")
            for frame in frames:
                body = plain(frame) if frame else None
                if body and len(body) >= 6:
                    with self.lock:
                        look(body[0], body[2:-4], time.monotonic())

    def to_drivers(self, kind, body, now):
        if kind == 2 and body[0] == 2 and any(body[6:]):
            self.motion += 1
            self.motion_at = now
        if kind == 3:
            self.stops += 1
            self.stop_at = self.stop_at or now

    def from_drivers(self, kind, body, now):
        if kind != 0x82:
            return
        self.status = struct.unpack_from("<H", body, 1)[0]
        channels = [struct.unpack_from("<ih", body, 18 + 6 * i) for i in range(body[17])]
        self.speed = max(abs(speed) for _, speed in channels)
        self.angles = [angle for angle, _ in channels]
        if self.speed > 60:
            self.moving_at, self.standing_at = now, 0.0
        else:
            self.standing_at = self.standing_at or now

    def mark(self):
        with self.lock:
            self.stops = self.motion = 0
            self.stop_at = 0.0
            self.mark_angles, self.mark_time = self.angles, time.monotonic()

    def state(self):
        with self.lock:
            now = time.monotonic()
            moved = 0 if not self.mark_angles else max(abs(a - b) for a, b in zip(self.angles, self.mark_angles))
            return {"speed": self.speed, "latched": bool(self.status & 1), "silent": bool(self.status & 4),
                    "stops": self.stops, "motion": self.motion, "moved_rad": moved * 500e-6,
                    "first_stop_s": self.stop_at - self.mark_time if self.stop_at else None,
                    "stood_s": max(0.0, self.standing_at - self.mark_time) if self.standing_at else None,
                    "stands": now - self.moving_at > 0.4}


class Machine:
    def __init__(self, image):
        for name in ("qmp", "adaptor", "control"):
            if os.path.exists(self.path(name)):
                os.unlink(self.path(name))
        self.usb = {"driver": "usb-serial", "id": "adaptor0", "bus": "xhci.0", "chardev": "adaptor", "serial": "BAY001",
                    "always-plugged": True}
        device = "usb-serial,id=adaptor0,bus=xhci.0,chardev=adaptor,serial=BAY001,always-plugged=on"
        self.process = subprocess.Popen(
            ["timeout", str(MOST_S), "qemu-system-x86_64", "-accel", "tcg,thread=multi",
             "-cpu", "qemu64,-svm", "-M", "q35", "-smp", "2", "-m", "1024", "-nodefaults",
             "-no-user-config", "-no-reboot", "-display", "none", "-serial", "stdio",
             "-serial", f"unix:{self.path('control')},server=on,wait=off",
             "-kernel", os.path.join(WORK, "vmlinux"), "-initrd", os.path.join(WORK, "initrd"), "-append",
             "console=ttyS0 quiet loglevel=3 panic=-1 mitigations=off clocksource=hpet tsc=unstable no_timer_check "
             "systemd.unit=checks.target systemd.show_status=0",
             "-drive", f"file={os.path.join(WORK, 'root.img')},format=raw,if=virtio,readonly=on",
             "-drive", f"file={image},format=raw,if=virtio,readonly=on",
             "-qmp", f"unix:{self.path('qmp')},server=on,wait=off",
             "-chardev", f"socket,id=adaptor,path={self.path('adaptor')},server=on,wait=off",
             "-device", "qemu-xhci,id=xhci", "-device", device],
            stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True, errors="replace")
        self.qmp = self.connect("qmp").makefile("rw")
        self.qmp.readline()
        self.command("qmp_capabilities")

    def path(self, name):
        return os.path.join(RUN, name)

    def connect(self, name):
        for _ in range(400):
            try:
                it = socket.socket(socket.AF_UNIX)
                it.connect(self.path(name))
                return it
            except OSError:
                time.sleep(0.05)
        sys.exit(f"FAIL: the emulator has no {name}")

    def command(self, command, **arguments):
        self.qmp.write(json.dumps({"execute": command, "arguments": arguments}) + "\n")
        self.qmp.flush()
        while True:
            answer = json.loads(self.qmp.readline())
            if "return" in answer or "error" in answer:
                return answer

    def obey(self, line):
        """What the checks inside ask of the outside: one word a line, one line of JSON back."""
        control = self.connect("control").makefile("rw")
        for word in control:
            word = word.strip()
            if word == "unplug":
                answer = self.command("device_del", id="adaptor0")
            elif word == "plug":
                answer = self.command("device_add", **self.usb)
            elif word == "mark":
                answer = line.mark() or {}
            elif word == "state":
                answer = line.state()
            else:
                continue
            control.write(json.dumps(answer) + "\n")
            control.flush()


def main():
    os.makedirs(RUN, exist_ok=True)
    image = payload()
    config = os.path.join(RUN, "payload/tree/base.toml")
    standin = subprocess.Popen([PROGRAM, "standin", config, "--quiet", "--until-eof", "--link-dir", os.path.join(RUN, "links")],
                               stdin=subprocess.PIPE, stdout=subprocess.DEVNULL)
    link = os.path.join(RUN, "links/base")
    for _ in range(200):
        if os.path.exists(link):
            break
        time.sleep(0.02)
    port = os.open(link, os.O_RDWR | os.O_NOCTTY)
    tty.setraw(port, termios.TCSANOW)
    machine = Machine(image)
    line = Line(machine.connect("adaptor"), port)
    threading.Thread(target=machine.obey, args=(line,), daemon=True).start()
    counts = {"ok": 0, "FAIL": 0, "skipped": 0}
    ended = False
    log = open(os.path.join(WORK, "console.log"), "w")
    for text in machine.process.stdout:
        text = re.sub(r"\x1b\[[0-9;?]*[A-Za-z]", "", text.rstrip())
        log.write(f"{time.monotonic() - BEGAN:7.2f} {text}\n")
        log.flush()
        word = text.split(" ", 1)[0]
        if word in counts:
            counts[word] += 1
            print(f"{time.monotonic() - BEGAN:6.1f} s  {text}", flush=True)
        ended |= text == "END OF CHECKS"
    machine.process.wait()
    standin.stdin.close()
    standin.wait()
    if not ended:
        counts["FAIL"] += 1
        print(f"FAIL the machine did not come to the end of its checks; see {os.path.relpath(WORK, REPO)}/console.log")
    print(f"{counts['ok']} passed, {counts['FAIL']} failed, {counts['skipped']} skipped")
    sys.exit(1 if counts["FAIL"] else 0)


main()
