/* twinhorizon: linear stability of sonic horizon pairs in Bose-Einstein condensates
 * SPDX-License-Identifier: GPL-3.0-or-later
 *
 * Bytes as a file with a path, for readers that take paths (Linux). */
#ifndef TESTS_FUZZ_MEMORY_FILE_H
#define TESTS_FUZZ_MEMORY_FILE_H

#include <stdint.h>
#include <stdio.h>
#include <stdlib.h>
#include <sys/mman.h>
#include <unistd.h>

int LLVMFuzzerTestOneInput(const uint8_t *data, size_t size);

/* One file for the whole run; returns its path. */
static inline const char *memory_file(const uint8_t *data, size_t size)
{
    static char path[64];
    static int fd = -1;

    if (fd < 0) {
        fd = memfd_create("fuzz", 0);
        (void)snprintf(path, sizeof path, "/proc/self/fd/%d", fd);
    }
    if (fd < 0 || ftruncate(fd, 0) != 0 || pwrite(fd, data, size, 0) != (ssize_t)size)
        abort();
    return path;
}

#endif
