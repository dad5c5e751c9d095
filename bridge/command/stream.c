/* `pulsewright-bridge stream`: plays a signed plan on a stimulator, or rehearses one on a twin. */
#include "bridge/command/stream.h"
#include "bridge/command/commands.h"
#include "bridge/command/plans.h"
#include "bridge/command/twin_options.h"
#include "bridge/gate/gate.h"
#include "bridge/host/run.h"
#include "core/plan/plan.h"
#include "core/report/cautions.h"

#include <math.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/random.h>
#include <termios.h>
#include <unistd.h>

static const struct option options[] = {
    {"--to", "ADDRESS", "serial:/dev/NAME, pty:/path or twin: (starts one) (needed)"},
    {"--signoff", "FILE", "the approval of these pulses"},
    {"--rehearse", NULL, "on a twin, without approval: nothing is asked for"},
    {"--person", "CODE", "the person, typed again"},
    {"--record", "DB", "where the session is kept (needed on a real port)"},
    {"--strength-from", "PERCENT", "begin at this strength; raise it by hand (+), lower it (-)"},
    {"--from-contraction", "N", "take up again after a stop, at this contraction"},
    {"--mark", "TEXT", "a note (no quotes in it) that goes into the record at the start"},
    {"--flight", "FILE", "where the last frames go after a fault"},
    {"--log", "CSV", "with twin: every pulse it gave"},
    {"--faults", "FILE", "with twin: what goes wrong"},
    {"--json", NULL, "for machines"},
    PLANS_OPTIONS,
    {NULL, NULL, NULL}};

/* Keys from a terminal, octet by octet, without echo. */
static bool raw_keys(struct termios *before)
{
    if (!isatty(0) || tcgetattr(0, before) != 0) return false;
    struct termios raw = *before;
    raw.c_lflag &= ~(tcflag_t)(ICANON | ECHO);
    return tcsetattr(0, TCSANOW, &raw) == 0;
}

__attribute__((format(printf, 4, 5))) static void note(struct stream *stream, enum record_event event,
                                                       uint64_t at_us, const char *format, ...)
{
    char text[200];
    struct message why = {""};
    if (!stream->record) return;
    va_list list;
    va_start(list, format);
    (void)vsnprintf(text, sizeof text, format, list);
    va_end(list);
    if (record_event(stream->record, event, at_us, text, &why) != STATUS_OK) stream->record_failed = true;
}

static void take_event(void *context, const struct host_event *event)
{
    struct stream *stream = context;
    if (event->kind == HOST_EVENT_FORCE) {
        stream->force_n = event->force_n;
        stream->force_known = true;
        if (event->force_n > stream->peak_n) stream->peak_n = event->force_n;
        if (stream->record && record_force(stream->record, event->at_us, event->force_n) != STATUS_OK)
            stream->record_failed = true;
    }
    if (event->kind == HOST_EVENT_DELIVERED && stream->record &&
        record_pulse(stream->record, event->at_us, event->channel, event->duration_us, event->set_ua,
                     event->measured_ua) != STATUS_OK)
        stream->record_failed = true;
    if (event->kind == HOST_EVENT_PHASE && !stream->quiet) fprintf(stderr, "%s\n", event->text);
    if (event->kind == HOST_EVENT_FAULT) fprintf(stderr, "%s\n", event->text);
}

static void progress(struct stream *stream, const struct host *host)
{
    const uint64_t now_us = host_clock_us();
    if (!isatty(2) || host_phase(host) != HOST_RUNNING || now_us < stream->progress_us) return;
    stream->progress_us = now_us + 250000;
    unsigned long pulses = 0;
    for (unsigned i = 0; i < stream->image.header.channels; i++)
        pulses += host_totals(host, stream->image.header.channel[i]).pulses;
    fprintf(stderr, "\r%6.1f s  %6lu of %llu pulses  %6.1f N  strength %3u %%  (Space: stop request) ",
            (double)(now_us - host_start_host_us(host)) / 1e6, pulses,
            (unsigned long long)stream->image.header.pulses, stream->force_n, stream->ease / 10);
}

