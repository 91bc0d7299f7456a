/* A history on standard input, one step a line, for gripline.c; what it says and commands on standard output.
 * In:  now_us stop_input yaw_valid yaw supply_mv bits {angle speed}*3 hex|-
 * Out: hex|- torque speed speed speed */
#include "gripline.h"

#include <inttypes.h>
#include <stdio.h>
#include <string.h>

enum { CHANNELS = 3 };

static void say(gripline_driver *driver, uint64_t now_us, const gripline_measured *measured, int *said)
{
    uint8_t out[GRIPLINE_MAX_ON_LINE];
    for (size_t n; (n = gripline_transmit(driver, now_us, measured, out)) > 0;) {
        for (size_t i = 0; i < n; i++, *said = 1) {
            printf("%02x", out[i]);
        }
    }
}

int main(void)
{
    const gripline_identity identity = {7, CHANNELS, 2000, 500, 400, 600, 0xbeef, "bay cart drivers"};
    static gripline_driver driver;
    static gripline_measured measured;
    static char hex[4096];
    uint64_t now_us;
    int stop, yaw_valid;
    gripline_start(&driver, &identity, 0);
    while (scanf("%" SCNu64 " %d %d %" SCNd16 " %" SCNu16 " %" SCNu16, &now_us, &stop, &yaw_valid, &measured.yaw_rate,
                 &measured.supply_mv, &measured.bits) == 6) {
        for (int i = 0; i < CHANNELS; i++) {
            if (scanf("%" SCNd32 " %" SCNd16, &measured.angle[i], &measured.speed[i]) != 2) {
                return 1;
            }
        }
        if (scanf("%4095s", hex) != 1) {
            return 1;
        }
        measured.stop_input_open = stop != 0;
        measured.yaw_rate_valid = yaw_valid != 0;
        int said = 0;
        gripline_advance(&driver, now_us, &measured);
        say(&driver, now_us, &measured, &said);
        for (size_t i = 0; hex[0] != '-' && i + 1 < strlen(hex); i += 2) {
            unsigned byte;
            sscanf(hex + i, "%2x", &byte);
            gripline_receive(&driver, (uint8_t)byte, now_us);
            say(&driver, now_us, &measured, &said);
        }
        gripline_command command;
        gripline_command_now(&driver, now_us, &command);
        printf("%s %d %d %d %d\n", said ? "" : "-", command.torque, command.speed[0], command.speed[1], command.speed[2]);
    }
    return 0;
}
