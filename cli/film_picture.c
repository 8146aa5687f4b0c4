#include "cli/film_picture.h"

#include <glib.h>
#include <math.h>
#include <stdlib.h>
#include <string.h>

enum { TONES = 1024 };

bool rf_film_hooks_are_cancelled(const RfFilmHooks *hooks, GError **error)
{
    if (!hooks->is_cancelled || !hooks->is_cancelled()) return false;
    g_set_error_literal(error, RF_VIDEO_ERROR, RF_VIDEO_ERROR_CANCELLED, "stopped on request");
    return true;
}

/* Which stored pixels make up one of the picture, and how much of the outer two. */
typedef struct {
    int first, last;
    float first_part, last_part;
} Cover;

struct RfFilmPicture {
    int width, height, source_rows, row_step;
    Cover *columns, *rows;
    float *row, *sum, *level; /* one squeezed row; sums of them; the picture in levels */
    bool is_tuned;
    float black, per_level; /* level to tone */
    uint8_t tone[TONES];
    uint8_t *grey;
};

static Cover *cover_new(int stored, int shown)
{
    Cover *covers = g_new(Cover, (size_t)shown);
    const double each = (double)stored / shown;
    for (int i = 0; i < shown; i++) {
        const double start = i * each, end = fmin((i + 1) * each, stored);
        const int first = (int)start, last = MIN(stored - 1, (int)ceil(end) - 1);
        const double first_part = fmin(end, first + 1) - start, last_part = end - last;
        covers[i] = (Cover){first, last, (float)first_part, first == last ? 0 : (float)last_part};
    }
    return covers;
}

RfFilmPicture *rf_film_picture_new(const RfVideoInfo *info, int longest_px)
{
    const double width = info->width * info->pixel_aspect, height = info->height,
                 scale = fmin(1, longest_px / fmax(width, height));
    RfFilmPicture *picture = g_new0(RfFilmPicture, 1);
    picture->width = MAX(2, (int)(width * scale + 0.5) / 2 * 2);
    picture->height = MAX(2, (int)(height * scale + 0.5) / 2 * 2);
    picture->row_step = info->is_interlaced && info->height > 1 ? 2 : 1;
    picture->source_rows = info->height / picture->row_step;
    picture->columns = cover_new(info->width, picture->width);
    picture->rows = cover_new(picture->source_rows, picture->height);
    const size_t pixels = (size_t)picture->width * (size_t)picture->height;
    picture->row = g_new(float, (size_t)picture->width);
    picture->level = g_new(float, pixels);
    picture->grey = g_new(uint8_t, pixels);
    return picture;
}

void rf_film_picture_free(RfFilmPicture *picture)
{
    if (!picture) return;
    g_free(picture->columns);
    g_free(picture->rows);
    g_free(picture->row);
    g_free(picture->level);
    g_free(picture->grey);
    g_free(picture);
}

int rf_film_picture_width(const RfFilmPicture *picture)
{
    return picture->width;
}

int rf_film_picture_height(const RfFilmPicture *picture)
{
    return picture->height;
}

/* ---- size ---- */

static void squeeze_8(const Cover *columns, int n, const uint8_t *stored, float *row)
{
    for (int i = 0; i < n; i++) {
        const Cover *cover = &columns[i];
        float sum =
            cover->first_part * (float)stored[cover->first] + cover->last_part * (float)stored[cover->last];
        for (int x = cover->first + 1; x < cover->last; x++) sum += (float)stored[x];
        row[i] = sum;
    }
}

static void squeeze_16(const Cover *columns, int n, const uint16_t *stored, float *row)
{
    for (int i = 0; i < n; i++) {
        const Cover *cover = &columns[i];
        float sum =
            cover->first_part * (float)stored[cover->first] + cover->last_part * (float)stored[cover->last];
        for (int x = cover->first + 1; x < cover->last; x++) sum += (float)stored[x];
        row[i] = sum;
    }
}

static void add_row(RfFilmPicture *picture, const RfFrame *frame, int y, float part, float *sums)
{
    if (part <= 0) return;
    const bool is_second = picture->row_step == 2 && !frame->is_top_field_first;
    const int stored_y = MIN(frame->height - 1, y * picture->row_step + is_second);
    const char *stored = (const char *)frame->luma + stored_y * frame->stride_bytes;
    if (frame->bit_depth > 8)
        squeeze_16(picture->columns, picture->width, (const uint16_t *)(const void *)stored, picture->row);
    else
        squeeze_8(picture->columns, picture->width, (const uint8_t *)stored, picture->row);
    for (int x = 0; x < picture->width; x++) sums[x] += part * picture->row[x];
}

static void squeeze(RfFilmPicture *picture, const RfFrame *frame)
{
    memset(picture->level, 0, sizeof(float) * (size_t)picture->width * (size_t)picture->height);
    for (int i = 0; i < picture->height; i++) {
        const Cover *cover = &picture->rows[i];
        float *sums = picture->level + (ptrdiff_t)i * picture->width;
        add_row(picture, frame, cover->first, cover->first_part, sums);
        for (int y = cover->first + 1; y < cover->last; y++) add_row(picture, frame, y, 1, sums);
        add_row(picture, frame, cover->last, cover->last_part, sums);
    }
}

/* ---- tone ---- */

static int ascending(const void *a, const void *b)
{
    const float x = *(const float *)a, y = *(const float *)b;
    return (x > y) - (x < y);
}

/* Black and white where one pixel in two thousand lies beyond: what droplets cover. A dark field is lifted until the
 * reticle shows. */
static void tune(RfFilmPicture *picture)
{
    const size_t n = (size_t)picture->width * (size_t)picture->height;
    g_autofree float *sorted = g_memdup2(picture->level, n * sizeof(float));
    qsort(sorted, n, sizeof(float), ascending);
    const float black = sorted[n / 2000], white = sorted[n - 1 - n / 2000], middle = sorted[n / 2];
    const double range = fmax((double)(white - black), 1e-6), share = (double)(middle - black) / range;
    const double bend = share > 0 && share < 0.25 ? fmax(0.5, log(0.25) / log(share)) : 1;
    picture->black = black;
    picture->per_level = (float)(TONES / range);
    for (int i = 0; i < TONES; i++)
        picture->tone[i] = (uint8_t)lround(16 + 219 * pow((i + 0.5) / TONES, bend));
    picture->is_tuned = true;
}

const uint8_t *rf_film_picture_of(RfFilmPicture *picture, const RfFrame *frame)
{
    squeeze(picture, frame);
    if (!picture->is_tuned) tune(picture);
    const size_t n = (size_t)picture->width * (size_t)picture->height;
    for (size_t i = 0; i < n; i++) {
        const float tone = (picture->level[i] - picture->black) * picture->per_level;
        picture->grey[i] = picture->tone[tone > 0 ? MIN((int)tone, TONES - 1) : 0];
    }
    return picture->grey;
}
