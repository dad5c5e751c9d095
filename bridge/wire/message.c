/* Messages by table. The goal of this code: after the CRC, every field's length, type and range is checked
 * too (COBS weakens the CRC's guaranteed distance), by the same table that both sides are built from.
 * Freestanding. */
#include "bridge/wire/message.h"

#include "core/digest/blake2b.h"
#include <string.h>

struct field {
    uint16_t offset;
    uint16_t octets; /* of the field on the wire */
    bool number;
    uint64_t least, most;
};

#define OCTETS_u8 1
#define OCTETS_u16 2
#define OCTETS_u32 4
#define OCTETS_u64 8
#define OCTETS_i32 4

/* Rows need their struct's name inside the field macros: it stands in MESSAGE_NOW. */
#define ROW_NUMBER(kind, member, low, high) {offsetof(MESSAGE_NOW, member), OCTETS_##kind, true, low, high},
#define ROW_OCTETS(member, count) {offsetof(MESSAGE_NOW, member), count, false, 0, 0},

#define MESSAGE_NOW struct message_hello
static const struct field hello_rows[] = {HELLO_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_clock
static const struct field clock_rows[] = {CLOCK_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_clear
static const struct field clear_rows[] = {CLEAR_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_limits
static const struct field limits_rows[] = {LIMITS_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_arm
static const struct field arm_rows[] = {ARM_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_confirm
static const struct field confirm_rows[] = {CONFIRM_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_segment
static const struct field segment_rows[] = {SEGMENT_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_start
static const struct field start_rows[] = {START_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_renew
static const struct field renew_rows[] = {RENEW_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_ease
static const struct field ease_rows[] = {EASE_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
static const struct field stop_rows[] = {{0, 0, false, 0, 0}};
static const struct field disarm_rows[] = {{0, 0, false, 0, 0}};
static const struct field report_rows[] = {{0, 0, false, 0, 0}};
#define MESSAGE_NOW struct message_identity
static const struct field identity_rows[] = {IDENTITY_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_clock_is
static const struct field clock_is_rows[] = {CLOCK_IS_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_done
static const struct field done_rows[] = {DONE_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_refusal
static const struct field refusal_rows[] = {REFUSAL_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_state
static const struct field state_rows[] = {STATE_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_sample
static const struct field sample_rows[] = {SAMPLE_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_tally
static const struct field tally_rows[] = {TALLY_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_delivered
static const struct field delivered_rows[] = {DELIVERED_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW
#define MESSAGE_NOW struct message_fault
static const struct field fault_rows[] = {FAULT_FIELDS(ROW_NUMBER, ROW_OCTETS){0, 0, false, 0, 0}};
#undef MESSAGE_NOW

struct layout {
    uint8_t type;
    const char *name;
    const struct field *fields;
    uint16_t size; /* of the struct */
};

static const struct layout layouts[] = {
#define LAYOUT(NAME, number, name, fields) {number, #name, name##_rows, sizeof(struct message_##name)},
    MESSAGE_TABLE(LAYOUT)
#undef LAYOUT
};
enum { LAYOUTS = sizeof layouts / sizeof layouts[0] };

/* The table as text: what its digest is taken of. Any change of a name, kind or range changes it. */
static const char table_text[] =
#define TEXT_NUMBER(kind, member, low, high) #kind " " #member " " #low " " #high ","
#define TEXT_OCTETS(member, count) "octets " #member " " #count ","
#define TEXT_MESSAGE(NAME, number, name, fields) #number " " #name ":" fields(TEXT_NUMBER, TEXT_OCTETS) ";"
    MESSAGE_TABLE(TEXT_MESSAGE);

static const struct layout *layout_of(uint8_t type)
{
    for (unsigned i = 0; i < LAYOUTS; i++)
        if (layouts[i].type == type) return &layouts[i];
    return NULL;
}

const uint8_t *message_table_digest(void)
{
    static uint8_t digest[8];
    static bool known;
    if (!known) {
        blake2b(digest, sizeof digest, table_text, sizeof table_text - 1);
        known = true;
    }
    return digest;
}

bool message_is_fixed(uint8_t type)
{
    return type == MESSAGE_HELLO || type == MESSAGE_IDENTITY || type == MESSAGE_STOP ||
           type == MESSAGE_REFUSAL;
}

const char *message_name(uint8_t type)
{
    const struct layout *layout = layout_of(type);
    return layout ? layout->name : "unknown";
}

static uint64_t load(const uint8_t *member, unsigned octets)
{
    uint16_t two;
    uint32_t four;
    uint64_t eight;
    switch (octets) {
    case 1: return *member;
    case 2: memcpy(&two, member, sizeof two); return two;
    case 4: memcpy(&four, member, sizeof four); return four;
    default: memcpy(&eight, member, sizeof eight); return eight;
    }
}

static void store(uint8_t *member, unsigned octets, uint64_t value)
{
    const uint16_t two = (uint16_t)value;
    const uint32_t four = (uint32_t)value;
    switch (octets) {
    case 1: *member = (uint8_t)value; break;
    case 2: memcpy(member, &two, sizeof two); break;
    case 4: memcpy(member, &four, sizeof four); break;
    default: memcpy(member, &value, sizeof value); break;
    }
}

/* `done` carries only as much of its detail as its size says. */
static unsigned wire_octets(const struct layout *layout, const struct field *field, const void *message)
{
    if (layout->type != MESSAGE_DONE || field->number) return field->octets;
    return ((const struct message_done *)message)->size;
}

bool message_encode(struct frame *frame, const void *message)
{
    const struct layout *layout = layout_of(frame->type);
    unsigned put = 0;
    for (const struct field *field = layout ? layout->fields : NULL; field && field->octets; field++) {
        const uint8_t *member = (const uint8_t *)message + field->offset;
        const unsigned octets = wire_octets(layout, field, message);
        if (put + octets > FRAME_PAYLOAD_MAX) return false;
        if (!field->number) {
            memcpy(frame->payload + put, member, octets);
        } else {
            const uint64_t value = load(member, octets);
            if (value < field->least || value > field->most) return false;
            for (unsigned i = 0; i < octets; i++) frame->payload[put + i] = (uint8_t)(value >> 8 * i);
        }
        put += octets;
    }
    frame->size = (uint8_t)put;
    return layout != NULL;
}

bool message_decode(const struct frame *frame, union message_any *message)
{
    const struct layout *layout = layout_of(frame->type);
    if (!layout) return false;
    memset(message, 0, layout->size);
    unsigned at = 0;
    for (const struct field *field = layout->fields; field->octets; field++) {
        uint8_t *member = (uint8_t *)message + field->offset;
        const unsigned octets = wire_octets(layout, field, message);
        if (at + octets > frame->size) return false;
        if (!field->number) {
            memcpy(member, frame->payload + at, octets);
        } else {
            uint64_t value = 0;
            for (unsigned i = 0; i < octets; i++) value |= (uint64_t)frame->payload[at + i] << 8 * i;
            if (value < field->least || value > field->most) return false;
            store(member, octets, value);
        }
        at += octets;
    }
    return at == frame->size;
}

#define WIRE_CASE(name, code, text)                                                                          \
    case code: return text;
const char *cause_text(unsigned cause)
{
    switch (cause) {
        CAUSE_TABLE(WIRE_CASE)
    }
    return "an unknown cause";
}

const char *reason_text(unsigned reason)
{
    switch (reason) {
        REASON_TABLE(WIRE_CASE)
    }
    return "an unknown reason";
}
