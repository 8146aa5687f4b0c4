#include "tracker/frame_index.h"

#include <stdlib.h>

/* H.264 and HEVC hold back 16 frames at most (ITU-T H.264 A.3.1, H.265 A.4.2), or twice as many fields. */
#define LARGEST_REORDER 32
#define LONGEST_PAUSE_S 3600.0

static int ascending(const void *a, const void *b)
{
    int64_t left = *(const int64_t *)a, right = *(const int64_t *)b;
    return (left > right) - (left < right);
}

static size_t first_entry(const RfPacketNote *packets, size_t n)
{
    for (size_t k = 0; k < n; k++) {
        if (packets[k].is_entry && packets[k].has_pts && !packets[k].is_hidden) return k;
    }
    return n;
}

static bool is_shown(const RfPacketNote *packets, size_t k, size_t first)
{
    return k >= first && !packets[k].is_hidden && packets[k].has_pts && packets[k].pts >= packets[first].pts;
}

/* A packet that goes back behind one sent a whole reordering earlier, or ahead beyond reason. */
static bool is_out_of_time(const RfPacketNote *packets, size_t k, int64_t settled_max, double tick_s)
{
    if (!packets[k].has_pts) return false;
    if (k > LARGEST_REORDER && packets[k].pts <= settled_max) return true;
    return k > 0 && packets[k - 1].has_pts &&
           ((double)packets[k].pts - (double)packets[k - 1].pts) * tick_s > LONGEST_PAUSE_S;
}

static void count_faults(RfFrameIndex *index, const RfPacketNote *packets, size_t n, double tick_s)
{
    int64_t settled_max = INT64_MIN;
    bool was_out = false;
    for (size_t k = 0; k < n; k++) {
        if (!packets[k].has_pts) index->missing++;
        if (k > LARGEST_REORDER && packets[k - LARGEST_REORDER - 1].has_pts) {
            settled_max = MAX(settled_max, packets[k - LARGEST_REORDER - 1].pts);
        }
        bool is_out = is_out_of_time(packets, k, settled_max, tick_s);
        if (is_out && !was_out) index->backwards++;
        was_out = is_out;
    }
}

static void collect(RfFrameIndex *index, const RfPacketNote *packets, size_t n, size_t first)
{
    index->pts = g_new(int64_t, n + 1);
    for (size_t k = 0; k < n; k++) {
        bool is_taken = first < n ? is_shown(packets, k, first) : packets[k].has_pts;
        if (is_taken) index->pts[index->frames++] = packets[k].pts;
    }
    qsort(index->pts, index->frames, sizeof *index->pts, ascending);
}

static const char *timing_obstacle(const RfFrameIndex *index, double tick_s)
{
    for (size_t i = 1; i < index->frames; i++) {
        if (index->pts[i] == index->pts[i - 1]) return "two packets bear the same timestamp";
        if (((double)index->pts[i] - (double)index->pts[i - 1]) * tick_s > LONGEST_PAUSE_S) {
            return "timestamps leap by more than an hour";
        }
    }
    return NULL;
}

static const char *order_obstacle(RfFrameIndex *index, const RfPacketNote *packets, size_t n, size_t first)
{
    int64_t shown = 0;
    for (size_t k = first; k < n; k++) {
        if (!is_shown(packets, k, first)) continue;
        int64_t delay = shown - rf_frame_index_find(index, packets[k].pts, shown);
        if (delay > LARGEST_REORDER || delay < -LARGEST_REORDER) return "timestamps go back";
        if (delay > index->reorder) index->reorder = (int)delay;
        shown++;
    }
    return NULL;
}

/* Where the frames shown before packet k have all been sent; with reordering bounded, no later than this. */
static size_t settled_after(const RfPacketNote *packets, size_t n, size_t k)
{
    size_t settled = k;
    for (size_t j = k + 1; j < n && j <= k + 2 * LARGEST_REORDER; j++) {
        if (packets[j].has_pts && packets[j].pts < packets[k].pts) settled = j + 1;
    }
    return settled;
}

static void find_entries(RfFrameIndex *index, const RfPacketNote *packets, size_t n, size_t first,
                         bool may_lead)
{
    int64_t latest = INT64_MIN;
    for (size_t k = first; k < n; k++) {
        if (!is_shown(packets, k, first)) continue;
        if (packets[k].is_entry && packets[k].pts > latest) {
            RfFrameEntry entry = {.frame = rf_frame_index_find(index, packets[k].pts, (int64_t)(k - first)),
                                  .packet = (int64_t)k,
                                  .settled = (int64_t)settled_after(packets, n, k),
                                  .pts = packets[k].pts};
            if (may_lead || entry.settled == entry.packet || k == first)
                g_array_append_val(index->entries, entry);
        }
        latest = MAX(latest, packets[k].pts);
    }
}

static const char *obstacle(RfFrameIndex *index, const RfPacketNote *packets, size_t n, size_t first,
                            double tick_s)
{
    if (first >= n) return "no packet from which decoding may begin";
    if (index->missing > 0) return "timestamps are missing";
    const char *timing = timing_obstacle(index, tick_s);
    return timing != NULL ? timing : order_obstacle(index, packets, n, first);
}

RfFrameIndex *rf_frame_index_new(const RfPacketNote *packets, size_t n, double tick_s, bool may_lead)
{
    RfFrameIndex *index = g_new0(RfFrameIndex, 1);
    index->entries = g_array_new(FALSE, FALSE, sizeof(RfFrameEntry));
    size_t first = first_entry(packets, n);
    count_faults(index, packets, n, tick_s);
    collect(index, packets, n, first);
    index->obstacle = obstacle(index, packets, n, first, tick_s);
    if (index->obstacle == NULL) find_entries(index, packets, n, first, may_lead);
    return index;
}

void rf_frame_index_free(RfFrameIndex *index)
{
    if (index == NULL) return;
    g_array_unref(index->entries);
    g_free(index->pts);
    g_free(index);
}

int64_t rf_frame_index_find(const RfFrameIndex *index, int64_t pts, int64_t guess)
{
    if (guess >= 0 && (size_t)guess < index->frames && index->pts[guess] == pts) return guess;
    const int64_t *found = bsearch(&pts, index->pts, index->frames, sizeof *index->pts, ascending);
    return found == NULL ? -1 : (int64_t)(found - index->pts);
}
