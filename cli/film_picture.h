/* A frame of the recording as a picture for people: square pixels, no larger than asked for, brightened so that the
 * droplets show. Of interlaced frames only the field that comes first: two instants in one picture would look like two
 * droplets. Not for measuring. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

#include "tracker/frame.h"
#include "tracker/video_file.h"

/* What whoever films is told and asked meanwhile: a result folder holds signals back as long as it is open. */
typedef struct {
    int threads;                                                      /* 0: one per core */
    void (*progress)(const char *label, int64_t done, int64_t total); /* may be NULL */
    int (*is_cancelled)(void);                                        /* may be NULL */
} RfFilmHooks;

/* True, with an error of RF_VIDEO_ERROR_CANCELLED, where whoever films shall stop. */
bool rf_film_hooks_are_cancelled(const RfFilmHooks *hooks, GError **error);

typedef struct RfFilmPicture RfFilmPicture; /* one thread at a time */

/* longest_px: of the longer side; never enlarged but to make pixels square. (returns new) */
RfFilmPicture *rf_film_picture_new(const RfVideoInfo *info, int longest_px);
void rf_film_picture_free(RfFilmPicture *picture);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfFilmPicture, rf_film_picture_free)

int rf_film_picture_width(const RfFilmPicture *picture);  /* even */
int rf_film_picture_height(const RfFilmPicture *picture); /* even */

/* 8-bit grey from 16 to 235 as films have it, rows without padding; lent until the next call. What counts as black and
 * white is settled by the first frame. */
const uint8_t *rf_film_picture_of(RfFilmPicture *picture, const RfFrame *frame);
