/* How well found paths agree with true ones: the scores by which particle tracking is compared. Not for the program.
 * Source: N. Chenouard et al., Nature Methods 11 (2014) 281, supplementary note 3 (formulas from memory, checked against
 * hand-made cases); identity switches as in the multiple-object accuracy of K. Bernardin, R. Stiefelhagen, EURASIP J. Image
 * Video Process. (2008) 246309. */
#pragma once

#include <glib.h>

typedef struct {
    int frame;
    double x_px, y_px;
} RfScorePoint;

typedef struct {
    double alpha, beta;
    double jsc, jsc_theta; /* over positions, over tracks */
    double rmse_px;
    int identity_switches; /* a true track's nearest found track within the gate is another one than before */
} RfTrackScore;

/* truth, found: of GArray of RfScorePoint, each in rising order of frames. Frames from 0 to frames - 1. */
RfTrackScore rf_track_score(const GPtrArray *truth, const GPtrArray *found, int frames, double gate_px);
