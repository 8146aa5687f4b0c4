#include "cli/overlay_film.h"

#include <limits.h>
#include <math.h>

#include "cli/overlay_picture.h"
#include "cli/tally.h"
#include "cli/watch.h"

/* Ticks of the film's clock, as MPEG has them. */
enum { TICKS_PER_S = 90000 };

/* H.264 plays everywhere; a keyframe every second or two to jump to. */
enum { FILM_CRF = 23, KEYFRAME_EVERY = 50 };

typedef struct { /* a droplet's rows, and how far the film has come along them */
    const RfPathRow *rows;
    guint n, next;
    bool is_here;
    RfOverlayMark mark, drawn; /* where it is; where its line ends */
} Walker;

typedef struct {
    const RfResults *results;
    const RfFilmHooks *hooks;
    RfVideoFile *video;
    RfVideoReader *reader;
    RfVideoWriter *writer;
    RfFilmPicture *picture;
    RfOverlayPicture *overlay;
    double across, down; /* film pixels per stored one */
    GArray *walkers;     /* Walker */
    GArray *marks;       /* RfOverlayMark: this frame's */
    double first_s;
    bool is_begun;
} Set;

/* ---- where the droplets are ---- */

static GArray *walkers_of(const GArray *rows)
{
    GArray *walkers = g_array_new(FALSE, TRUE, sizeof(Walker));
    for (guint first = 0, end; first < rows->len; first = end) {
        const RfPathRow *row = &g_array_index(rows, RfPathRow, first);
        for (end = first; end < rows->len && g_array_index(rows, RfPathRow, end).droplet == row->droplet;)
            end++;
        const Walker walker = {.rows = row, .n = end - first};
        g_array_append_val(walkers, walker);
    }
    return walkers;
}

static RfOverlayMark mark_of(const Set *set, const RfPathRow *row)
{
    return (RfOverlayMark){row->droplet, (row->x_px + 0.5) * set->across, (row->y_px + 0.5) * set->down,
                           row->seen};
}

/* Of an interlaced frame the picture shows the first field: the place there is the one to ring. */
static bool is_shown(const RfPathRow *row)
{
    return row->field == 0 && isfinite(row->x_px) && isfinite(row->y_px);
}

static void go_on(Set *set, Walker *walker, const RfPathRow *row)
{
    const double least_px = 1;
    walker->mark = mark_of(set, row);
    if (!walker->is_here) walker->drawn = walker->mark;
    walker->is_here = true;
    if (hypot(walker->mark.x_px - walker->drawn.x_px, walker->mark.y_px - walker->drawn.y_px) < least_px)
        return;
    rf_overlay_picture_add_line(set->overlay, &walker->drawn, &walker->mark);
    walker->drawn = walker->mark;
}

/* Tells whether the droplet has gone from the picture. */
static bool walk_to(Set *set, Walker *walker, int64_t frame)
{
    for (; walker->next < walker->n && walker->rows[walker->next].frame <= frame; walker->next++)
        if (is_shown(&walker->rows[walker->next])) go_on(set, walker, &walker->rows[walker->next]);
    if (!walker->is_here || walker->next < walker->n || walker->rows[walker->n - 1].frame == frame)
        return false;
    walker->is_here = false;
    return true;
}

/* Paths of droplets that are gone would fill the picture in the end. */
static void redraw_lines(Set *set)
{
    rf_overlay_picture_wipe_lines(set->overlay);
    for (guint i = 0; i < set->walkers->len; i++) {
        Walker *walker = &g_array_index(set->walkers, Walker, i);
        if (!walker->is_here) continue;
        walker->is_here = false;
        for (guint k = 0; k < walker->next; k++)
            if (is_shown(&walker->rows[k])) go_on(set, walker, &walker->rows[k]);
    }
}

static void walk_on(Set *set, int64_t frame)
{
    bool is_any_gone = false;
    g_array_set_size(set->marks, 0);
    for (guint i = 0; i < set->walkers->len; i++) {
        Walker *walker = &g_array_index(set->walkers, Walker, i);
        is_any_gone |= walk_to(set, walker, frame);
        if (walker->is_here) g_array_append_val(set->marks, walker->mark);
    }
    if (is_any_gone) redraw_lines(set);
}

/* ---- what the band says ---- */

