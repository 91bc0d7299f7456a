/* A motor driver's main loop, for a generic microcontroller. What is in `board.h` is yours: a clock, a serial port with
 * interrupts behind it, encoders, bridges and a speed control for each motor. */
#include "board.h"
#include "gripline.h"

enum { CHANNELS = 4 };

static gripline_driver driver;

static void look(gripline_measured *measured)
{
    for (int i = 0; i < CHANNELS; i++) {
        measured->angle[i] = board_encoder_counts(i);
        measured->speed[i] = board_speed_counts(i);
    }
    measured->supply_mv = board_supply_mv();
    measured->stop_input_open = board_stop_input_is_open();
    measured->bits = (uint16_t)((board_over_current() ? GRIPLINE_OVER_CURRENT : 0) |
                                (board_over_temperature() ? GRIPLINE_OVER_TEMPERATURE : 0));
}

static void act(const gripline_command *command)
{
    for (int i = 0; i < CHANNELS; i++) {
        /* The acceleration limit of your speed control must not be below the ramp that was asked: the latch ends in time. */
        board_set_speed(i, command->torque ? command->speed[i] : 0);
        board_enable_bridge(i, command->torque);
    }
}

int main(void)
{
    const gripline_identity identity = {
        .flags = GRIPLINE_HAS_STOP_INPUT, .channels = CHANNELS, .speed_lsb_urad_s = 2000, .angle_lsb_urad = 500,
        .silence_ms = 500, .ramp_max_ms = 5000, .boot = board_next_boot_number(), .name = "bay cart drivers",
    };
    static gripline_measured measured;
    gripline_command command;
    uint8_t byte, out[GRIPLINE_MAX_ON_LINE];

    board_init();
    gripline_start(&driver, &identity, board_now_us());
    for (;;) {
        look(&measured);
        while (board_serial_read(&byte)) {
            gripline_receive(&driver, byte, board_now_us());
            size_t n = gripline_transmit(&driver, board_now_us(), &measured, out);
            board_serial_write(out, n); /* copies into a queue that an interrupt empties; never waits */
        }
        gripline_advance(&driver, board_now_us(), &measured);
        gripline_command_now(&driver, board_now_us(), &command);
        act(&command);
        board_serial_write(out, gripline_transmit(&driver, board_now_us(), &measured, out));
        board_kick_watchdog(); /* a hardware watchdog that takes the torque away if this loop stops */
    }
}
