/* The drivers' side of the gripline link, version 1. See gripline.h. All arithmetic is in integers, so that this and the
 * other implementation give the same bytes for the same history. */
#include "gripline.h"

#include <string.h>

enum { ASK = 0x01, DRIVE = 0x02, STOP = 0x03, CLEAR = 0x04, IDENTITY = 0x81, FEEDBACK = 0x82 };
enum { PARK = 0, HOLD = 1, RUN = 2 };
enum { FRESH, PARKED, HOLDING, RUNNING, LATCHED };

#define BIT_LATCHED (1u << 0)
#define BIT_STOP_INPUT (1u << 1)
#define BIT_WENT_SILENT (1u << 2)
#define BIT_YAW_RATE (1u << 7)
#define BIT_TORQUE (1u << 8)
#define BIT_OUT_OF_ORDER (1u << 10)
#define BITS_MEASURED \
    (GRIPLINE_OVER_CURRENT | GRIPLINE_OVER_TEMPERATURE | GRIPLINE_UNDER_VOLTAGE | GRIPLINE_ENCODER | GRIPLINE_SCALED)

#define FEEDBACK_EVERY_US 20000u
#define FULL (UINT64_C(1) << 32) /* a whole level of a ramp */

/* --- bytes ---------------------------------------------------------------------------------------------------------- */

/* CRC-32/ISCSI (Castagnoli, reflected), four bits a step: a table of 64 bytes. */
static uint32_t crc(const uint8_t *bytes, size_t length)
{
    static const uint32_t table[16] = {
        0x00000000u, 0x105ec76fu, 0x20bd8edeu, 0x30e349b1u, 0x417b1dbcu, 0x5125dad3u, 0x61c69362u, 0x7198540du,
        0x82f63b78u, 0x92a8fc17u, 0xa24bb5a6u, 0xb21572c9u, 0xc38d26c4u, 0xd3d3e1abu, 0xe330a81au, 0xf36e6f75u,
    };
    uint32_t value = 0xffffffffu;
    for (size_t i = 0; i < length; i++) {
        value ^= bytes[i];
        value = (value >> 4) ^ table[value & 15u];
        value = (value >> 4) ^ table[value & 15u];
    }
    return ~value;
}

/* COBS (Cheshire & Baker 1999), in place. False: the bytes are no such coding. */
static bool uncover(uint8_t *bytes, size_t length, size_t *plain_length)
{
    size_t from = 0, to = 0;
    while (from < length) {
        size_t code = bytes[from];
        if (code == 0 || from + code > length) {
            return false;
        }
        for (size_t i = 1; i < code; i++) {
            bytes[to++] = bytes[from + i];
        }
        from += code;
        if (code < 255 && from < length) {
            bytes[to++] = 0;
        }
    }
    *plain_length = to;
    return true;
}

/* At most 200 bytes, so no group is ever full. Adds the end mark; gives the length. */
static size_t cover(const uint8_t *plain, size_t length, uint8_t *out)
{
    size_t group = 0, to = 1;
    for (size_t i = 0; i < length; i++) {
        if (plain[i] == 0) {
            out[group] = (uint8_t)(to - group);
            group = to++;
        } else {
            out[to++] = plain[i];
        }
    }
    out[group] = (uint8_t)(to - group);
    out[to++] = 0;
    return to;
}

static uint16_t get16(const uint8_t *bytes) { return (uint16_t)(bytes[0] | (unsigned)bytes[1] << 8); }

static uint32_t get32(const uint8_t *bytes) { return get16(bytes) | (uint32_t)get16(bytes + 2) << 16; }

/* A frame before COBS, being written. */
typedef struct {
    uint8_t bytes[GRIPLINE_MAX_PLAIN];
    size_t length;
} frame;

static void put8(frame *it, uint8_t value) { it->bytes[it->length++] = value; }

static void put16(frame *it, uint16_t value)
{
    put8(it, (uint8_t)value);
    put8(it, (uint8_t)(value >> 8));
}

static void put32(frame *it, uint32_t value)
{
    put16(it, (uint16_t)value);
    put16(it, (uint16_t)(value >> 16));
}

/* --- state ---------------------------------------------------------------------------------------------------------- */

static uint64_t remaining_us(const gripline_driver *it, uint64_t now_us)
{
    uint64_t gone = now_us > it->ramp_from_us ? now_us - it->ramp_from_us : 0;
    return gone < it->ramp_span_us ? it->ramp_span_us - gone : 0;
}

static uint64_t level(const gripline_driver *it, uint64_t now_us)
{
    return it->ramp_span_us ? it->ramp_level * remaining_us(it, now_us) / it->ramp_span_us : 0;
}

