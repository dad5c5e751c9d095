/* Links. The goal of this code: octets to and from a stimulator, never waiting, and never shared with another
 * program. Serial ports by libserialport; pseudo-terminals directly, since that library looks a port up in
 * sysfs and asks for modem bits. */
#include "bridge/link/link.h"

#include <errno.h>
#include <fcntl.h>
#include <libserialport.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/file.h>
#include <sys/ioctl.h>
#include <termios.h>
#include <unistd.h>

enum { MEMORY_OCTETS = 1 << 16 };

/* One direction in memory, shared by its two ends. */
struct channel {
    uint8_t octets[MEMORY_OCTETS];
    size_t head, count;
    bool closed;
    int ends;
};

struct link {
    enum link_kind kind;
    int descriptor;
    struct sp_port *port;
    struct channel *in, *out;
};

static struct link *new_link(enum link_kind kind, struct message *why)
{
    struct link *link = calloc(1, sizeof *link);
    if (!link) (void)status_fail(why, STATUS_INTERNAL, "no memory for a link");
    if (link) link->kind = kind;
    if (link) link->descriptor = -1;
    return link;
}

/* Root passes TIOCEXCL, so a lock stands beside it. */
static enum status make_exclusive(int descriptor, const char *address, struct message *why)
{
    if (flock(descriptor, LOCK_EX | LOCK_NB) != 0)
        return status_fail(why, STATUS_DEVICE, "%s is in use by another program", address);
    (void)ioctl(descriptor, TIOCEXCL);
    return STATUS_OK;
}

static enum status open_pseudo_terminal(const char *path, const char *address, struct link **made,
                                        struct message *why)
{
    const int descriptor = open(path, O_RDWR | O_NOCTTY | O_NONBLOCK | O_CLOEXEC);
    struct termios attributes;
    if (descriptor < 0)
        return status_fail(why, STATUS_DEVICE, "%s can not be opened: %s", address, strerror(errno));
    if (tcgetattr(descriptor, &attributes) != 0) {
        (void)close(descriptor);
        return status_fail(why, STATUS_DEVICE, "%s is no terminal", address);
    }
    cfmakeraw(&attributes);
    (void)tcsetattr(descriptor, TCSANOW, &attributes);
    const enum status status = make_exclusive(descriptor, address, why);
    struct link *link = status == STATUS_OK ? new_link(LINK_PSEUDO_TERMINAL, why) : NULL;
    if (!link) {
        (void)close(descriptor);
        return status == STATUS_OK ? STATUS_INTERNAL : status;
    }
    link->descriptor = descriptor;
    *made = link;
    return STATUS_OK;
}

static enum status port_fail(struct message *why, const char *address, const char *what)
{
    char *text = sp_last_error_message();
    const enum status status =
        status_fail(why, STATUS_DEVICE, "%s: %s: %s", address, what, text && *text ? text : "no such port");
    sp_free_error_message(text);
    return status;
}

static enum status open_serial(const char *path, const char *address, unsigned baud, struct link **made,
                               struct message *why)
{
    struct link *link = new_link(LINK_SERIAL, why);
    if (!link) return STATUS_INTERNAL;
    enum status status = STATUS_OK;
    if (sp_get_port_by_name(path, &link->port) != SP_OK || sp_open(link->port, SP_MODE_READ_WRITE) != SP_OK)
        status = port_fail(why, address, "can not be opened");
    else if (sp_set_baudrate(link->port, (int)baud) != SP_OK || sp_set_bits(link->port, 8) != SP_OK ||
             sp_set_parity(link->port, SP_PARITY_NONE) != SP_OK || sp_set_stopbits(link->port, 1) != SP_OK ||
             sp_set_flowcontrol(link->port, SP_FLOWCONTROL_NONE) != SP_OK)
        status = port_fail(why, address, "does not take 8 bits, no parity, one stop bit at this speed");
    else if (sp_get_port_handle(link->port, &link->descriptor) != SP_OK)
        status = port_fail(why, address, "has no handle");
    else
        status = make_exclusive(link->descriptor, address, why);
    if (status != STATUS_OK) {
        link_close(link);
        return status;
    }
    *made = link;
    return STATUS_OK;
}

