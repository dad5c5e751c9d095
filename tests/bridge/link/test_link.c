/* Links: a pair in memory, a pseudo-terminal, and the libserialport transport driven for real. libserialport
 * 0.1.1 looks a port up in sysfs and asks for modem bits, which a pseudo-terminal has not: a symbolic link
 * whose name begins with /dev/ and climbs out passes the look-up, and this test's own ioctl answers TIOCMGET
 * and TIOCMSET with success. */
#include "bridge/link/link.h"
#include "support/near.h"

#include <fcntl.h>
#include <stdio.h>
#include <stdlib.h>
#include <string.h>
#include <sys/ioctl.h>
#include <sys/syscall.h>
#include <termios.h>
#include <unistd.h>

/* In place of the C library's, for this program and the libraries it loads. */
int ioctl(int descriptor, unsigned long request, ...)
{
    va_list list;
    va_start(list, request);
    void *argument = va_arg(list, void *);
    va_end(list);
    if (request == TIOCMGET) {
        *(int *)argument = 0;
        return 0;
    }
    if (request == TIOCMSET || request == TIOCMBIS || request == TIOCMBIC) return 0;
    return (int)syscall(SYS_ioctl, descriptor, request, argument);
}

struct terminal {
    int master, slave;
    char name[128];
};

static struct terminal open_terminal(void)
{
    struct terminal terminal = {.master = posix_openpt(O_RDWR | O_NOCTTY)};
    struct termios raw;
    assert_true(terminal.master >= 0);
    assert_int_equal(grantpt(terminal.master), 0);
    assert_int_equal(unlockpt(terminal.master), 0);
    assert_int_equal(ptsname_r(terminal.master, terminal.name, sizeof terminal.name), 0);
    terminal.slave = open(terminal.name, O_RDWR | O_NOCTTY);
    assert_int_equal(tcgetattr(terminal.slave, &raw), 0);
    cfmakeraw(&raw);
    assert_int_equal(tcsetattr(terminal.slave, TCSANOW, &raw), 0);
    return terminal;
}

/* Every octet value, both ways. */
static void carries_every_octet(struct link *link, int other_end)
{
    uint8_t out[256], in[256];
    size_t got = 0;
    for (int i = 0; i < 256; i++) out[i] = (uint8_t)i;
    assert_int_equal(link_write(link, out, sizeof out), (long)sizeof out);
    while (got < sizeof in) {
        const ssize_t some = read(other_end, in + got, sizeof in - got);
        assert_true(some > 0);
        got += (size_t)some;
    }
    assert_memory_equal(in, out, sizeof out);
    assert_int_equal(write(other_end, out, sizeof out), (ssize_t)sizeof out);
    got = 0;
    for (int tries = 0; got < sizeof in && tries < 1000; tries++) {
        const long some = link_read(link, in + got, sizeof in - got);
        assert_true(some >= 0);
        got += (size_t)some;
        if (some == 0) (void)usleep(1000);
    }
    assert_int_equal(got, sizeof in);
    assert_memory_equal(in, out, sizeof out);
    assert_int_equal(link_read(link, in, sizeof in), 0); /* nothing there: it does not wait */
}

static void pseudo_terminal_carries_every_octet_and_is_not_shared(void **state)
{
    (void)state;
    struct terminal terminal = open_terminal();
    struct link *link = NULL, *second = NULL;
    struct message why = {""};
    char address[160];
    (void)snprintf(address, sizeof address, "pty:%s", terminal.name);
    assert_status(link_open(address, 115200, &link, &why), STATUS_OK, &why);
    carries_every_octet(link, terminal.master);
    assert_int_equal(link_open(address, 115200, &second, &why), STATUS_DEVICE);
    assert_non_null(strstr(why.text, "in use"));
    close(terminal.slave);
    close(terminal.master); /* unplugged */
    uint8_t octet;
    assert_int_equal(link_read(link, &octet, 1), -1);
    link_close(link);
}

static void serial_transport_carries_every_octet_and_is_not_shared(void **state)
{
    (void)state;
    struct link *link = NULL, *second = NULL;
    struct message why = {""};
    char folder[256], name[300], path[400], address[420];
    if (access("/sys/class/tty", F_OK) != 0) { /* the library's look-up needs sysfs */
        print_message("skipped: no /sys/class/tty on this machine\n");
        skip();
    }
    struct terminal terminal = open_terminal();
    assert_non_null(getcwd(folder, sizeof folder));
    (void)snprintf(name, sizeof name, "%s/serial-%ld", folder, (long)getpid());
    assert_int_equal(symlink(terminal.name, name), 0);
    (void)snprintf(path, sizeof path, "/dev/../../..%s", name);
    (void)snprintf(address, sizeof address, "serial:%s", path);
    assert_int_equal(setenv("PULSEWRIGHT_TEST_SERIAL", path, 1),
                     0); /* a test build opens the one test link */
    assert_status(link_open(address, 115200, &link, &why), STATUS_OK, &why);
    assert_int_equal(link_kind(link), LINK_SERIAL);
    carries_every_octet(link, terminal.master);
    assert_int_equal(link_open(address, 115200, &second, &why), STATUS_DEVICE);
    link_close(link);
    (void)unlink(name);
    close(terminal.slave);
    close(terminal.master);
}

static void memory_pair_carries_octets_until_an_end_is_closed(void **state)
{
    (void)state;
    struct link *a = NULL, *b = NULL;
    struct message why;
    uint8_t in[8];
    assert_status(link_memory_pair(&a, &b, &why), STATUS_OK, &why);
    assert_int_equal(link_write(a, (const uint8_t *)"abc", 3), 3);
    assert_int_equal(link_read(b, in, sizeof in), 3);
    assert_memory_equal(in, "abc", 3);
    assert_int_equal(link_read(b, in, sizeof in), 0);
    link_close(a);
    assert_int_equal(link_read(b, in, sizeof in), -1);
    assert_int_equal(link_write(b, in, 1), -1);
    link_close(b);
}

static void addresses_that_are_none_are_told(void **state)
{
    (void)state;
    struct link *link = NULL;
    struct message why;
    assert_int_equal(link_open("COM1", 115200, &link, &why), STATUS_USAGE);
    assert_non_null(strstr(why.text, "pty:/path"));
    assert_int_equal(link_open("pty:/dev/null", 115200, &link, &why), STATUS_DEVICE);
    assert_int_equal(link_open("pty:/nowhere", 115200, &link, &why), STATUS_DEVICE);
    assert_null(link);
}

int main(void)
{
    const struct CMUnitTest tests[] = {
        cmocka_unit_test(pseudo_terminal_carries_every_octet_and_is_not_shared),
        cmocka_unit_test(serial_transport_carries_every_octet_and_is_not_shared),
        cmocka_unit_test(memory_pair_carries_octets_until_an_end_is_closed),
        cmocka_unit_test(addresses_that_are_none_are_told),
    };
    return cmocka_run_group_tests(tests, NULL, NULL) != 0;
}