/* A linear congruential step of full period (Knuth, TAOCP vol. 2, 3.2.1.2), so that a token never repeats soon. */
static void draw_token(gripline_driver *it) { it->token = (uint16_t)(it->token * 25173u + 13849u); }

static void latch(gripline_driver *it, uint64_t at_us, uint16_t ramp_ms)
{
    if (it->state == LATCHED) {
        return;
    }
    it->ramp_torque = it->state == HOLDING || it->state == RUNNING;
    it->ramp_from_us = at_us;
    it->ramp_span_us = it->ramp_torque ? (uint64_t)ramp_ms * 1000u : 0;
    it->ramp_level = FULL;
    it->state = LATCHED;
    draw_token(it);
}

/* Validity runs out, in hold and run only; the ramp starts in that instant. */
static void expire(gripline_driver *it, uint64_t now_us)
{
    if ((it->state == HOLDING || it->state == RUNNING) && now_us >= it->valid_until_us) {
        it->bits |= BIT_WENT_SILENT;
        latch(it, it->valid_until_us, it->ramp_ms);
    }
}

static uint16_t at_most(uint16_t value, uint16_t most) { return value < most ? value : most; }

static bool take_drive(gripline_driver *it, const uint8_t *body, size_t length, uint64_t now_us)
{
    if (length < 6) {
        return false;
    }
    uint8_t mode = body[0], n = body[5];
    uint16_t valid_ms = get16(body + 1), ramp_ms = get16(body + 3);
    if (mode > RUN || n > GRIPLINE_MAX_CHANNELS || length != 6u + 2u * n) {
        return false;
    }
    for (unsigned i = 0; i < n && mode != RUN; i++) {
        if (get16(body + 6 + 2 * i) != 0) {
            return false;
        }
    }
    if (n != it->identity.channels || valid_ms > it->identity.silence_ms || it->state == LATCHED) {
        return false;
    }
    if ((mode == HOLD && it->state == FRESH) || (mode == RUN && (it->state == FRESH || it->state == PARKED))) {
        it->bits |= BIT_OUT_OF_ORDER;
        return false;
    }
    if (mode == PARK) {
        it->bits &= (uint16_t)~BIT_OUT_OF_ORDER;
    }
    it->state = mode == PARK ? PARKED : mode == HOLD ? HOLDING : RUNNING;
    for (unsigned i = 0; i < n; i++) {
        it->speed[i] = (int16_t)get16(body + 6 + 2 * i);
    }
    it->valid_until_us = now_us + (uint64_t)valid_ms * 1000u;
    it->ramp_ms = at_most(ramp_ms, it->identity.ramp_max_ms);
    it->owes_feedback = true;
    return true;
}

/* Latches, or shortens the ramp of a latch that stands. */
static void take_stop(gripline_driver *it, uint16_t ramp_ms, uint64_t now_us)
{
    ramp_ms = at_most(ramp_ms, it->identity.ramp_max_ms);
    if (it->state != LATCHED) {
        latch(it, now_us, ramp_ms);
        return;
    }
    uint64_t span_us = (uint64_t)ramp_ms * 1000u;
    if (span_us < remaining_us(it, now_us)) {
        /* From where it is now, so that the speed does not jump. */
        it->ramp_level = level(it, now_us);
        it->ramp_from_us = now_us;
        it->ramp_span_us = span_us;
    }
    draw_token(it);
}

static bool take_clear(gripline_driver *it, uint16_t token, uint64_t now_us)
{
    if (it->state != LATCHED || token != it->token || remaining_us(it, now_us) > 0 || it->stop_input_was_open) {
        return false;
    }
    it->state = FRESH;
    it->bits = 0;
    it->ramp_ms = 0;
    memset(it->speed, 0, sizeof it->speed);
    return true;
}

/* Does what a frame says; false when it is refused. */
static bool take(gripline_driver *it, const uint8_t *plain, size_t length, uint64_t now_us)
{
    if (length < 6 || crc(plain, length - 4) != get32(plain + length - 4)) {
        return false;
    }
    const uint8_t *body = plain + 2;
    size_t body_length = length - 6;
    switch (plain[0]) {
    case ASK:
        if (body_length != 0) {
            return false;
        }
        it->owes_identity = true;
        break;
    case DRIVE:
        if (!take_drive(it, body, body_length, now_us)) {
            return false;
        }
        break;
    case STOP:
        if (body_length != 2) {
            return false;
        }
        take_stop(it, get16(body), now_us);
        break;
    case CLEAR:
        if (body_length != 2 || !take_clear(it, get16(body), now_us)) {
            return false;
        }
        break;
    default:
        return false;
    }
    it->ack = plain[1];
    return true;
}

/* --- what firmware calls -------------------------------------------------------------------------------------------- */

