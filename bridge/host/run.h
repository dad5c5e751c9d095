/* A host on the real clock: one loop around link, keys and signals. */
#ifndef PULSEWRIGHT_BRIDGE_HOST_RUN_H
#define PULSEWRIGHT_BRIDGE_HOST_RUN_H
#include "bridge/host/host.h"

/* What the loop asks at each turn, at most every 20 ms; returns false: stop. May call host_arm, host_start,
 * host_ease. key: 0, or what was typed. */
typedef bool (*host_turn)(void *context, struct host *host, int key);
uint64_t host_clock_us(void); /* CLOCK_MONOTONIC */
/* SIGINT, SIGTERM and SIGHUP become stop requests from here on. */
void host_catch_signals(void);
/* Runs until the host is over. key_descriptor: a terminal to read keys from, or -1. */
void host_run(struct host *host, struct link *link, int key_descriptor, host_turn turn, void *context);

#endif
