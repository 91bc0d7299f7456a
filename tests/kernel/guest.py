#!/usr/bin/python3
"""The checks inside the small machine. One line a check: `ok NAME (measured)` or `FAIL NAME: why`."""
import ctypes, json, os, signal, subprocess, sys, termios, time, tty
sys.path.insert(0, "/payload")
from pads import EAST, SELECT, START, UhidPad, UinputPad

CONFIG = "/etc/gripline/base.toml"


class Outside:
    """The control line to the host."""

    def __init__(self):
        fd = os.open("/dev/ttyS1", os.O_RDWR | os.O_NOCTTY)
        tty.setraw(fd, termios.TCSANOW)
        self.file = os.fdopen(fd, "r+b", buffering=0)

    def ask(self, word):
        self.file.write(word.encode() + b"\n")
        answer = b""
        while not answer.endswith(b"\n"):
            answer += self.file.read(1) or b""
        return json.loads(answer)


class Failed(Exception):
    pass


def status():
    out = subprocess.run(["gripline", "status", CONFIG, "--json"], capture_output=True, text=True)
    try:
        return json.loads(out.stdout)
    except ValueError:
        return {}


def until(what, so, within_s=12.0):
    end = time.monotonic() + within_s
    while time.monotonic() < end:
        got = so()
        if got:
            return got
        time.sleep(0.02)
    raise Failed(f"{what}: not within {within_s:.0f} s; status {status()}; line {outside.ask('state')}")


def phase_is(*phases):
    return lambda: (lambda it: it if it.get("phase") in phases else None)(status())


def show(name):
    return subprocess.run(["systemctl", "show", "-P", name, "gripline"], capture_output=True, text=True).stdout.strip()


def press(button, seconds=0.15):
    pad.button(button, True)
    time.sleep(seconds)
    pad.button(button, False)


def is_free():
    got = status()
    return got.get("phase") == "Ready" or got.get("phase") == "Parked" and not got.get("waits_for")


def into_motion():
    until("Parked or Ready and nothing in the way", is_free)
    if status().get("phase") == "Parked":
        press(button_ready)
    until("Ready", phase_is("Ready"))
    time.sleep(0.1)
    pad.hold(True)
    until("Driving", phase_is("Driving"))
    pad.forward(1.0)
    until("the wheels turn", lambda: outside.ask("state")["speed"] > 1500)
    time.sleep(0.3)
    outside.ask("mark")


def let_go():
    pad.forward(0.0)
    pad.hold(False)


def stands():
    until("every wheel stands", lambda: outside.ask("state")["stands"])
    return outside.ask("state")


def nothing_moves(seconds, what):
    outside.ask("mark")
    time.sleep(seconds)
    state = outside.ask("state")
    if state["motion"] or not state["stands"]:
        raise Failed(f"{what}: it moved; {state}")


def reset():
    let_go()
    until("Tripped", phase_is("Tripped"))
    pad.button(button_reset, True)
    try:
        until("Parked by a reset", phase_is("Parked"))
    finally:
        pad.button(button_reset, False)


def stopped_words(state):
    first = "" if state["first_stop_s"] is None else f"first stop on the line after {state['first_stop_s'] * 1e3:.0f} ms, "
    return f"{first}standstill after {state['stood_s']:.2f} s, {state['moved_rad']:.1f} rad of wheel"


def installed():
    out = subprocess.run(["bash", "/payload/install"], cwd="/root/tree", capture_output=True, text=True)
    if out.returncode:
        raise Failed(f"the README's lines fail: {(out.stdout + out.stderr)[-600:]}")
    if show("ActiveState") != "active":
        raise Failed("the unit is not active")
    owner = os.stat("/dev/gripline-tray-cart")
    return f"unit active, /dev/gripline-tray-cart {oct(owner.st_mode & 0o777)}"