/* Paths alone know of no switches: the field is then not spoken of. */
static char *field_words(const RfResults *results, double time_s)
{
    const GArray *switches = results->switches, *segments = results->segments;
    if (switches->len == 0) {
        if (segments->len == 0) return NULL;
        return g_strdup_printf("field %s",
                               rf_tally_field_to_string(g_array_index(segments, RfSegmentRow, 0).field));
    }
    RfFieldState field = g_array_index(switches, RfSwitchRow, 0).from;
    for (guint i = 0; i < switches->len; i++) {
        const RfSwitchRow *row = &g_array_index(switches, RfSwitchRow, i);
        if (row->time_s.value <= time_s) field = row->to;
    }
    return g_strdup_printf("field %s", rf_tally_field_to_string(field));
}

static char *time_words(double time_s)
{
    const int64_t hundredths = llround(100 * time_s), whole_s = hundredths / 100;
    return g_strdup_printf("%d:%02d.%02d", (int)(whole_s / 60), (int)(whole_s % 60), (int)(hundredths % 100));
}

/* ---- the film ---- */

static bool shoot(Set *set, const RfFrame *frame, GError **error)
{
    if (!set->is_begun) set->first_s = frame->time_s;
    set->is_begun = true;
    walk_on(set, frame->index);
    char *words[RF_OVERLAY_WORDS] = {
        time_words(frame->time_s),
        g_strdup_printf("frame %" G_GINT64_FORMAT, frame->index),
        field_words(set->results, frame->time_s),
        g_strdup_printf("%u droplet%s", set->marks->len, set->marks->len == 1 ? "" : "s"),
    };
    const uint8_t *grey = rf_film_picture_of(set->picture, frame),
                  *rgb = rf_overlay_picture_of(set->overlay, grey, set->marks, words);
    for (int i = 0; i < RF_OVERLAY_WORDS; i++) g_free(words[i]);
    return rf_video_file_write(set->writer, rgb, (ptrdiff_t)rf_film_picture_width(set->picture) * 3,
                               frame->time_s - set->first_s, error);
}

static void tell_progress(const Set *set, int64_t done)
{
    const RfVideoInfo *info = rf_video_file_info(set->video);
    if (set->hooks->progress)
        set->hooks->progress("drawing", MIN(done, info->frames_used), info->frames_used);
}

static bool shoot_all(Set *set, GError **error)
{
    for (int64_t done = 0;; done++) {
        RfFrame frame;
        const RfVideoStep step = rf_video_file_next(set->reader, &frame, error);
        if (step != RF_VIDEO_FRAME) return step == RF_VIDEO_END;
        if (rf_film_hooks_are_cancelled(set->hooks, error) || !shoot(set, &frame, error)) return false;
        tell_progress(set, done + 1);
    }
}

static bool open_set(Set *set, const char *path, GError **error)
{
    const RfVideoInfo *info = rf_video_file_info(set->video);
    const int threads = set->hooks->threads > 0 ? set->hooks->threads : (int)g_get_num_processors();
    set->picture = rf_film_picture_new(info, INT_MAX);
    const int width = rf_film_picture_width(set->picture), height = rf_film_picture_height(set->picture);
    set->across = (double)width / info->width;
    set->down = (double)height / info->height;
    set->overlay = rf_overlay_picture_new(width, height);
    const RfVideoWriterOptions options = {
        .codec = RF_VIDEO_CODEC_H264,
        .width = width,
        .height = rf_overlay_picture_height(set->overlay),
        .frame_rate_hz = info->frame_rate_hz,
        .ticks_per_s = TICKS_PER_S,
        .is_colour = true,
        .keyframe_every = KEYFRAME_EVERY,
        .quality = FILM_CRF,
        .preset = "veryfast",
    };
    set->reader = rf_video_file_reader_new(set->video, threads, error);
    set->writer = set->reader ? rf_video_file_create(path, &options, error) : NULL;
    return set->writer != NULL;
}

static void close_set(Set *set)
{
    rf_video_writer_free(set->writer);
    rf_video_reader_free(set->reader);
    rf_film_picture_free(set->picture);
    rf_overlay_picture_free(set->overlay);
    g_array_unref(set->walkers);
    g_array_unref(set->marks);
}

bool rf_overlay_film(const RfSettings *settings, const RfResults *results, const RfFilmHooks *hooks,
                     const char *path, GError **error)
{
    g_autoptr(RfVideoFile) video = rf_watch_open(settings, error);
    if (!video) return false;
    Set set = {
        .results = results,
        .hooks = hooks,
        .video = video,
        .walkers = walkers_of(results->paths),
        .marks = g_array_new(FALSE, FALSE, sizeof(RfOverlayMark)),
    };
    const bool is_done =
        open_set(&set, path, error) && shoot_all(&set, error) && rf_video_file_finish(set.writer, error);
    close_set(&set);
    return is_done;
}
