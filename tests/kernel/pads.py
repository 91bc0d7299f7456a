"""Gamepads of the kernel's own making: one by uinput, and one by uhid whose raw reports keep coming while it is still."""
import fcntl, os, struct, threading, time

KEYS = [0x130, 0x131, 0x133, 0x134, 0x136, 0x137, 0x13A, 0x13B, 0x13C, 0x13D, 0x13E]
EAST, SELECT, START = 0x131, 0x13A, 0x13B
AXES = {0: (-32768, 32767), 1: (-32768, 32767), 2: (0, 255), 3: (-32768, 32767), 4: (-32768, 32767), 5: (0, 255),
        16: (-1, 1), 17: (-1, 1)}


def request(number, size):
    return 1 << 30 | size << 16 | ord("U") << 8 | number


class UinputPad:
    """Axis 1 is the left stick's, up negative; axis 5 the right trigger."""

    def __init__(self):
        self.fd = os.open("/dev/uinput", os.O_WRONLY | os.O_NONBLOCK)
        for kind in (1, 3):
            fcntl.ioctl(self.fd, request(100, 4), kind)
        for key in KEYS:
            fcntl.ioctl(self.fd, request(101, 4), key)
        for code, (least, most) in AXES.items():
            fcntl.ioctl(self.fd, request(103, 4), code)
            fcntl.ioctl(self.fd, request(4, 28), struct.pack("<HH6i", code, 0, 0, least, most, 0, 0, 0))
        fcntl.ioctl(self.fd, request(3, 92), struct.pack("<4H80sI", 3, 0x1209, 0x7001, 0x111, b"Bay Pad", 0))
        fcntl.ioctl(self.fd, ord("U") << 8 | 1)

    def emit(self, *events):
        for kind, code, value in events + ((0, 0, 0),):
            os.write(self.fd, struct.pack("<qqHHi", 0, 0, kind, code, value))

    def button(self, key, down):
        self.emit((1, key, int(down)))

    def hold(self, down):
        self.emit((3, 5, 255 if down else 0))

    def forward(self, share):
        self.emit((3, 1, int(-32767 * share)))

    def unplug(self):
        os.close(self.fd)


# A game pad (HID usage tables, generic desktop page): twelve buttons, X, Y, Rx, Ry of eight bits each.
DESCRIPTOR = bytes.fromhex(
    "05010905a101" "05091901290c150025017501950c8102" "750195048103"
    "0501093009310933093415002" "6ff0075089504" "8102" "c0")


class UhidPad:
    """Button 10 is the right trigger; every report says all, sent a hundred times a second until `fall_silent`."""

    def __init__(self):
        self.fd = os.open("/dev/uhid", os.O_RDWR)
        create = struct.pack("<I128s64s64sHHIIII4096s", 11, b"Bay Streaming Pad", b"", b"", len(DESCRIPTOR), 3, 0x1209,
                             0x7002, 0x111, 0, DESCRIPTOR)
        os.write(self.fd, create)
        self.buttons, self.y, self.talks, self.open = 0, 128, True, True
        threading.Thread(target=self.drain, daemon=True).start()
        threading.Thread(target=self.stream, daemon=True).start()

    def drain(self):
        while self.open:
            try:
                os.read(self.fd, 4380)
            except OSError:
                return

    def stream(self):
        while self.open:
            if self.talks:
                report = struct.pack("<HBBBB", self.buttons, 128, self.y, 128, 128)
                try:
                    os.write(self.fd, struct.pack("<IH", 12, len(report)) + report)
                except OSError:
                    return
            time.sleep(0.01)

    def button(self, number, down):
        bit = 1 << (number - 1)
        self.buttons = self.buttons | bit if down else self.buttons & ~bit

    def hold(self, down):
        self.button(10, down)

    def forward(self, share):
        self.y = int(128 - 127 * share)

    def fall_silent(self):
        self.talks = False

    def unplug(self):
        self.open = False
        os.close(self.fd)