enum status link_open(const char *address, unsigned baud, struct link **link, struct message *why)
{
    *link = NULL;
    if (strncmp(address, "pty:", 4) == 0) return open_pseudo_terminal(address + 4, address, link, why);
    if (strncmp(address, "serial:", 7) == 0) {
#ifdef PULSEWRIGHT_TEST_BUILD
        const char *allowed =
            getenv("PULSEWRIGHT_TEST_SERIAL"); /* a test build opens the one test link and no other port */
        if (!allowed || strcmp(allowed, address + 7) != 0)
            return status_fail(why, STATUS_REFUSED, "a TEST BUILD opens no real port (%s)", address);
#endif
        return open_serial(address + 7, address, baud, link, why);
    }
    return status_fail(why, STATUS_USAGE,
                       "\"%s\" is no address, may be serial:/dev/NAME, pty:/path or twin:", address);
}

enum status link_of_master(int descriptor, struct link **link, struct message *why)
{
    *link = new_link(LINK_PSEUDO_TERMINAL, why);
    if (!*link) return STATUS_INTERNAL;
    (*link)->descriptor = descriptor;
    return STATUS_OK;
}

enum status link_memory_pair(struct link **a, struct link **b, struct message *why)
{
    struct channel *there = calloc(1, sizeof *there), *back = calloc(1, sizeof *back);
    *a = new_link(LINK_MEMORY, why);
    *b = new_link(LINK_MEMORY, why);
    if (!*a || !*b || !there || !back) {
        free(there);
        free(back);
        free(*a);
        free(*b);
        return status_fail(why, STATUS_INTERNAL, "no memory for a link");
    }
    there->ends = back->ends = 2;
    (*a)->out = (*b)->in = there;
    (*a)->in = (*b)->out = back;
    return STATUS_OK;
}

static void leave(struct channel *channel)
{
    if (!channel) return;
    channel->closed = true;
    if (--channel->ends == 0) free(channel);
}

void link_close(struct link *link)
{
    if (!link) return;
    if (link->port) {
        (void)sp_close(link->port);
        sp_free_port(link->port);
    } else if (link->descriptor >= 0) {
        (void)close(link->descriptor);
    }
    leave(link->in);
    leave(link->out);
    free(link);
}

enum link_kind link_kind(const struct link *link)
{
    return link->kind;
}

static long read_memory(struct channel *channel, uint8_t *data, size_t size)
{
    size_t got = 0;
    for (; got < size && channel->count > 0; got++) {
        data[got] = channel->octets[channel->head];
        channel->head = (channel->head + 1) % MEMORY_OCTETS;
        channel->count--;
    }
    return got == 0 && channel->closed ? -1 : (long)got;
}

static long write_memory(struct channel *channel, const uint8_t *data, size_t size)
{
    size_t put = 0;
    if (channel->closed) return -1;
    for (; put < size && channel->count < MEMORY_OCTETS; put++)
        channel->octets[(channel->head + channel->count++) % MEMORY_OCTETS] = data[put];
    return (long)put;
}

long link_read(struct link *link, uint8_t *data, size_t size)
{
    if (link->kind == LINK_MEMORY) return read_memory(link->in, data, size);
    if (link->port) {
        const enum sp_return got = sp_nonblocking_read(link->port, data, size);
        return got < 0 ? -1 : (long)got;
    }
    const ssize_t got = read(link->descriptor, data, size);
    if (got > 0) return (long)got;
    if (got < 0 && (errno == EAGAIN || errno == EINTR)) return 0;
    return -1; /* the end of the file or EIO: the other side is gone */
}

long link_write(struct link *link, const uint8_t *data, size_t size)
{
    if (link->kind == LINK_MEMORY) return write_memory(link->out, data, size);
    if (link->port) {
        const enum sp_return put = sp_nonblocking_write(link->port, data, size);
        return put < 0 ? -1 : (long)put;
    }
    const ssize_t put = write(link->descriptor, data, size);
    if (put >= 0) return (long)put;
    return errno == EAGAIN || errno == EINTR ? 0 : -1;
}

void link_flush_output(struct link *link)
{
    if (link->kind == LINK_MEMORY) return; /* what is in memory has been sent */
    if (link->port)
        (void)sp_flush(link->port, SP_BUF_OUTPUT);
    else
        (void)tcflush(link->descriptor, TCOFLUSH);
}

int link_descriptor(const struct link *link)
{
    return link->descriptor;
}

enum status link_list_ports(void (*each)(void *context, const char *address, const char *description),
                            void *context, struct message *why)
{
    struct sp_port **ports = NULL;
    if (sp_list_ports(&ports) != SP_OK) return port_fail(why, "ports", "can not be listed");
    for (int i = 0; ports[i]; i++) {
        char address[300];
        const char *description = sp_get_port_description(ports[i]);
        (void)snprintf(address, sizeof address, "serial:%s", sp_get_port_name(ports[i]));
        each(context, address, description ? description : "");
    }
    sp_free_port_list(ports);
    return STATUS_OK;
}
