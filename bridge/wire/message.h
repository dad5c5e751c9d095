/* Messages: one table says what each holds; encoding, decoding, ranges and the table's digest all come from
 * it. Freestanding. */
#ifndef PULSEWRIGHT_BRIDGE_WIRE_MESSAGE_H
#define PULSEWRIGHT_BRIDGE_WIRE_MESSAGE_H
#include "bridge/wire/frame.h"
#include "bridge/wire/image.h"
#include <stdbool.h>
#include <stdint.h>

enum { MESSAGE_DETAIL_MAX = 160, SAMPLE_READINGS = 5, TALLY_CHANNELS = 4, EASE_ALL = 255, EASE_FULL = 1000 };

/* F(kind, name, least, most): kind u8, u16, u32, u64, i32; B(name, octets): octets as they are.
 * M(NAME, number, name, fields): hello, identity, stop and refusal have fixed layouts for ever. */
#define MESSAGE_TABLE(M)                                                                                     \
    M(HELLO, 1, hello, HELLO_FIELDS)                                                                         \
    M(CLOCK, 2, clock, CLOCK_FIELDS)                                                                         \
    M(CLEAR, 3, clear, CLEAR_FIELDS)                                                                         \
    M(LIMITS, 4, limits, LIMITS_FIELDS)                                                                      \
    M(ARM, 5, arm, ARM_FIELDS)                                                                               \
    M(CONFIRM, 6, confirm, CONFIRM_FIELDS)                                                                   \
    M(SEGMENT, 7, segment, SEGMENT_FIELDS)                                                                   \
    M(START, 8, start, START_FIELDS)                                                                         \
    M(RENEW, 9, renew, RENEW_FIELDS)                                                                         \
    M(EASE, 10, ease, EASE_FIELDS)                                                                           \
    M(STOP, 11, stop, STOP_FIELDS)                                                                           \
    M(DISARM, 12, disarm, DISARM_FIELDS)                                                                     \
    M(REPORT, 13, report, REPORT_FIELDS)                                                                     \
    M(IDENTITY, 65, identity, IDENTITY_FIELDS)                                                               \
    M(CLOCK_IS, 66, clock_is, CLOCK_IS_FIELDS)                                                               \
    M(DONE, 67, done, DONE_FIELDS)                                                                           \
    M(REFUSAL, 68, refusal, REFUSAL_FIELDS)                                                                  \
    M(STATE, 69, state, STATE_FIELDS)                                                                        \
    M(SAMPLE, 70, sample, SAMPLE_FIELDS)                                                                     \
    M(TALLY, 71, tally, TALLY_FIELDS)                                                                        \
    M(DELIVERED, 72, delivered, DELIVERED_FIELDS)                                                            \
    M(FAULT, 73, fault, FAULT_FIELDS)

#define HELLO_FIELDS(F, B) F(u64, nonce, 1, UINT64_MAX)
#define CLOCK_FIELDS(F, B) F(u64, host_us, 0, UINT64_MAX)
#define CLEAR_FIELDS(F, B) F(u16, cause, 1, 255)
#define LIMITS_FIELDS(F, B) F(u8, count, 1, IMAGE_CHANNELS_MAX) B(limits, IMAGE_LIMITS_OCTETS)
#define ARM_FIELDS(F, B)                                                                                     \
    B(header, IMAGE_HEADER_OCTETS)                                                                           \
    F(u32, n, 1, IMAGE_SEGMENTS_MAX) B(h0, IMAGE_LINK_SIZE) F(u32, first, 0, IMAGE_SEGMENTS_MAX)             \
        B(totals, 12 * IMAGE_CHANNELS_MAX) /* a channel of the header: pulses u32, charge pC u64, of this    \
                                              person's session so far */
