/* From the packets of a video stream, as the container hands them out, to its frames in the order of presentation, and
 * to the places where a decoder may begin. Pure; knows no library. Not for seconds: see frame_clock.h. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>
#include <stdint.h>

typedef struct { /* one packet, in the order of decoding */
    int64_t pts; /* presentation, in ticks of the stream */
    bool has_pts;
    bool is_entry;  /* by its content, a decoder may begin here */
    bool is_hidden; /* decoded, but not to be shown (edit lists) */
} RfPacketNote;

typedef struct {     /* a place to begin decoding */
    int64_t frame;   /* index of the frame that the packet holds */
    int64_t packet;  /* its number, all packets of the stream counted from 0 */
    int64_t settled; /* number of the first packet from which on nothing is shown before `frame` */
    int64_t pts;
} RfFrameEntry;

typedef struct {
    int64_t *pts; /* ascending; without obstacle: of every frame that can be shown */
    size_t frames;
    GArray *entries;   /* of RfFrameEntry, ascending; the first is frame 0 */
    int reorder;       /* frames that a decoder must hold back to show them in order */
    int64_t missing;   /* packets without pts */
    int64_t backwards; /* runs of packets that go back beyond any reordering, or ahead by more than an hour */
    const char *obstacle; /* NULL, or why frames can only be counted as they come out of the decoder */
} RfFrameIndex;

/* may_lead: frames shown before an entry may follow it in the order of decoding (open groups of MPEG-1, MPEG-2, HEVC)
 * without harm to those shown after it. Frames before the first entry can't be decoded and aren't counted. */
RfFrameIndex *rf_frame_index_new(const RfPacketNote *packets, size_t n, double tick_s, bool may_lead);
void rf_frame_index_free(RfFrameIndex *index);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfFrameIndex, rf_frame_index_free)

/* Which frame has this pts: looked for at `guess` first, then by bisection; -1: none. */
int64_t rf_frame_index_find(const RfFrameIndex *index, int64_t pts, int64_t guess);
