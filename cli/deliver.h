/* From a sheet's path to a result folder and a summary on the screen: what `run`, `paths` and `charge` share. */
#pragma once

#include <glib.h>

#include "cli/command.h"

/* What is left behind, for the manual: by run and charge, by paths. */
extern const RfCommandFile rf_deliver_files[], rf_deliver_paths_files[];

typedef enum {
    RF_DELIVER_RUN,
    RF_DELIVER_PATHS,
    RF_DELIVER_CHARGE,
} RfDeliverKind;

typedef enum { /* what is filmed besides: each a second look at the recording */
               RF_DELIVER_NO_FILM = 0,
               RF_DELIVER_PREVIEW = 1 << 0, /* footage in the report: RF_DELIVER_RUN only */
               RF_DELIVER_OVERLAY = 1 << 1, /* overlay.mp4: not RF_DELIVER_CHARGE */
} RfDeliverFilms;

/* `paths_csv` for RF_DELIVER_CHARGE only; `films`: RfDeliverFilms. */
RfExit rf_deliver(const char *sheet, const char *paths_csv, const char *out, RfDeliverKind kind,
                  unsigned films, GError **error);