#define CONFIRM_FIELDS(F, B) F(u64, nonce, 0, UINT64_MAX) B(root, IMAGE_ROOT_SIZE)
#define SEGMENT_FIELDS(F, B) B(segment, IMAGE_SEGMENT_OCTETS) B(link, IMAGE_LINK_SIZE)
#define START_FIELDS(F, B) F(u64, nonce, 0, UINT64_MAX) F(u64, at_us, 0, UINT64_MAX)
#define RENEW_FIELDS(F, B) F(u64, echo_us, 0, UINT64_MAX) F(u8, held, 0, 1)
#define EASE_FIELDS(F, B) F(u8, channel, 0, 255) F(u16, thousandths, 0, EASE_FULL)
#define STOP_FIELDS(F, B)
#define DISARM_FIELDS(F, B)
#define REPORT_FIELDS(F, B)
#define IDENTITY_FIELDS(F, B)                                                                                \
    F(u64, nonce, 0, UINT64_MAX)                                                                             \
    F(u32, session, 0, UINT32_MAX) F(u64, boot, 0, UINT64_MAX) F(u8, twin, 0, 1) F(u8, virtual_clock, 0, 1)  \
        F(u16, version, 0, UINT16_MAX) F(u16, cause, 0, 255) F(u8, state, 0, 7)                              \
            F(u64, now_us, 0, UINT64_MAX) B(table, 8) B(identity, IMAGE_IDENTITY_OCTETS)                     \
                F(u16, queue_segments, 1, UINT16_MAX) F(u8, force_sensor, 0, 1)
#define CLOCK_IS_FIELDS(F, B) F(u64, host_us, 0, UINT64_MAX) F(u64, device_us, 0, UINT64_MAX)
#define DONE_FIELDS(F, B)                                                                                    \
    F(u8, what, 1, 64)                                                                                       \
    F(u64, now_us, 0, UINT64_MAX) F(u8, size, 0, MESSAGE_DETAIL_MAX) B(detail, MESSAGE_DETAIL_MAX)
#define REFUSAL_FIELDS(F, B) F(u8, what, 0, 255) F(u16, reason, 1, 255) F(u32, detail, 0, UINT32_MAX)
#define STATE_FIELDS(F, B)                                                                                   \
    F(u8, state, 0, 7)                                                                                       \
    F(u16, cause, 0, 255) F(u64, now_us, 0, UINT64_MAX) F(u32, next_index, 0, UINT32_MAX)                    \
        F(u16, held_segments, 0, UINT16_MAX)
#define SAMPLE_FIELDS(F, B)                                                                                  \
    F(u64, time_us, 0, UINT64_MAX)                                                                           \
    F(u16, cadence_rpm_x10, 0, UINT16_MAX)                                                                   \
        B(readings, 12 * SAMPLE_READINGS) /* each: dt us/10 u16, force mN i32, angle u16, torque mN m i32 */
#define TALLY_FIELDS(F, B)                                                                                   \
    F(u64, at_us, 0, UINT64_MAX)                                                                             \
    F(u8, count, 1, TALLY_CHANNELS)                                                                          \
        B(counts, 17 * TALLY_CHANNELS) /* each: channel u8, pulses u32, charge pC u64, skipped u32 */
#define DELIVERED_FIELDS(F, B)                                                                               \
    F(u64, at_us, 0, UINT64_MAX)                                                                             \
    F(u8, channel, 1, IMAGE_CHANNELS_MAX) F(u32, number, 0, UINT32_MAX) F(u16, duration_us, 0, 1000)         \
        F(u32, set_ua, 0, 262144) F(u32, measured_ua, 0, UINT32_MAX) F(u8, lowered, 0, 1)
#define FAULT_FIELDS(F, B)                                                                                   \
    F(u16, cause, 1, 255)                                                                                    \
    F(u64, at_us, 0, UINT64_MAX) F(u8, channel, 0, 255) F(u8, figure, 0, 255) F(u64, value, 0, UINT64_MAX)   \
        F(u64, limit, 0, UINT64_MAX) F(u64, last_pulse_us, 0, UINT64_MAX)

enum message_type {
#define MESSAGE_TYPE(NAME, number, name, fields) MESSAGE_##NAME = number,
    MESSAGE_TABLE(MESSAGE_TYPE)
#undef MESSAGE_TYPE
};

#define MESSAGE_C_u8 uint8_t
#define MESSAGE_C_u16 uint16_t
#define MESSAGE_C_u32 uint32_t
#define MESSAGE_C_u64 uint64_t
#define MESSAGE_C_i32 int32_t
#define MESSAGE_MEMBER(kind, name, least, most) MESSAGE_C_##kind name;
#define MESSAGE_MEMBER_OCTETS(name, octets) uint8_t name[octets];
#define MESSAGE_STRUCT(NAME, number, name, fields)                                                           \
    struct message_##name {                                                                                  \
        fields(MESSAGE_MEMBER, MESSAGE_MEMBER_OCTETS) uint8_t message_end;                                   \
    };
