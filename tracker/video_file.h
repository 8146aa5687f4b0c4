/* Recordings, stills and clips on disk: the only door to libav. A recording is opened once
 * (rf_video_file_open reads every packet, decodes next to nothing) and is immutable from then on; any number
 * of readers, one per thread, decode it or independent stretches of it. Not for anything that looks at
 * pixels: that starts at RfFrame.
 *
 * Local files in self-contained formats only: playlists, concat scripts, image patterns and network addresses
 * are refused. Nothing is printed; libav's last complaint ends our messages. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "calib/units.h"
#include "tracker/frame.h"

#define RF_VIDEO_MAX_SIDE_PX 16384
#define RF_VIDEO_MAX_PIXELS (INT64_C(1) << 28)

typedef enum {
    RF_VIDEO_ERROR_ABSENT,      /* no such file, not a regular file, may not be read */
    RF_VIDEO_ERROR_NOT_VIDEO,   /* empty, text, audio only, a format that is refused */
    RF_VIDEO_ERROR_UNSUPPORTED, /* a video, but no decoder, or a size or pixel layout out of range */
    RF_VIDEO_ERROR_DAMAGED,     /* nothing in it can be decoded */
    RF_VIDEO_ERROR_CHANGED,     /* size or depth changes midway, or between the files of one recording */
    RF_VIDEO_ERROR_ENCODER,     /* the writer: options the encoder refuses */
    RF_VIDEO_ERROR_WRITE,       /* the writer: disk full, folder absent */
    RF_VIDEO_ERROR_CANCELLED,   /* the frame feed: stopped on request */
} RfVideoError;

#define RF_VIDEO_ERROR (rf_video_error_quark())
GQuark rf_video_error_quark(void);

/* ---- a recording ---- */

typedef struct RfVideoFile RfVideoFile; /* immutable; safe from any thread */

typedef struct {
    double start_s,
        stop_s; /* part to use, [start, stop) on the recording's own clock; stop_s <= 0: to the end */
    RfValue frame_rate_hz; /* > 0: frame n is at n/rate whatever the timestamps say; 0: use the timestamps */
} RfVideoOptions;

typedef struct {
    int width, height;   /* stored pixels */
    double pixel_aspect; /* width of a stored pixel over its height; 1 where the file doesn't say */
    int bit_depth;       /* of the luma lent, 8..16 */
    bool is_interlaced, is_top_field_first, is_limited_range;
    bool is_converted;     /* the source has no luma plane of its own (packed or RGB): converted row by row */
    bool is_lossless;      /* the codec can't have altered the picture */
    const char *codec;     /* "h264" */
    const char *container; /* "matroska,webm" */
    double frame_rate_hz;  /* mean */
    bool is_rate_constant; /* every frame at a multiple of 1/rate, none left out */
    double tick_s;         /* resolution of the file's timestamps */
    double duration_s;     /* first frame's time to the last one's plus its duration; the whole recording */
    int64_t frames;        /* in the whole recording, by its packets: exact if is_indexed, else an estimate */
    int64_t frames_used;   /* of these in [start_s, stop_s): what a progress bar counts to */
    bool is_indexed; /* frame times and indices are known before decoding, and stretches can be decoded alone
                      */
    double missing_s; /* the files' headers promise that much more: they were cut short */
    int files;
    int64_t packets_damaged; /* marked broken by the container */
    int64_t times_missing; /* frames without a timestamp: placed one mean interval after their predecessor */
    int64_t times_backwards; /* timestamps that went back, or ahead by more than an hour: the same */
    int64_t gaps; /* intervals of more than 1.5 mean intervals where the rate is constant otherwise */
} RfVideoInfo;

/* `paths` ends with NULL; several files are one recording in that order: the next begins where the last frame
 * of the one before ends. Sizes and depths must agree. `options` may be NULL: all of it, by its timestamps.
 * `index` and `time_s` of frames count from the first frame of the whole recording, also with start_s > 0. */
RfVideoFile *rf_video_file_open(const char *const *paths, const RfVideoOptions *options, GError **error);
void rf_video_file_free(RfVideoFile *file);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfVideoFile, rf_video_file_free)

const RfVideoInfo *rf_video_file_info(const RfVideoFile *file);

/* (returns new) "640 x 480, h264, 8 bit, 30 frames/s, 60.0 s, 1800 frames" */
char *rf_video_file_summary(const RfVideoFile *file);

/* Time of a frame by its index, before decoding it; an estimate unless info->is_indexed. index < info->frames. */
double rf_video_file_time_s(const RfVideoFile *file, int64_t index);

/* Stretches: runs of frames that decode alone to the very same luma, together everything in [start_s,
 * stop_s). They depend on the file only. One stretch where the file allows no more. */
int rf_video_file_stretches(const RfVideoFile *file);
int64_t rf_video_file_stretch_frames(const RfVideoFile *file,
                                     int stretch); /* an estimate unless is_indexed */

/* Frames that can be reached without decoding others (keyframes) in [start_s, stop_s), ascending; 0 unless
 * is_indexed. */
int rf_video_file_keyframes(const RfVideoFile *file);
int64_t rf_video_file_keyframe(const RfVideoFile *file, int number);

/* ---- reading ---- */

typedef struct RfVideoReader RfVideoReader; /* one thread at a time; borrows the file */

