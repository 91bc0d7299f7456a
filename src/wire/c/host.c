/* The drivers' side on a computer: gripline.c on a terminal device, with wheels that are not there. For trying firmware's
 * logic against the program before there is hardware.
 *
 *   cc -std=c99 -D_XOPEN_SOURCE=600 -O2 -o host host.c gripline.c
 *   ./host --pty LINK NAME CHANNELS SPEED_LSB ANGLE_LSB     opens a pseudo-terminal and links it at LINK
 *   ./host TTY NAME CHANNELS SPEED_LSB ANGLE_LSB            speaks on a port that is there
 *
 * The counts are micro-radians a second and micro-radians, as in the configuration. Wheels follow by a lag of 20 ms. It
 * ends when its standard input is closed. */
#include "gripline.h"

#include <errno.h>
#include <fcntl.h>
#include <poll.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <termios.h>
#include <time.h>
#include <unistd.h>

static uint64_t now_us(void)
{
    struct timespec t;
    clock_gettime(CLOCK_MONOTONIC, &t);
    return (uint64_t)t.tv_sec * 1000000u + (uint64_t)t.tv_nsec / 1000u;
}

static int raw(int fd)
{
    struct termios mode;
    if (tcgetattr(fd, &mode) != 0) {
        return -1;
    }
    mode.c_iflag = 0;
    mode.c_oflag = 0;
    mode.c_lflag = 0;
    mode.c_cflag = CS8 | CREAD | CLOCAL;
    mode.c_cc[VMIN] = 0;
    mode.c_cc[VTIME] = 0;
    cfsetispeed(&mode, B115200);
    cfsetospeed(&mode, B115200);
    return tcsetattr(fd, TCSANOW, &mode);
}

/* Opens the pseudo-terminal's drivers' end; keeps one descriptor of the other end, so that it stays alive and raw. */
static int open_pty(const char *link)
{
    int master = posix_openpt(O_RDWR | O_NOCTTY);
    if (master < 0 || grantpt(master) != 0 || unlockpt(master) != 0) {
        return -1;
    }
    const char *name = ptsname(master);
    int keeper = open(name, O_RDWR | O_NOCTTY);
    if (keeper < 0 || raw(keeper) != 0) {
        return -1;
    }
    (void)unlink(link);
    return symlink(name, link) == 0 ? master : -1;
}

int main(int argc, char **argv)
{
    int pty = argc > 1 && strcmp(argv[1], "--pty") == 0;
    if (argc != 6 + pty) {
        fprintf(stderr, "usage: host TTY|--pty LINK NAME CHANNELS SPEED_LSB ANGLE_LSB\n");
        return 2;
    }
    const char *path = argv[1 + pty];
    int line = pty ? open_pty(path) : open(path, O_RDWR | O_NOCTTY);
    if (line < 0 || (!pty && raw(line) != 0) || fcntl(line, F_SETFL, O_NONBLOCK) != 0) {
        fprintf(stderr, "host: cannot use %s: %s\n", path, strerror(errno));
        return 3;
    }
    gripline_identity identity = {GRIPLINE_SIMULATED | GRIPLINE_HAS_STOP_INPUT, 0, 0, 0, 1000, 10000, 0, ""};
    identity.channels = (uint8_t)atoi(argv[3 + pty]);
    identity.speed_lsb_urad_s = (uint32_t)atol(argv[4 + pty]);
    identity.angle_lsb_urad = (uint32_t)atol(argv[5 + pty]);
    if (identity.channels < 1 || identity.channels > GRIPLINE_MAX_CHANNELS || identity.speed_lsb_urad_s == 0 ||
        identity.angle_lsb_urad == 0) {
        fprintf(stderr, "host: 1 to %d channels, and counts above zero\n", GRIPLINE_MAX_CHANNELS);
        return 2;
    }
    identity.boot = (uint16_t)(now_us() ^ (uint64_t)getpid() << 4);
    strncpy(identity.name, argv[2 + pty], GRIPLINE_MAX_NAME);
    static gripline_driver driver;
    static gripline_measured measured;
    static double speed[GRIPLINE_MAX_CHANNELS], angle[GRIPLINE_MAX_CHANNELS];
    uint8_t bytes[512], out[GRIPLINE_MAX_ON_LINE];
    uint64_t before = now_us();
    measured.supply_mv = 24000;
    gripline_start(&driver, &identity, before);
    for (;;) {
        struct pollfd wait[2] = {{line, POLLIN, 0}, {0, POLLIN, 0}};
        (void)poll(wait, 2, 1);
        if (wait[1].revents && read(0, bytes, sizeof bytes) <= 0) {
            return 0;
        }
        ssize_t got = read(line, bytes, sizeof bytes);
        for (ssize_t i = 0; i < got; i++) {
            gripline_receive(&driver, bytes[i], now_us());
            size_t n = gripline_transmit(&driver, now_us(), &measured, out);
            if (n > 0 && write(line, out, n) < 0 && errno != EAGAIN) {
                return 3;
            }
        }
        uint64_t now = now_us();
        double dt = (double)(now - before) * 1e-6;
        before = now;
        gripline_command command;
        gripline_advance(&driver, now, &measured);
        gripline_command_now(&driver, now, &command);
        for (unsigned i = 0; i < identity.channels; i++) {
            double share = dt / (command.torque ? 0.02 : 0.2);
            speed[i] += (command.speed[i] - speed[i]) * (share < 1 ? share : 1);
            angle[i] += speed[i] * dt * identity.speed_lsb_urad_s / identity.angle_lsb_urad;
            measured.speed[i] = (int16_t)(speed[i] < 0 ? speed[i] - 0.5 : speed[i] + 0.5);
            measured.angle[i] = (int32_t)(uint32_t)(int64_t)angle[i];
        }
        size_t n = gripline_transmit(&driver, now, &measured, out);
        if (n > 0 && write(line, out, n) < 0 && errno != EAGAIN) {
            return 3;
        }
    }
}
