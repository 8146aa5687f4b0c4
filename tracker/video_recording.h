/* What an opened recording consists of; for video_file.c, video_part.c and video_reader.c alone. */
#pragma once

#include "tracker/frame_clock.h"
#include "tracker/frame_index.h"
#include "tracker/libav.h"
#include "tracker/video_file.h"
#include "tracker/video_luma.h"

/* ---- one file of a recording (video_part.c) ---- */

typedef struct {
    char *path;
    RfFrameIndex *index;
    RfFrameClock clock;
    int64_t first_frame; /* of this file, in the recording */
    int64_t packets;     /* of its video stream */
    double offset_s;     /* of its first frame, on the recording's clock */
    double last_duration_s;
    double promised_s; /* length that the file's header states; 0: it states none */
} RfVideoPart;

/* Opens it, reads all its packets and closes it again. */
RfVideoPart *rf_video_part_open(const char *path, RfVideoInfo *info, GError **error);
void rf_video_part_free(RfVideoPart *part);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfVideoPart, rf_video_part_free)

/* ---- the recording (video_file.c) ---- */

typedef struct {
    int part;
    int entry;          /* of the part's index; -1: begin at the file's first packet */
    int64_t first, end; /* frames delivered: [first, end) */
} RfVideoStretch;

typedef struct {
    int part, entry;
    int64_t frame;
} RfVideoKeyframe;

struct RfVideoFile {
    GPtrArray *parts; /* of RfVideoPart */
    RfVideoInfo info;
    RfVideoOptions options;
    GArray *stretches;    /* of RfVideoStretch */
    GArray *keyframes;    /* of RfVideoKeyframe: every entry, whether in use or not */
    int keyframes_before; /* of these before start_s, and how many in [start_s, stop_s) */
    int keyframes_used;
    int64_t first, end; /* frames in use */
};

static inline RfVideoPart *rf_video_file_part(const RfVideoFile *file, int number)
{
    return g_ptr_array_index(file->parts, number);
}

/* index/rate where the user gave a rate, else what the timestamps say. */
static inline double rf_video_file_own_time_s(const RfVideoFile *file, int64_t index, double by_timestamps_s)
{
    double rate_hz = file->options.frame_rate_hz.value;
    return rate_hz > 0 ? (double)index / rate_hz : by_timestamps_s;
}

/* ---- the reader (video_reader.c) ---- */

struct RfVideoReader {
    const RfVideoFile *file;
    RfDemuxer *demuxer; /* of `part` */
    RfDecoder *decoder;
    RfPacket packet;
    RfPicture picture;
    int part, threads;
    int64_t next_packet; /* number of the packet to be sent next: `packet` if held, else the demuxer's next */
    int64_t stop_packet; /* none is sent from here on */
    bool has_packet;
    int64_t next, end; /* index of the frame to come, and of the first one not to deliver */
    int64_t skip_to;   /* frames before this index are decoded and dropped */
    RfFrameTimer timer;
    RfVideoStretch from; /* where the decoder was started, and what was known then */
    int64_t from_next;
    RfFrameTimer from_timer;
    RfLumaRows scratch;
    RfVideoFaults faults;
};

RfVideoReader *rf_video_reader_at(const RfVideoFile *file, const RfVideoStretch *stretch, int threads,
                                  GError **error);
