/* The device: force. The goal of this code: a signed cap is checked at each reading, and a sensor that falls
 * silent while a cap is signed ends the output. Readings go to the host five in a frame. Freestanding. */
#include "bridge/stimulator/device.h"

#include "bridge/wire/octets.h"
#include <string.h>

static uint32_t lowest_cap(const struct device *device)
{
    uint32_t cap = 0;
    for (unsigned i = 0; i < IMAGE_CHANNELS_MAX; i++)
        if (device->channel[i].used && device->channel[i].force_cap_mn &&
            (cap == 0 || device->channel[i].force_cap_mn < cap))
            cap = device->channel[i].force_cap_mn;
    return cap;
}

static void report_reading(struct device *device, int32_t force_mn)
{
    if (device->readings == 0) {
        memset(&device->sample, 0, sizeof device->sample);
        device->sample.time_us = device->now_us;
    }
    uint64_t dt = (device->now_us - device->sample.time_us) / 10;
    if (dt > UINT16_MAX) dt = UINT16_MAX;
    size_t at = 12u * device->readings++;
    at = octets_put(device->sample.readings, at, dt, 2);
    at = octets_put(device->sample.readings, at, (uint32_t)force_mn, 4);
    (void)octets_put(device->sample.readings, at, 0, 6); /* no crank here */
    if (device->readings < SAMPLE_READINGS) return;
    device->readings = 0;
    (void)device_send(device, MESSAGE_SAMPLE, device->out_sequence++, &device->sample);
}

void device_sense(struct device *device)
{
    int32_t force_mn = 0;
    if (device->now_us < device->force_due_us) return;
    device->force_due_us = device->now_us + DEVICE_FORCE_EVERY_US;
    const bool present = device->build->force_sensor &&
                         device->platform->force(device->platform->context, device->now_us, &force_mn);
    const uint32_t cap_mn = device->build->force_sensor ? lowest_cap(device) : 0;
    if (present) {
        device->force_seen_us = device->now_us;
        report_reading(device, force_mn);
        if (cap_mn && force_mn > 0 && (uint32_t)force_mn > cap_mn) device_fault(device, CAUSE_FORCE, 0, NULL);
    } else if (cap_mn && device->now_us - device->force_seen_us >= DEVICE_FORCE_SILENT_US) {
        device_fault(device, CAUSE_SENSOR, 0, NULL);
    }
}