static void change_strength(struct stream *stream, struct host *host, int key)
{
    const unsigned before = stream->ease;
    if (key == '-') stream->ease = stream->ease > 100 ? stream->ease - 100 : 0;
    if (key == '+') stream->ease = stream->ease < 900 ? stream->ease + 100 : EASE_FULL;
    if (stream->ease == before) return;
    host_ease(host, EASE_ALL, stream->ease);
    note(stream, RECORD_EASE, 0, "{\"channel\": 255, \"thousandths\": %u}", stream->ease);
}

/* Marks by single keys, into the record. */
static void mark(struct stream *stream, const struct host *host, int key)
{
    static const char *const marks[] = {"spasm", "pain", "blood pressure", "skin"};
    if (key < '1' || key > '4') return;
    note(stream, RECORD_MARK, host_clock_us() - host_start_host_us(host),
         "{\"mark\": \"%s\", \"text\": \"\"}", marks[key - '1']);
    fprintf(stderr, "\nmarked: %s\n", marks[key - '1']);
}

static void ask(struct stream *stream, const char *text)
{
    if (stream->asked == text) return;
    stream->asked = text;
    fprintf(stderr, "%s\n", text);
}

/* The gate, once the device has said what it is; then the record; then the use is written down: a record
 * that can not be written costs no session. All before anything is armed. */
static bool pass_gate(struct stream *stream, struct host *host)
{
    struct gate_request request = stream->request;
    char state[200];
    request.unit_said = (const char *)host_identity(host)->identity;
    request.device_is_twin = host_identity(host)->twin;
    if (gate_may_start(&request, stream->site, gate_clock_s(), false, &stream->why) != STATUS_OK) {
        stream->status = STATUS_REFUSED;
        return false;
    }
    gate_state_text(stream->request.signoff, stream->request.rehearse, state, sizeof state);
    fprintf(stderr, "%s\n", state);
    const struct record_session session = {
        .person = stream->plan->person,
        .device = request.unit_said,
        .kind = stream->image.header.signoff == SIGNOFF_CLINICAL ? "clinical" : "rehearsal",
        .approval = state,
        .program = "pulsewright-bridge " PULSEWRIGHT_VERSION,
        .plan = stream->bytes->data,
        .plan_size = stream->bytes->size,
        .root = stream->image.root,
        .begun_s = gate_clock_s()};
    if (stream->record_path)
        stream->status = record_begin(stream->record_path, &session, &stream->record, &stream->why);
    if (stream->status == STATUS_OK)
        stream->status = gate_may_start(&request, stream->site, gate_clock_s(), true, &stream->why);
    return stream->status == STATUS_OK;
}

/* From here on 30 minutes are left to resume, or nothing is left to resume. */
static void note_end(const struct stream *stream, const struct host *host)
{
    struct message why = {""};
    if (stream->passed && gate_note_end(&stream->request, stream->site, gate_clock_s(),
                                        host_phase(host) == HOST_FINISHED, &why) != STATUS_OK)
        fprintf(stderr, "%s\n", why.text);
}

