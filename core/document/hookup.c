/* Hookup documents: which channel drives what. */
#include "core/document/hookup.h"

#include "core/document/fields.h"
#include "core/document/schemas.h"
#include <stdio.h>

typedef struct hookup_channel HC;

static const struct field channel_fields[] = {
    COUNT_NEEDED(HC, channel, "channel", 1, STIMULATOR_CHANNELS_MAX, "the stimulator's channel"),
    CODE_NEEDED(HC, muscle, "muscle", "a muscle of the profile"),
    CODE(HC, side, "side", "left or right"),
    NUMBER_ABOVE(HC, pad_cm2, "pad_cm2", 0, 2000, "area of the pad, cm2"),
    NUMBER_ABOVE(HC, return_pad_cm2, "return_pad_cm2", 0, 2000, "area of the return pad, cm2"),
    LAST};
static const struct schema channel_schema = {
    .name = "a channel", .size = sizeof(HC), .flow = true, .fields = channel_fields};

static const struct field hookup_fields[] = {CODE_NEEDED(struct hookup, person, "person", "a code, no name"),
                                             ARRAY_NEEDED(struct hookup, channel, channels, "channels",
                                                          &channel_schema, 1, STIMULATOR_CHANNELS_MAX,
                                                          "what each channel drives"),
                                             LAST};

static enum status check_hookup(struct reading *reading, const char *path, void *object)
{
    const struct hookup *hookup = object;
    char key[64];
    (void)path;
    for (size_t i = 0; i < hookup->channels; i++)
        for (size_t j = 0; j < i; j++) {
            if (hookup->channel[i].channel != hookup->channel[j].channel) continue;
            (void)snprintf(key, sizeof key, "channels[%zu].channel", i);
            return schema_fault(reading, key, "holds channel %u a second time, each may stand once",
                                hookup->channel[i].channel);
        }
    return STATUS_OK;
}
const struct schema hookup_schema = {
    .name = "a hookup", .size = sizeof(struct hookup), .fields = hookup_fields, .check = check_hookup};

enum status hookup_parse(const struct document_bytes *bytes, struct hookup *hookup, struct message *why)
{
    return schema_parse(&hookup_schema, document_kind_format(DOCUMENT_HOOKUP), bytes, hookup, why);
}

enum status hookup_load(const char *path, struct hookup *hookup, struct message *why)
{
    struct document_bytes bytes;
    enum status status = document_read_bytes(path, &bytes, why);
    if (status != STATUS_OK) return status;
    status = hookup_parse(&bytes, hookup, why);
    document_bytes_free(&bytes);
    return status;
}

void hookup_print(const struct hookup *hookup, struct text_out *out)
{
    schema_print(&hookup_schema, document_kind_format(DOCUMENT_HOOKUP), hookup, out);
}