MESSAGE_TABLE(MESSAGE_STRUCT)
#undef MESSAGE_STRUCT

/* One of all. */
union message_any {
#define MESSAGE_UNION(NAME, number, name, fields) struct message_##name name;
    MESSAGE_TABLE(MESSAGE_UNION)
#undef MESSAGE_UNION
};

/* Writes the payload of frame->type from the message's struct; false where a field is out of its range.
 * `done` is cut to its detail. */
bool message_encode(struct frame *frame, const void *message);
/* Reads frame's payload into the struct of its type; false where type, length or a range is wrong. */
bool message_decode(const struct frame *frame, union message_any *message);
/* The digest of the table: what seeds the CRC. */
const uint8_t *message_table_digest(void);
bool message_is_fixed(uint8_t type); /* hello, identity, stop, refusal */
const char *message_name(uint8_t type);

/* Causes that end output, latched and told: code, name, words for a person. */
#define CAUSE_TABLE(X)                                                                                       \
    X(CAUSE_NONE, 0, "no cause")                                                                             \
    X(CAUSE_STOP, 1, "a stop was requested")                                                                 \
    X(CAUSE_DISARM, 2, "it was disarmed")                                                                    \
    X(CAUSE_LEASE, 3, "the host went quiet: its lease ended")                                                \
    X(CAUSE_LATE, 4, "a pulse came due more than 1 ms ago and was not given")                                \
    X(CAUSE_LIMIT, 5, "a pulse would have broken a limit")                                                   \
    X(CAUSE_HASH, 6, "a segment was not the one that was signed")                                            \
    X(CAUSE_VALUE, 7, "a segment held an illegal value")                                                     \
    X(CAUSE_UNDERRUN, 8, "the next segment did not arrive in time")                                          \
    X(CAUSE_DAMAGED, 9, "eight damaged frames within one second")                                            \
    X(CAUSE_SECOND_HOST, 10, "a second host said hello")                                                     \
    X(CAUSE_INTERLOCK, 11, "the interlock opened")                                                           \
    X(CAUSE_ECHO, 12, "the lease was renewed with a clock that was never sent")                              \
    X(CAUSE_OVERLAP, 13, "two channels would have pulsed at once")                                           \
    X(CAUSE_MEASURED, 14, "the measured current is not the one that was set")                                \
    X(CAUSE_FORCE, 15, "the force rose above its signed cap")                                                \
    X(CAUSE_SENSOR, 16, "the load sensor fell silent")                                                       \
    X(CAUSE_NOT_CONFIRMED, 17, "arming was not confirmed in time")                                           \
    X(CAUSE_OUTPUT, 18, "the output stage refused a pulse")

/* Reasons of a refusal; nothing changes. */
#define REASON_TABLE(X)                                                                                      \
    X(REASON_NONE, 0, "no reason")                                                                           \
    X(REASON_STATE, 1, "not in this state")                                                                  \
    X(REASON_CAUSE, 2, "a cause is latched: clear it first")                                                 \
    X(REASON_RESET, 3, "the device was reset less than a second ago")                                        \
    X(REASON_VALUE, 4, "a value is out of its range")                                                        \
    X(REASON_NONCE, 5, "the nonce is not the present one")                                                   \
    X(REASON_FULL, 6, "the queue is full")                                                                   \
    X(REASON_NEXT_IS, 7, "another segment is next")                                                          \
    X(REASON_KIND, 8, "this device does not take that kind of sign-off")                                     \
    X(REASON_NOT_SUPPORTED, 9, "not supported by this device")                                               \
    X(REASON_ROOT, 10, "the root is not that of what was armed")                                             \
    X(REASON_TIME, 11, "the start lies too near or too far ahead")                                           \
    X(REASON_NOT_HELD, 12, "the first segments are not held yet")                                            \
    X(REASON_INTERLOCK, 13, "the interlock is open")                                                         \
    X(REASON_LIMITS, 14, "a channel has no limits")

#define WIRE_ENUM(name, code, text) name = code,
enum device_cause { CAUSE_TABLE(WIRE_ENUM) };
enum refusal_reason { REASON_TABLE(WIRE_ENUM) };
#undef WIRE_ENUM
const char *cause_text(unsigned cause);
const char *reason_text(unsigned reason);

#endif
