/* Link: octets to and from a stimulator. Three transports behind one small table: a serial port
 * (libserialport), a local pseudo-terminal, and a pair in memory for tests on a simulated clock. */
#ifndef PULSEWRIGHT_BRIDGE_LINK_LINK_H
#define PULSEWRIGHT_BRIDGE_LINK_LINK_H
#include "core/status/status.h"
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

struct link;

enum link_kind { LINK_SERIAL, LINK_PSEUDO_TERMINAL, LINK_MEMORY };

/* Opens an address: `serial:/dev/ttyACM0`, `pty:/path`. Exclusive: TIOCEXCL and flock. (`twin:` is
 * bridge/twin's: it starts one and gives its pty.) */
enum status link_open(const char *address, unsigned baud, struct link **link, struct message *why);
/* The other end of a pseudo-terminal, for a twin; takes the descriptor. */
enum status link_of_master(int descriptor, struct link **link, struct message *why);
/* Two ends in memory. */
enum status link_memory_pair(struct link **a, struct link **b, struct message *why);
void link_close(struct link *link);
enum link_kind link_kind(const struct link *link);
/* Takes what is there, at most size octets, without waiting: the count, 0 for none, -1 once the other side is
 * gone. */
long link_read(struct link *link, uint8_t *data, size_t size);
/* Gives as much as fits now, without waiting: the count, -1 once the other side is gone. */
long link_write(struct link *link, const uint8_t *data, size_t size);
/* Throws away what is not yet sent. */
void link_flush_output(struct link *link);
/* A descriptor for poll; -1 for memory. */
int link_descriptor(const struct link *link);
/* The ports of this machine, one line each ("serial:/dev/ttyACM0  description"), for `ports`. */
enum status link_list_ports(void (*each)(void *context, const char *address, const char *description),
                            void *context, struct message *why);

#endif
