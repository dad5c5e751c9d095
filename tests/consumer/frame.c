/* A stranger's program on the bridge's library: the frames' checksum and the byte stuffing, installed.
 * Sources: the check value of CRC-32C for "123456789" is 0xE3069283 (as the wire's definition states it);
 * COBS of 11 22 00 33 is 03 11 22 02 33 (the rule of Cheshire and Baker 1999, worked by hand). */
#include "bridge/wire/frame.h"

#include <stdio.h>
#include <string.h>

int main(void)
{
    const uint8_t digits[] = {'1', '2', '3', '4', '5', '6', '7', '8', '9'};
    const uint8_t plain[] = {0x11, 0x22, 0x00, 0x33}, stuffed[] = {0x03, 0x11, 0x22, 0x02, 0x33};
    uint8_t out[8];
    const uint32_t crc = crc32c(0, digits, sizeof digits);
    const size_t size = cobs_encode(plain, sizeof plain, out);
    printf("crc %08X, %zu octets\n", crc, size);
    return !(crc == 0xE3069283U && size == sizeof stuffed && memcmp(out, stuffed, size) == 0);
}