/* Three separate presses, or none in a rehearsal. */
static bool turn(void *context, struct host *host, int key)
{
    struct stream *stream = context;
    const bool enter = key == '\n' || key == '\r' || !stream->presses;
    if (key == ' ' || key == 's' || key == 'q' || key == 3 || stream->record_failed) return false;
    if (host_phase(host) == HOST_READY && !stream->passed) {
        if (stream->presses)
            ask(stream, "Connected. Check the wiring and the cautions above; Enter arms, Space stops.");
        if (!enter) return true;
        stream->passed = pass_gate(stream, host);
        if (!stream->passed) return false;
        host_arm(host);
        return true;
    }
    if (host_may_start(host) && !stream->started) {
        if (stream->ease < EASE_FULL && !stream->ease_sent) {
            stream->ease_sent = true;
            host_ease(host, EASE_ALL, stream->ease);
            return true;
        }
        if (stream->presses) ask(stream, "Armed. Enter starts the pulses, Space stops.");
        if (!enter) return true;
        note(stream, stream->request.resume ? RECORD_RESUME : RECORD_START, 0, "{\"first\": %u}",
             stream->first);
        if (argument(stream->arguments, "--mark"))
            note(stream, RECORD_MARK, 0, "{\"mark\": \"note\", \"text\": \"%.120s\"}",
                 argument(stream->arguments, "--mark"));
        stream->started = true;
        host_start(host);
        return true;
    }
    if (host_phase(host) == HOST_RUNNING) {
        change_strength(stream, host, key);
        mark(stream, host, key);
        progress(stream, host);
    }
    return true;
}

static enum status find_first(struct stream *stream, struct message *why)
{
    double number = 1;
    uint64_t start_us = 0;
    stream->first = 1;
    if (!argument_given(stream->arguments, "--from-contraction")) return STATUS_OK;
    enum status status = argument_number(stream->arguments, "--from-contraction", 1, 100000, &number);
    if (status == STATUS_OK)
        status = plan_contraction_start_us(stream->plan, 0, (unsigned)number, &start_us, why);
    while (status == STATUS_OK && stream->first + 1 < stream->image.n &&
           stream->image.segments[stream->first - 1].segment.start_us < start_us)
        stream->first++;
    stream->request.resume = number > 1;
    return status;
}

static void end_record(struct stream *stream, const struct host *host)
{
    struct message why = {""};
    char head[RECORD_HEAD_SIZE], text[400];
    if (!stream->record) return;
    const enum record_event event = host_phase(host) == HOST_FINISHED  ? RECORD_FINISHED
                                    : host_phase(host) == HOST_STOPPED ? RECORD_STOP
                                                                       : RECORD_FAULT;
    for (unsigned i = 0; i < stream->image.header.channels; i++) {
        const unsigned channel = stream->image.header.channel[i];
        const struct host_totals totals = host_totals(host, channel);
        (void)snprintf(text, sizeof text,
                       "{\"channel\": %u, \"pulses\": %lu, \"skipped\": %lu, \"charge_pc\": %llu}", channel,
                       (unsigned long)totals.pulses, (unsigned long)totals.skipped,
                       (unsigned long long)totals.charge_pc);
        (void)record_event(stream->record, RECORD_TALLY, 0, text, &why);
    }
    (void)snprintf(text, sizeof text, "{\"why\": \"%.250s\", \"exact\": %s}", host_end_text(host),
                   host_totals_exact(host) ? "true" : "false");
    (void)record_event(stream->record, event, 0, text, &why);
    if (record_end(stream->record, head, &why) == STATUS_OK)
        fprintf(stderr, "record: %s, head %s\n", stream->record_path, head);
    else
        fprintf(stderr, "record: %s\n", why.text);
    stream->record = NULL;
}

/* A fault leaves the last frames of both directions beside the record, or where --flight says. */
static void keep_flight(const struct stream *stream, const struct host *host)
{
    const char *path = argument(stream->arguments, "--flight");
    char own_path[PATH_SIZE];
    if (!path && stream->record_path) {
        (void)snprintf(own_path, sizeof own_path, "%.1000s.flight.csv", stream->record_path);
        path = own_path;
    }
    FILE *out = path ? fopen(path, "we") : NULL;
    if (!out) return;
    host_flight_write(host, out);
    (void)fclose(out);
    fprintf(stderr, "the last frames: %s\n", path);
}

