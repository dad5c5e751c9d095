/* Platform: what a board (or the twin) provides to the device code. Every call is short; none waits. */
#ifndef PULSEWRIGHT_BRIDGE_STIMULATOR_PLATFORM_H
#define PULSEWRIGHT_BRIDGE_STIMULATOR_PLATFORM_H
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct platform {
    void *context;
    /* Gives one pulse now on channel 1 ..; hardware times both phases. false: the output stage refused it. */
    bool (*pulse)(void *context, uint64_t now_us, uint8_t channel, uint32_t current_ua, uint16_t duration_us,
                  uint16_t interphase_us);
    /* Peak current of the last pulse of a channel, uA; false: absent. */
    bool (*measured)(void *context, uint8_t channel, uint32_t *current_ua);
    /* Force in mN; false: absent or at an end of its range. */
    bool (*force)(void *context, uint64_t now_us, int32_t *force_mn);
    /* true: closed, output allowed. */
    bool (*interlock)(void *context);
    /* Never repeats, also over resets. */
    uint64_t (*fresh64)(void *context);
    /* Octets to the host; what does not fit is lost (the host asks again). */
    void (*send)(void *context, const uint8_t *octets, size_t size);
    /* All outputs zero at the next pulse boundary (a begun pulse finishes its balancing phase). */
    void (*silence)(void *context);
    void (*watchdog)(void *context); /* fed at each step; 100 ms */
};

#endif
