/* One picture of the overlay film: the recording's frame as it is, paths, rings and numbers drawn over it, and below it a
 * band with a few words. The only file that knows cairo. Not for which droplet is where: overlay_film.c. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

typedef struct RfOverlayPicture RfOverlayPicture; /* one thread at a time */

/* Places are in the picture's pixels from its upper left corner: the centre of the first pixel is (0.5, 0.5). */
typedef struct {
    unsigned droplet;
    double x_px, y_px;
    bool is_seen; /* measured; else bridged, and the ring is broken */
} RfOverlayMark;

enum { RF_OVERLAY_WORDS = 4 };

/* For frames of that size; width and height even. (returns new) */
RfOverlayPicture *rf_overlay_picture_new(int width, int height);
void rf_overlay_picture_free(RfOverlayPicture *picture);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfOverlayPicture, rf_overlay_picture_free)

int rf_overlay_picture_height(const RfOverlayPicture *picture); /* with the band; even */

/* Lines stay in all pictures to come, until they are wiped. */
void rf_overlay_picture_add_line(RfOverlayPicture *picture, const RfOverlayMark *from,
                                 const RfOverlayMark *to);
void rf_overlay_picture_wipe_lines(RfOverlayPicture *picture);

/* `grey`: 16 to 235, as rf_film_picture_of has it; `marks`: RfOverlayMark; `words`: ASCII, side by side in the band.
 * Returns RGB24 rows without padding, lent until the next call. */
const uint8_t *rf_overlay_picture_of(RfOverlayPicture *picture, const uint8_t *grey, const GArray *marks,
                                     char *const words[RF_OVERLAY_WORDS]);