static enum status run_host(struct stream *stream, struct link *link, struct message *why)
{
    struct host *host = NULL;
    struct termios before;
    struct host_options host_options = {.image = &stream->image,
                                        .first = stream->first,
                                        .baud = stream->plan->stimulator.baud,
                                        .event = take_event,
                                        .context = stream};
    if (getrandom(&host_options.nonce, sizeof host_options.nonce, 0) < 0)
        return status_fail(why, STATUS_INTERNAL, "no random numbers");
    host_options.nonce |= 1;
    if (!stream->request.rehearse) host_options.lead_us = 500000;
    enum status status = host_new(&host_options, link, host_clock_us(), &host, why);
    if (status != STATUS_OK) return status;
    const bool keys = stream->presses && raw_keys(&before);
    host_catch_signals();
    host_run(host, link, keys ? 0 : -1, turn, stream);
    if (keys) (void)tcsetattr(0, TCSANOW, &before);
    if (isatty(2)) fputc('\n', stderr);
    end_record(stream, host);
    note_end(stream, host);
    if (host_phase(host) == HOST_FAILED) keep_flight(stream, host);
    if (stream->status == STATUS_OK)
        stream->status = host_phase(host) == HOST_FAILED    ? STATUS_DEVICE
                         : host_phase(host) == HOST_STOPPED ? STATUS_REFUSED
                                                            : STATUS_OK;
    if (stream->status != STATUS_REFUSED || stream->passed) stream_summary(stream, host);
    if (stream->status == STATUS_REFUSED && stream->why.text[0]) *why = stream->why;
    status = stream->status;
    host_free(host);
    return status;
}

static enum status open_and_run(struct stream *stream, struct message *why)
{
    const char *to = argument(stream->arguments, "--to");
    char address[256];
    int process = 0;
    struct link *link = NULL;
    struct twin_documents *documents = NULL;
    enum status status = STATUS_OK;
    (void)snprintf(address, sizeof address, "%.255s", to);
    if (strcmp(to, "twin:") == 0) {
        documents = calloc(1, sizeof *documents);
        status = documents ? twin_documents_read(stream->arguments, documents, why) : STATUS_INTERNAL;
        if (status == STATUS_OK) {
            documents->options.stimulator =
                &stream->plan->stimulator; /* the very device that was planned for */
            if (!documents->options.muscle && !documents->options.hookup)
                documents->options.muscle = stream->plan->channel[0].muscle;
            status = twin_start_process(&documents->options, address, &process, why);
            twin_documents_free(documents);
        }
    }
    if (status == STATUS_OK) status = link_open(address, stream->plan->stimulator.baud, &link, why);
    if (status == STATUS_OK) {
        stream->request.link_is_real = link_kind(link) == LINK_SERIAL;
        status = run_host(stream, link, why);
    }
    link_close(link);
    twin_stop_process(process);
    free(documents);
    return status;
}

static void show_cautions(void)
{
    fprintf(stderr, "%s\n", caution_heading);
    for (size_t i = 0; i < cautions_count; i++) fprintf(stderr, "- %s\n", cautions[i].text);
}

static enum status play_one(struct stream *stream, size_t number, struct message *why)
{
    enum signoff_kind kind = stream->request.signoff ? stream->request.signoff->kind : SIGNOFF_REHEARSAL;
    stream->plan = &stream->plans.plan[number];
    stream->bytes = &stream->plans.bytes[number];
    enum status status =
        image_of_plan(stream->plan, stream->request.signoff ? stream->request.signoff->unit : NULL, kind,
                      &stream->image, why);
    if (status != STATUS_OK) return status;
    stream->request.image = &stream->image;
    stream->request.plan_digest = stream->bytes->digest;
    stream->request.has_record = stream->record_path != NULL;
    stream->presses = kind == SIGNOFF_CLINICAL;
    stream->passed = stream->started = stream->ease_sent = false;
    if (stream->presses && !isatty(0))
        status = status_fail(why, STATUS_REFUSED, "pulses for a person are started by hand, at a terminal");
    if (status == STATUS_OK) status = find_first(stream, why);
    if (status == STATUS_OK && stream->presses) show_cautions();
    if (status == STATUS_OK) status = open_and_run(stream, why);
    image_free(&stream->image);
    return status;
}