typedef struct {                /* met by a reader so far */
    int64_t frames;             /* delivered */
    int64_t damaged;            /* delivered, with errors reported or concealed */
    int64_t lost;               /* couldn't be decoded, or not there at all though a packet promised it */
    int64_t missing, backwards; /* timestamps repaired; 0 if is_indexed (see RfVideoInfo) */
    double first_fault_s;       /* time of the first damaged or lost frame; negative: none */
} RfVideoFaults;

typedef enum { RF_VIDEO_FRAME, RF_VIDEO_END, RF_VIDEO_FAILED } RfVideoStep;

/* threads >= 1: libav's own threads (frames for H.264, slices for FFV1); they don't alter the luma.
 * The reader stands before the first frame of the first stretch and runs to the end of the last. */
RfVideoReader *rf_video_file_reader_new(const RfVideoFile *file, int threads, GError **error);
void rf_video_reader_free(RfVideoReader *reader);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfVideoReader, rf_video_reader_free)

/* From here on deliver the frames of one stretch only. Cheapest when stretches are taken in ascending order.
 */
bool rf_video_file_enter_stretch(RfVideoReader *reader, int stretch, int threads, GError **error);

/* From here on deliver everything from frame `index` to the end. Decodes from the keyframe before it (from
 * the start where the file isn't indexed). */
bool rf_video_file_go_to(RfVideoReader *reader, int64_t index, GError **error);

/* Lends the next frame until the next call on this reader. Damage that libav can live with is counted, not an
 * error. */
RfVideoStep rf_video_file_next(RfVideoReader *reader, RfFrame *frame, GError **error);

RfVideoFaults rf_video_file_faults(const RfVideoReader *reader);

/* ---- stills ---- */

typedef struct {
    int width, height, bit_depth; /* 8: uint8_t pixels, 9..16: uint16_t; levels 0 .. 2^bit_depth - 1 */
    double pixel_aspect;
    bool is_limited_range;
    void *pixels; /* owned; rows without padding */
} RfStill;

/* PNG, JPEG, TIFF, BMP or PGM/PPM; colour becomes luma (ITU-R BT.601). */
RfStill *rf_video_file_read_still(const char *path, GError **error);
void rf_still_free(RfStill *still);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfStill, rf_still_free)

/* ---- writing ---- */

typedef enum {
    RF_VIDEO_CODEC_FFV1, /* lossless */
    RF_VIDEO_CODEC_H264, /* through libx264 */
    RF_VIDEO_CODEC_MJPEG,
    RF_VIDEO_CODEC_MPEG2,
    RF_VIDEO_CODEC_VP9, /* what every browser plays, in .webm; the encoder's fast, timing-free settings */
} RfVideoCodec;

typedef struct {
    RfVideoCodec codec;
    int width, height;  /* even, but for grey FFV1 */
    int bit_depth;      /* of the grey pixels given: 8, 10 (FFV1, H.264), 12 or 16 (FFV1); 0: 8 */
    bool is_colour;     /* frames are RGB24 (8 bit, 3 bytes a pixel), stored as YUV 4:2:0 (BT.601) */
    bool is_full_range; /* only a tag for grey frames: their levels are stored as they are; MJPEG is always
                           full */
    bool is_interlaced, is_top_field_first; /* MPEG2, H.264 */
    double pixel_aspect;                    /* 0: square */
    double frame_rate_hz;                   /* nominal; 0: 30 */
    int ticks_per_s;    /* clock of the timestamps, where the container lets one choose; 0: 90000 */
    int keyframe_every; /* 0: the encoder's own choice */
    int b_frames;       /* H.264, MPEG2 */
    bool is_open_gop;   /* H.264, MPEG2: leading B frames may refer to the group before */
    double quality;     /* H.264: crf > 0 to 51; MJPEG, MPEG2: 1 (best)..31; VP9: crf > 0 to 63;
                           0: 18, 3 and 32 */
    bool is_lossless;   /* H.264: quantiser 0, whatever `quality` says */
    const char *preset; /* H.264: "ultrafast" .. "veryslow"; NULL: "medium" */
    int slices;         /* FFV1: 4, 6, 9, 12, ...; 0: 4 */
} RfVideoWriterOptions;

typedef struct RfVideoWriter RfVideoWriter;

/* The name's ending chooses the container: .mkv, .mp4, .mov, .avi, .mpg, .webm. Same input, same bytes. */
RfVideoWriter *rf_video_file_create(const char *path, const RfVideoWriterOptions *options, GError **error);

/* One frame: grey rows (uint8_t, or uint16_t if bit_depth > 8), or RGB24 rows. Times must ascend by a tick at
 * least. */
bool rf_video_file_write(RfVideoWriter *writer, const void *pixels, ptrdiff_t stride_bytes, double time_s,
                         GError **error);

/* Writes what is still inside the encoder and the file's end. Without it the file is worthless. */
bool rf_video_file_finish(RfVideoWriter *writer, GError **error);
void rf_video_writer_free(RfVideoWriter *writer);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfVideoWriter, rf_video_writer_free)

/* (returns new) A PNG in memory. channels: 1 grey, 3 RGB; bit_depth 8, or 16 (uint16_t) for grey. */
GBytes *rf_video_file_encode_png(const void *pixels, ptrdiff_t stride_bytes, int width, int height,
                                 int channels, int bit_depth, GError **error);
