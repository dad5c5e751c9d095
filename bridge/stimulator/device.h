/* Device: the stimulator's side of the link. Safe, limited, arming, armed, running; each pulse checked
 * against the locked limits just before it is given; a lease that the host renews. The code is handed `now`
 * (us since its reset, only growing) and never reads a clock. Freestanding: no heap, no floating point. One
 * struct holds it all. */
#ifndef PULSEWRIGHT_BRIDGE_STIMULATOR_DEVICE_H
#define PULSEWRIGHT_BRIDGE_STIMULATOR_DEVICE_H
#include "bridge/stimulator/platform.h"
#include "bridge/wire/image.h"
#include "bridge/wire/message.h"
#include "core/dose/dose.h"
#include "core/train/segment.h"

enum device_state { DEVICE_SAFE, DEVICE_LIMITED, DEVICE_ARMING, DEVICE_ARMED, DEVICE_RUNNING };

enum {
    DEVICE_QUEUE_MAX = 128,
    DEVICE_ANSWERS = 16,
    DEVICE_CLOCKS_SENT = 64,
    DEVICE_SETTLE_US = 1000000, /* after a reset, before limits */
    DEVICE_ARMING_US_MAX = 5000000,
    DEVICE_ARMED_US_MAX = 120000000,
    DEVICE_LEASE_US = 200000,
    DEVICE_LATE_US_MAX = 1000,
    DEVICE_START_US_LEAST = 50000,
    DEVICE_START_US_MOST = 2000000,
    DEVICE_DAMAGED_MAX = 8,  /* in one second */
    DEVICE_HELD_US = 200000, /* how new "held" has to be */
    DEVICE_FORCE_EVERY_US = 10000,
    DEVICE_FORCE_SILENT_US = 100000,
    DEVICE_TALLY_EVERY_US = 200000,
    DEVICE_MEASURED_OFF_MAX = 3 /* pulses in a row */
};

/* What this device is; constant. */
struct device_build {
    struct image_identity identity;
    uint16_t version;
    uint16_t queue_segments; /* at most DEVICE_QUEUE_MAX */
    bool twin;               /* takes the rehearsal kind, refuses the clinical one */
    bool takes_both;         /* a test build's twin may take both */
    bool virtual_clock;
    bool force_sensor;
    struct dose_limits own_limits; /* of the hardware, a channel */
};

struct device_channel {
    bool used; /* in the armed image */
    bool limited;
    struct dose_limits limits;
    struct dose_channel dose; /* kept over sessions; cleared by a reset only */
    bool active;              /* a segment is under way */
    struct segment_cursor cursor;
    struct pulse next; /* its next pulse, on the device's clock */
    uint16_t ease;     /* thousandths */
    bool eased;        /* below full at some time in this run: slew lowers then */
    uint32_t pulses, skipped;
    uint64_t charge_pc;
    uint8_t measured_off;
    uint32_t force_cap_mn;
};

struct device {
    const struct device_build *build;
    const struct platform *platform;
    enum device_state state;
    enum device_cause cause;
    uint64_t boot, boot_us, now_us;
    /* session */
    uint64_t nonce_hello;
    uint32_t session;
    bool greeted, any_sequence;
    uint16_t newest_sequence, out_sequence;
    struct {
        bool known;
        struct frame answer;
    } answer[DEVICE_ANSWERS];
    struct frame_reader reader;
    uint64_t damaged_us[DEVICE_DAMAGED_MAX];
    uint8_t damaged_at;
    uint32_t damaged_seen;
    /* image */
    uint8_t limits_stated, limits_count;
    struct image_header header;
    uint32_t n, first, next_index;
    uint8_t h0[IMAGE_LINK_SIZE], link[IMAGE_LINK_SIZE];
    uint64_t arm_nonce, until_us; /* until_us: of arming, armed */
    uint64_t lease_us;
    uint64_t sent_us[DEVICE_CLOCKS_SENT]; /* clocks sent in this session: what an echo may be */
    uint8_t sent_at;
    uint64_t person_digest;
    bool any_person;
    /* segments not yet under way */
    struct image_segment queue[DEVICE_QUEUE_MAX];
    uint16_t queue_head, queue_count;
    bool end_held;
    uint64_t end_us, newest_start_us;
    /* running */
    uint64_t t0_us;                                                /* device clock of image time 0 */
    uint64_t last_pulse_us, busy_until_us[IMAGE_CHANNELS_MAX + 1]; /* by return group; 0: the whole device */
    uint64_t held_us;
    bool held;
    uint64_t force_due_us, force_seen_us, tally_due_us;
    uint8_t readings;
    struct message_sample sample;
    struct device_channel channel[IMAGE_CHANNELS_MAX]; /* of channel i + 1 */
};

/* A reset: everything forgotten, outputs zero. `build` and `platform` outlive the device. */
void device_init(struct device *device, const struct device_build *build, const struct platform *platform,
                 uint64_t now_us);
/* Octets from the host, at now. */
void device_octets(struct device *device, uint64_t now_us, const uint8_t *octets, size_t size);
/* Runs what is due at now: pulses in order, time-outs, lease, sensors, reports. Call at device_next_us at the
 * latest. */
void device_step(struct device *device, uint64_t now_us);
/* When it next has something to do (UINT64_MAX: nothing but octets). */
uint64_t device_next_us(const struct device *device);

/* Between the parts of the device's own code. */
void device_fault(struct device *device, enum device_cause cause, uint8_t channel,
                  const struct dose_verdict *verdict);
void device_make_safe(struct device *device, enum device_cause cause);
bool device_send(struct device *device, uint8_t type, uint16_t sequence, const void *message);
void device_send_tally(struct device *device, uint8_t only_channel);
void device_take_request(struct device *device, const struct frame *frame);
enum refusal_reason device_take_segment(struct device *device, const struct message_segment *message,
                                        uint32_t *detail);
void device_run_pulses(struct device *device);
void device_sense(struct device *device);

#endif