static enum status prepare(struct stream *stream, struct signoff_file *file, struct message *why)
{
    const struct arguments *arguments = stream->arguments;
    double strength = 100;
    stream->request.rehearse = argument_given(arguments, "--rehearse");
    stream->request.person = argument(arguments, "--person");
    stream->record_path = argument(arguments, "--record");
    stream->quiet = argument_given(arguments, "--json");
    if (!argument(arguments, "--to")) return status_fail(why, STATUS_USAGE, "--to ADDRESS is missing");
    if (stream->request.rehearse == argument_given(arguments, "--signoff"))
        return status_fail(why, STATUS_USAGE, "one of --signoff FILE and --rehearse is needed");
    if (stream->request.rehearse && strncmp(argument(arguments, "--to"), "serial:", 7) == 0)
        return status_fail(why, STATUS_REFUSED,
                           "a rehearsal never plays on a real port: --rehearse takes pty: or twin:");
    enum status status = argument_number(arguments, "--strength-from", 0, 100, &strength);
    stream->ease = (unsigned)lround(strength * 10);
    const char *words = argument(arguments, "--mark");
    if (words && (strpbrk(words, "\"\\") || strlen(words) > 120))
        return status_fail(why, STATUS_USAGE, "--mark may hold up to 120 characters without quotes");
    if (status == STATUS_OK) status = plans_add(&stream->plans, arguments->positional[0], arguments, why);
    if (status == STATUS_OK && argument_given(arguments, "--signoff")) {
        status = signoff_read(argument(arguments, "--signoff"), file, why);
        if (status == STATUS_OK) stream->request.signoff = &file->signoff;
        struct message no_site = {""};
        if (status == STATUS_OK && site_load_installed(stream->site_memory, &no_site) == STATUS_OK)
            stream->site = stream->site_memory;
        if (status == STATUS_OK && !stream->site && file->signoff.kind == SIGNOFF_CLINICAL)
            status = status_fail(why, STATUS_REFUSED, "%s", no_site.text);
    }
    return status;
}

static enum status run(const struct arguments *arguments)
{
    struct message why = {""};
    if (keys_begin(&why) != STATUS_OK) return command_fail(arguments, STATUS_INTERNAL, "%s", why.text);
    struct stream *stream = calloc(1, sizeof *stream);
    struct signoff_file *file = calloc(1, sizeof *file);
    struct site *site = calloc(1, sizeof *site);
    enum status status = stream && file && site ? STATUS_OK : status_fail(&why, STATUS_INTERNAL, "no memory");
    if (status == STATUS_OK) {
        stream->arguments = arguments;
        stream->site_memory = site;
        status = prepare(stream, file, &why);
        for (size_t p = 0; status == STATUS_OK && p < stream->plans.plans; p++)
            status = play_one(stream, p, &why);
        plans_free(&stream->plans);
        signoff_file_free(file);
    }
    free(site);
    free(file);
    free(stream);
    if (status != STATUS_OK && why.text[0]) return command_fail(arguments, status, "%s", why.text);
    return status;
}

const struct command command_stream = {
    .name = "stream",
    .usage = "(PLAN|TRAIN|DIR) --to ADDRESS (--signoff FILE | --rehearse) [--person CODE] [--record DB] "
             "[--strength-from PERCENT] [--from-contraction N]",
    .summary = "plays signed pulses on a stimulator, or rehearses them on a twin",
    .help = "For a person: the sign-off is verified, the person's code typed again, cautions shown; Enter "
            "arms, Enter starts. While it\n"
            "plays: Space is a stop request, - lowers the strength, + raises it back to at most what was "
            "signed, 1 to 4 mark spasm, pain, blood pressure, skin. Output ends within\n"
            "0.2 s when this program or the cable is gone. The emergency stop is a switch in series with the "
            "output.\n"
            "Exit 0: every pulse given; 3: refused, or stopped on request; 5: a fault of device or link, "
            "with its cause.",
    .options = options,
    .positional_least = 1,
    .positional_most = 1,
    .run = run};
