/* Recordings, from memory: the bytes lie in a file that exists nowhere else, and are opened by the name that the system gives
 * it, so that the very way of a recording is gone, checks of the file and list of formats included. */
#include <stdio.h>
#include <stdlib.h>
#include <sys/mman.h>
#include <unistd.h>

#include "tests/fuzz/target.h"
#include "tests/support/any_video.h"

enum { MOST_FRAMES = 100000 };

static int memory_file(void)
{
    static int file = -1;
    if (file < 0) file = memfd_create("recording", MFD_CLOEXEC);
    g_assert_cmpint(file, >=, 0);
    return file;
}

int LLVMFuzzerTestOneInput(const uint8_t *bytes, size_t size)
{
    int file = memory_file();
    if (ftruncate(file, 0) != 0 || pwrite(file, bytes, size, 0) != (ssize_t)size) abort();
    g_autofree char *path = g_strdup_printf("/proc/self/fd/%d", file);
    rf_any_video_read(path, 1 + (int)(size % 2), MOST_FRAMES);
    return 0;
}
