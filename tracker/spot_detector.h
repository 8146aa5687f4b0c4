/* Where spots may be: a half-size picture in units of its noise, filtered at three sizes, local maxima above a
 * threshold. The only door to OpenCV; nothing of it comes through (its exceptions end here, its threads are off).
 * Not for exact positions. */
#pragma once

#include <stdbool.h>

#ifdef __cplusplus
extern "C" {
#endif

#define RF_SPOT_DETECTOR_SIZES 3

typedef struct RfSpotDetector RfSpotDetector; /* a worker's own; one thread at a time */

typedef struct {
    float x, y;     /* in cells of the picture, 0 the middle of the first */
    float strength; /* in sd of the filtered noise */
    int size;       /* which filter saw it best: 0, 1, 2 for spots of about 1, 2, 4 cells sd */
} RfCandidate;

typedef struct {
    float noise_sd[RF_SPOT_DETECTOR_SIZES];  /* of the filtered picture, > 0 */
    float threshold[RF_SPOT_DETECTOR_SIZES]; /* in those sd */
} RfSpotDetectorSettings;

/* (returns new) for pictures of that size, 16 x 16 or more; NULL if there is no memory. */
RfSpotDetector *rf_spot_detector_new(int width, int height);
void rf_spot_detector_free(RfSpotDetector *detector);

/* (borrowed) row after row, no padding: to be filled before a search */
float *rf_spot_detector_picture(RfSpotDetector *detector);

/* Filters the picture at all sizes. False where OpenCV fails. */
bool rf_spot_detector_filter(RfSpotDetector *detector);
/* (borrowed until the next filter call) the picture filtered at one size; sides halve from size to size */
const float *rf_spot_detector_filtered(const RfSpotDetector *detector, int size, int *width, int *height);

/* Local maxima of the filtered pictures, clearest first, at most `most`; returns how many. Of a spot that several
 * filters see, the best one is kept. */
int rf_spot_detector_search(RfSpotDetector *detector, const RfSpotDetectorSettings *settings,
                            RfCandidate *candidates, int most);

/* sd of the filtered picture where the picture is white noise of unit variance */
double rf_spot_detector_white_sd(void);

#ifdef __cplusplus
}
#endif
