/* The result folder of one recording, as far as pooling needs it: charges with their random sigmas, what each common input
 * does to each, which measurement each input is, and what identifies the recording. Not for joining them: pool.h does. */
#pragma once

#include <glib.h>
#include <stdbool.h>

#include "cli/results.h"

typedef enum {
    RF_POOL_ERROR_FOLDER, /* isn't a result folder, or of a version that lacks what is needed */
    RF_POOL_ERROR_CONFLICT, /* two recordings contradict each other: the same one twice, one name for two measurements */
} RfPoolError;

#define RF_POOL_ERROR (rf_pool_error_quark())
GQuark rf_pool_error_quark(void);

typedef struct {
    char *input;  /* "plate_gap" */
    char *shared; /* name of the one measurement, or NULL */
    bool is_law;
    RfValue value; /* SI */
    char *unit;
} RfPoolInput;

typedef struct {
    char *name;   /* for people: the folder's, unique within a pool */
    char *folder; /* as given */
    char *sheet, *program_version, *verdict;
    bool is_measured;
    double start_s, stop_s; /* part of the recording used; stop 1e300: to its end */
    GPtrArray *videos;      /* char*: SHA-256 of each file of the recording */
    GPtrArray *analysis;    /* char*: "slip=kim-2005", every setting in [analysis], defaults too */
    GArray *inputs;         /* RfPoolInput */
    GArray *droplets;       /* RfDropletRow */
    GArray *influences_C;   /* double: rows of droplets x inputs */
} RfPoolRecording;

/* (returns new) or NULL; errors begin with the file they are about. */
RfPoolRecording *rf_pool_read(const char *folder, GError **error);
void rf_pool_recording_free(RfPoolRecording *recording);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfPoolRecording, rf_pool_recording_free)