def drives():
    into_motion()
    speed = outside.ask("state")["speed"]
    let_go()
    until("Ready after a release", phase_is("Ready"))
    state = stands()
    return f"{speed} counts on the wheels; after a release {stopped_words(state)}"


def stop_button():
    into_motion()
    press(button_stop)
    until("Tripped", phase_is("Tripped"))
    state = stands()
    nothing_moves(1.0, "hold and stick still pressed")
    reset()
    return stopped_words(state)


def pad_pulled():
    global pad
    into_motion()
    pad.unplug()
    got = until("Tripped", phase_is("Tripped"))
    state = stands()
    if got.get("cause_code") != "pad-gone":
        raise Failed(f"cause {got.get('cause_code')}")
    pad = UinputPad()
    until("the pad is taken again", lambda: "gamepad" not in (status().get("waits_for") or ""))
    time.sleep(1.0)
    reset()
    return stopped_words(state)


def adaptor_pulled():
    process = show("MainPID")
    into_motion()
    outside.ask("unplug")
    got = until("Tripped", phase_is("Tripped"))
    let_go()
    stands()
    outside.ask("plug")
    until("the adaptor is back", lambda: os.path.exists("/dev/gripline-tray-cart"))
    nothing_moves(1.0, "the adaptor plugged again")
    until("nothing but the reset is waited for", lambda: outside.ask("state")["latched"])
    time.sleep(1.0)
    reset()
    if show("MainPID") != process:
        raise Failed("it was started anew")
    return f"cause {got.get('cause_code')}, Parked again in the same process"


def came_back(restarts):
    until("started anew", lambda: int(show("NRestarts")) > restarts and show("ActiveState") == "active", 20)
    until("Tripped after the start", phase_is("Tripped"))
    nothing_moves(1.0, "after the start, hold and stick still pressed")
    reset()


def killed():
    restarts, process = int(show("NRestarts")), int(show("MainPID"))
    into_motion()
    os.kill(process, signal.SIGKILL)
    state = stands()
    if state["stops"] == 0 or state["silent"]:
        raise Failed(f"the last act did not reach the line before the drivers stopped by themselves: {state}")
    came_back(restarts)
    return stopped_words(state)


PTRACE_SEIZE, PTRACE_INTERRUPT, PTRACE_DETACH, WALL = 0x4206, 0x4207, 17, 0x40000000
libc = ctypes.CDLL(None, use_errno=True)
libc.ptrace.argtypes = [ctypes.c_long, ctypes.c_long, ctypes.c_void_p, ctypes.c_void_p]


def hung():
    restarts, process = int(show("NRestarts")), int(show("MainPID"))
    into_motion()
    thread = next(it for it in os.listdir(f"/proc/{process}/task")
                  if open(f"/proc/{process}/task/{it}/comm").read().strip() == "tick")
    if libc.ptrace(PTRACE_SEIZE, int(thread), None, None) or libc.ptrace(PTRACE_INTERRUPT, int(thread), None, None):
        raise Failed(f"the thread cannot be held: {os.strerror(ctypes.get_errno())}")
    os.waitpid(int(thread), WALL)
    state = stands()
    if state["stops"] == 0 or state["silent"]:
        raise Failed(f"the sentinel did not stop the base: {state}")
    # The manager's SIGKILL ends a held thread too, but its tracer must wait for it.
    until("killed by the watchdog", lambda: not os.path.exists(f"/proc/{process}/task/{thread}") or reap(int(thread)), 15)
    if "watchdog" not in subprocess.run(["journalctl", "-u", "gripline", "--no-pager"], capture_output=True, text=True).stdout.lower():
        raise Failed("no watchdog in the journal")
    came_back(restarts)
    return stopped_words(state)


def reap(thread):
    try:
        return os.waitpid(thread, WALL | os.WNOHANG)[0] != 0
    except ChildProcessError:
        return True


