/* Decodes a recording with libav's own threads and throws the frames away: the floor that everything else is measured
 * against. Arguments: recording, threads (2). */
#include <stdio.h>
#include <stdlib.h>

#include "tracker/video_file.h"

static bool decode(const char *path, int threads, long *frames, GError **error)
{
    const char *paths[] = {path, NULL};
    g_autoptr(RfVideoFile) file = rf_video_file_open(paths, NULL, error);
    if (!file) return false;
    g_autoptr(RfVideoReader) reader = rf_video_file_reader_new(file, threads, error);
    if (!reader) return false;
    RfFrame frame;
    RfVideoStep step;
    while ((step = rf_video_file_next(reader, &frame, error)) == RF_VIDEO_FRAME) ++*frames;
    return step == RF_VIDEO_END;
}

int main(int argc, char **argv)
{
    g_autoptr(GError) error = NULL;
    long frames = 0;
    int threads = argc > 2 ? atoi(argv[2]) : 2;
    if (argc < 2 || threads < 1) {
        fprintf(stderr, "usage: decode_only RECORDING [THREADS]\n");
        return 2;
    }
    if (!decode(argv[1], threads, &frames, &error)) {
        fprintf(stderr, "decode_only: %s\n", error->message);
        return 1;
    }
    printf("%ld frames\n", frames);
    return 0;
}
