/* The drivers' side of the gripline link, version 1, for motor driver firmware: C99, no dependencies, no allocation.
 *
 * Give it the bytes that arrive, the time, and what the hardware measures; it tells what the motors are to do and what
 * to send. It holds every rule of the line's format: order of park, hold and run, validity, latch, token, ramp.
 * Nothing in it waits. One instance serves one line; it is not reentrant: call it from one place, or guard it.
 *
 *   gripline_start(&driver, &identity, now_us);
 *   for ever:
 *       for each byte that arrived:  gripline_receive(&driver, byte, now_us);
 *       gripline_advance(&driver, now_us, &measured);
 *       gripline_command_now(&driver, now_us, &command);     -> torque and speeds of the motors
 *       n = gripline_transmit(&driver, now_us, &measured, out);   while n > 0: send n bytes of out
 *
 * now_us: microseconds since the start, never falling, 64 bits (extend a shorter timer where it wraps). Call advance and
 * command at least a thousand times a second: a latch ramps in the instant that it is due.
 *
 * This is no safety device. Fit a hard-wired emergency stop that takes the power away by itself. */
#ifndef GRIPLINE_H
#define GRIPLINE_H

#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#define GRIPLINE_MAX_CHANNELS 29
#define GRIPLINE_MAX_PLAIN 200
#define GRIPLINE_MAX_ON_LINE (GRIPLINE_MAX_PLAIN + 2)
#define GRIPLINE_MAX_NAME 24

/* Bits of `flags`. */
#define GRIPLINE_SIMULATED 1u
#define GRIPLINE_HAS_YAW_RATE 2u
#define GRIPLINE_HAS_STOP_INPUT 4u

/* Bits of `bits` in what is measured; the others of the status are the driver's own. */
#define GRIPLINE_OVER_CURRENT (1u << 3)
#define GRIPLINE_OVER_TEMPERATURE (1u << 4)
#define GRIPLINE_UNDER_VOLTAGE (1u << 5)
#define GRIPLINE_ENCODER (1u << 6)
#define GRIPLINE_SCALED (1u << 9) /* the speeds could not be held: all channels were scaled, never one */

/* Who the drivers are: what the configuration of the base must say too. */
typedef struct {
    uint8_t flags;
    uint8_t channels;          /* 1 to GRIPLINE_MAX_CHANNELS */
    uint32_t speed_lsb_urad_s; /* micro-radians a second in a count of speed */
    uint32_t angle_lsb_urad;   /* micro-radians in a count of angle */
    uint16_t silence_ms;       /* the longest validity that is taken */
    uint16_t ramp_max_ms;      /* longer ramps are shortened to it */
    uint16_t boot;             /* new at each start: a counter in flash, or noise */
    char name[GRIPLINE_MAX_NAME + 1];
} gripline_identity;

/* What the hardware says at this moment. */
typedef struct {
    int32_t angle[GRIPLINE_MAX_CHANNELS]; /* counts since the start; wraps */
    int16_t speed[GRIPLINE_MAX_CHANNELS]; /* counts */
    uint16_t supply_mv;
    int16_t yaw_rate; /* 1/2048 rad/s */
    bool yaw_rate_valid;
    uint16_t bits; /* see above */
    bool stop_input_open;
} gripline_measured;

/* What the motors are to do. */
typedef struct {
    bool torque;
    int16_t speed[GRIPLINE_MAX_CHANNELS]; /* counts; zero without torque */
} gripline_command;

/* Its inside is its own. */
typedef struct {
    gripline_identity identity;
    uint8_t coded[GRIPLINE_MAX_PLAIN + 1];
    size_t coded_length;
    bool overlong;
    uint8_t state;
    uint64_t ramp_from_us, ramp_span_us, ramp_level;
    bool ramp_torque;
    int16_t speed[GRIPLINE_MAX_CHANNELS];
    uint64_t valid_until_us, last_feedback_us;
    uint16_t ramp_ms, bits, token, refused;
    uint8_t ack, sequence;
    bool stop_input_was_open, owes_identity, owes_feedback;
} gripline_driver;

/* Just started: without torque, nothing owed. */
void gripline_start(gripline_driver *driver, const gripline_identity *identity, uint64_t now_us);

/* Takes one byte from the line, received at now_us. After each byte see whether there is something to transmit. */
void gripline_receive(gripline_driver *driver, uint8_t byte, uint64_t now_us);

/* Lets time pass: validity, stop input. */
void gripline_advance(gripline_driver *driver, uint64_t now_us, const gripline_measured *measured);

/* What the motors are to do now. */
void gripline_command_now(const gripline_driver *driver, uint64_t now_us, gripline_command *command);

/* The next frame to send, whole with its end mark: its length, 0 when nothing is due. */
size_t gripline_transmit(gripline_driver *driver, uint64_t now_us, const gripline_measured *measured,
                         uint8_t out[GRIPLINE_MAX_ON_LINE]);

/* Stopped; only Clear with the present token ends it. */
bool gripline_latched(const gripline_driver *driver);

#endif