def suspended():
    process = int(show("MainPID"))
    into_motion()
    os.kill(process, signal.SIGSTOP)
    time.sleep(1.3)
    outside.ask("mark")
    os.kill(process, signal.SIGCONT)
    until("Tripped", phase_is("Tripped"))
    state = outside.ask("state")
    if state["motion"]:
        raise Failed(f"{state['motion']} motion frames after it went on")
    stands()
    nothing_moves(1.0, "after it went on, hold and stick still pressed")
    reset()
    return f"no motion frame after 1.3 s, stop on the line {state['first_stop_s'] * 1e3:.0f} ms after it went on"


def restarted():
    began = time.monotonic()
    for number in range(10):
        if subprocess.run(["systemctl", "restart", "gripline"]).returncode:
            raise Failed(f"restart {number + 1} was refused: {show('Result')}")
        until("it answers", lambda: status().get("phase"))
    until("Parked", phase_is("Parked"))
    return f"ten times, {(time.monotonic() - began) / 10:.1f} s each"


def silent_pad():
    global pad, button_ready, button_reset
    pad.unplug()
    until("Tripped by the other pad's going", phase_is("Tripped"))
    pad = UhidPad()
    button_ready, button_reset = 12, 11
    until("the pad is taken", lambda: "gamepad" not in (status().get("waits_for") or ""))
    # It is known for one that streams after a second of stillness.
    time.sleep(2.5)
    reset()
    into_motion()
    pad.fall_silent()
    got = until("Stopping or Ready", phase_is("Stopping", "Ready"))
    state = stands()
    until("Ready", phase_is("Ready"))
    if state["stood_s"] > 1.2:
        raise Failed(f"it was taken for a pad that only reports changes: {state}")
    if state["stops"] or state["latched"]:
        raise Failed(f"it must be a release, not a trip: {got} {state}")
    return f"standstill {state['stood_s']:.2f} s after the last report, unlatched"


def check(name, function):
    try:
        print(f"ok {name} ({function()})", flush=True)
        return
    except Failed as why:
        print(f"FAIL {name}: {why}", flush=True)
    except Exception as why:
        print(f"FAIL {name}: {type(why).__name__} {why}", flush=True)
    tell_more()
    try:
        # The checks after it are to stand on their own.
        let_go()
        if status().get("phase") == "Tripped":
            reset()
    except Exception:
        pass


def tell_more():
    print(subprocess.run("ls -l /dev/input /dev/hidraw*; gripline pads; runuser -u gripline -- gripline pads; "
                         "GILRS_DISABLE_UDEV=1 gripline pads; udevadm info /dev/input/event*|grep -E 'DEVNAME|JOY'; cat /proc/$(systemctl show -P MainPID gripline)/status | grep -iE 'groups|uid'",
                         shell=True, capture_output=True, text=True).stdout, flush=True)
    out = subprocess.run(["journalctl", "-u", "gripline", "--no-pager", "-n", "25", "-o", "short-monotonic"],
                         capture_output=True, text=True).stdout
    print("\n".join("    " + it for it in out.splitlines()), flush=True)


only = open("/payload/only").read()
button_ready, button_reset, button_stop = START, SELECT, EAST
subprocess.run(["cp", "-r", "/payload/tree", "/root/tree"], check=True)
outside = Outside()
check("installed by the README's lines", installed)
pad = UinputPad()
for name, function in [("a gamepad of the kernel's drives over a USB adaptor", drives),
                       ("the stop button", stop_button),
                       ("the gamepad pulled in motion", pad_pulled),
                       ("the adaptor pulled in motion and plugged again", adaptor_pulled),
                       ("killed: the last act and the start after it", killed),
                       ("the tick hangs: sentinel, watchdog, start", hung),
                       ("suspended and continued", suspended),
                       ("restarted ten times in a row", restarted),
                       ("a streaming gamepad falls silent", silent_pad)]:
    if only in name:
        check(name, function)
print("END OF CHECKS", flush=True)
subprocess.run(["systemctl", "poweroff", "--force", "--force"])
