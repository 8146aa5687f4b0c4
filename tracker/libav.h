/* libav in this room's own types: containers, decoders, encoders, and nothing of what is made of them. libav.c
 * (what is read) and libav_write.c (what is written) alone include libav's headers; its versions' differences, its log,
 * its error codes and its pixel layouts end there.
 * Not for whole recordings: which packet is which frame, and when, is decided in video_part.c and video_reader.c. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

#include "tracker/frame.h"
#include "tracker/frame_clock.h"
#include "tracker/video_file.h"

#define RF_NO_TICKS INT64_MIN /* a timestamp that isn't there */

/* Before libav on every thread: from here on its log is kept, not printed, and what it said before is forgotten. */
void rf_libav_listen(void);

/* Sets "PATH: TEXT: words for libav's status (libav's last line on this thread)". Returns false. */
bool rf_libav_fail(GError **error, RfVideoError code, const char *path, int status, const char *text);

/* Sets "PATH: TEXT: invalid data (libav's last line on this thread)", code DAMAGED. Returns false. */
bool rf_libav_fail_damaged(GError **error, const char *path, const char *text);

/* ---- containers ---- */

typedef struct RfDemuxer RfDemuxer; /* one file, at one of its packets; one thread at a time */

typedef struct { /* of the video stream */
    int width, height;
    double pixel_aspect;   /* <= 0: not said */
    RfRatio tick_s;        /* of its timestamps */
    double promised_s;     /* length that the file's header states; 0: it states none */
    RfRatio rates_hz[2];   /* what the container says, the likelier one first */
    const char *container; /* "matroska,webm" */
    const char *codec;     /* "h264"; NULL: unknown to libav */
    bool is_lossless;      /* the codec can't have altered the picture */
    bool is_indexable; /* one packet, one frame, and a key flag that means what it says (is_nal: see nal.h) */
    bool is_nal, is_hevc; /* H.264 or HEVC; the latter */
    bool may_lead;        /* has open groups: see frame_index.h */
    bool is_seekable;     /* the container's own index leads to any keyframe */
    const uint8_t *setup; /* the codec's global header, of setup_size bytes; lives as long as the demuxer */
    size_t setup_size;
} RfStream;

typedef struct {
    int64_t pts, dts, duration; /* ticks; RF_NO_TICKS */
    bool is_key, is_hidden;     /* hidden: decoded, but not to be shown */
    bool is_broken;             /* so says the container */
    const uint8_t *bytes;       /* lent until the demuxer moves on */
    size_t size;
} RfPacket;

/* A regular local file in a self-contained format, at its first packet; all but the video stream is skipped. */
RfDemuxer *rf_demuxer_open(const char *path, GError **error);
void rf_demuxer_free(RfDemuxer *demuxer);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfDemuxer, rf_demuxer_free)

const RfStream *rf_demuxer_stream(const RfDemuxer *demuxer);

/* Moves on to the next packet and holds it; false at the end, or where the file can't be read on. */
bool rf_demuxer_next(RfDemuxer *demuxer, RfPacket *packet);

/* To a packet at or before pts, by the container's index, if it can. */
bool rf_demuxer_seek(RfDemuxer *demuxer, int64_t pts);

/* ---- decoders ---- */

typedef struct RfDecoder RfDecoder;

typedef struct {
    int64_t pts;   /* of the packet it was in; RF_NO_TICKS */
    int64_t guess; /* libav's best guess; RF_NO_TICKS */
    int width, height, bit_depth;
    int components;      /* 1 luma; 3 red, green, blue */
    double pixel_aspect; /* <= 0: not said */
    bool is_readable;    /* grey, YUV, RGB or palette, whole numbers of up to 16 bit: can be lent */
    bool is_plain;       /* its first plane is luma as RfFrame has it */
    bool is_damaged;     /* the decoder reported or concealed errors */
    const char *layout;  /* libav's name for it */
} RfPicture;

typedef enum { RF_DECODER_PICTURE, RF_DECODER_HUNGRY, RF_DECODER_DONE, RF_DECODER_REFUSES } RfDecoderStep;

/* For the demuxer's stream. threads >= 1. reorder: how many frames it must hold back to show them in order (H.264, HEVC);
 * one that starts midway must hold back as many as one that has seen the whole file; 0: not known. */
RfDecoder *rf_decoder_new(const char *path, const RfDemuxer *demuxer, int threads, int reorder,
                          GError **error);

/* One picture from the bytes of a whole file, decoded. codec: "png", "mjpeg", "tiff", "bmp", "pgm", "ppm". */
RfDecoder *rf_decoder_still(const char *path, const char *codec, const void *bytes, size_t size,
                            RfPicture *picture, GError **error);
void rf_decoder_free(RfDecoder *decoder);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfDecoder, rf_decoder_free)

/* Takes the packet that the demuxer holds; NULL: there are no more. */
bool rf_decoder_send(RfDecoder *decoder, const RfDemuxer *demuxer);

RfDecoderStep rf_decoder_receive(RfDecoder *decoder, RfPicture *picture);

/* Something was wrong with the stream, and several threads decode it: pictures from here on, the last received among
 * them, may depend on which thread came first. What one thread makes of the same packets doesn't. */
bool rf_decoder_is_luck_involved(const RfDecoder *decoder);

/* Lends the picture last received as it lies in memory, until the next call on this decoder. Its rows are luma only if
 * is_plain. Index, time and damage are left at zero. */
void rf_decoder_lend(const RfDecoder *decoder, RfFrame *lent);

/* One row of one component of it, of whatever layout: luma, or red, green, blue; less than 8 bit stretched to 8. */
void rf_decoder_levels(const RfDecoder *decoder, int component, int y, uint16_t *levels);

/* ---- encoders ---- */

typedef struct RfEncoder RfEncoder; /* an encoder and the file that it writes */

typedef struct { /* 8 bit, or 16 in native order; YUV 4:2:0, or grey alone (the other planes NULL) */
    uint8_t *planes[3];
    int strides_bytes[3];
    bool is_full_range;
} RfCanvas;

/* options: checked by the caller, and no zeros left in what has a default. */
RfEncoder *rf_encoder_create(const char *path, const RfVideoWriterOptions *options, GError **error);
void rf_encoder_free(RfEncoder *encoder);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfEncoder, rf_encoder_free)

double rf_encoder_tick_s(const RfEncoder *encoder);

/* The picture to be encoded next; holds the one before, to be painted over. */
bool rf_encoder_canvas(RfEncoder *encoder, RfCanvas *canvas, GError **error);
bool rf_encoder_write(RfEncoder *encoder, int64_t ticks, GError **error);

/* What is still inside, and the file's end. */
bool rf_encoder_finish(RfEncoder *encoder, GError **error);

/* (returns new) See rf_video_file_encode_png(); 16-bit rows in big-endian order. */
GBytes *rf_libav_encode_png(const void *rows, ptrdiff_t stride_bytes, int width, int height, int channels,
                            int bit_depth, GError **error);
