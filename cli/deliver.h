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

/* `paths_csv` for RF_DELIVER_CHARGE only. */
RfExit rf_deliver(const char *sheet, const char *paths_csv, const char *out, RfDeliverKind kind,
                  GError **error);