void gripline_start(gripline_driver *it, const gripline_identity *identity, uint64_t now_us)
{
    memset(it, 0, sizeof *it);
    it->identity = *identity;
    it->identity.name[GRIPLINE_MAX_NAME] = '\0';
    if (it->identity.channels > GRIPLINE_MAX_CHANNELS) {
        it->identity.channels = GRIPLINE_MAX_CHANNELS;
    }
    it->token = identity->boot;
    it->last_feedback_us = now_us;
}

void gripline_receive(gripline_driver *it, uint8_t byte, uint64_t now_us)
{
    if (byte != 0) {
        if (it->coded_length < sizeof it->coded) {
            it->coded[it->coded_length++] = byte;
        } else {
            it->overlong = true;
        }
        return;
    }
    size_t length = it->coded_length, plain_length = 0;
    bool overlong = it->overlong;
    it->coded_length = 0;
    it->overlong = false;
    if (length == 0 && !overlong) {
        return;
    }
    /* What ran out before these bytes came has run out, even if nobody called advance in between. */
    expire(it, now_us);
    if (overlong || !uncover(it->coded, length, &plain_length) || !take(it, it->coded, plain_length, now_us)) {
        it->refused++;
    }
}

void gripline_advance(gripline_driver *it, uint64_t now_us, const gripline_measured *measured)
{
    expire(it, now_us);
    if (measured->stop_input_open && !it->stop_input_was_open) {
        latch(it, now_us, it->ramp_ms);
    }
    it->stop_input_was_open = measured->stop_input_open;
}

void gripline_command_now(const gripline_driver *it, uint64_t now_us, gripline_command *command)
{
    uint64_t share = 0;
    memset(command, 0, sizeof *command);
    if (it->state == LATCHED) {
        command->torque = it->ramp_torque && remaining_us(it, now_us) > 0;
        share = level(it, now_us);
    } else {
        command->torque = it->state == HOLDING || it->state == RUNNING;
        share = it->state == RUNNING ? FULL : 0;
    }
    for (unsigned i = 0; command->torque && i < it->identity.channels; i++) {
        int32_t speed = it->speed[i];
        uint64_t size = ((uint64_t)(speed < 0 ? -speed : speed) * share + FULL / 2) >> 32;
        int32_t rounded = size > INT16_MAX ? INT16_MAX : (int32_t)size;
        command->speed[i] = (int16_t)(speed < 0 ? -rounded : rounded);
    }
}

size_t gripline_transmit(gripline_driver *it, uint64_t now_us, const gripline_measured *measured,
                         uint8_t out[GRIPLINE_MAX_ON_LINE])
{
    frame frame = {{0}, 0};
    uint8_t n = it->identity.channels;
    if (it->owes_identity) {
        it->owes_identity = false;
        put8(&frame, IDENTITY);
        put8(&frame, it->sequence);
        put8(&frame, 1);
        put8(&frame, it->identity.flags);
        put8(&frame, n);
        put32(&frame, it->identity.speed_lsb_urad_s);
        put32(&frame, it->identity.angle_lsb_urad);
        put16(&frame, it->identity.silence_ms);
        put16(&frame, it->identity.ramp_max_ms);
        put16(&frame, it->identity.boot);
        for (const char *letter = it->identity.name; *letter; letter++) {
            put8(&frame, (uint8_t)*letter);
        }
    } else if (it->owes_feedback || now_us >= it->last_feedback_us + FEEDBACK_EVERY_US) {
        gripline_command command;
        uint16_t status = (uint16_t)(it->bits | (measured->bits & BITS_MEASURED));
        it->owes_feedback = false;
        it->last_feedback_us = now_us;
        gripline_command_now(it, now_us, &command);
        status |= (uint16_t)((it->state == LATCHED ? BIT_LATCHED : 0) | (measured->stop_input_open ? BIT_STOP_INPUT : 0) |
                             (measured->yaw_rate_valid ? BIT_YAW_RATE : 0) | (command.torque ? BIT_TORQUE : 0));
        put8(&frame, FEEDBACK);
        put8(&frame, it->sequence);
        put8(&frame, it->ack);
        put16(&frame, status);
        put16(&frame, it->token);
        put16(&frame, it->identity.boot);
        put32(&frame, (uint32_t)now_us);
        put16(&frame, measured->supply_mv);
        put16(&frame, (uint16_t)(measured->yaw_rate_valid ? measured->yaw_rate : 0));
        put16(&frame, it->refused);
        put8(&frame, n);
        for (unsigned i = 0; i < n; i++) {
            put32(&frame, (uint32_t)measured->angle[i]);
            put16(&frame, (uint16_t)measured->speed[i]);
        }
    } else {
        return 0;
    }
    put32(&frame, crc(frame.bytes, frame.length));
    it->sequence++;
    return cover(frame.bytes, frame.length, out);
}

bool gripline_latched(const gripline_driver *it) { return it->state == LATCHED; }
