/* A page of the manual as it is put together from the command tables and the sheet's keys, before it is shown: on a
 * terminal by `risefall help`, as roff for man(1). Not for layout: manual_text.c and manual_roff.c do that. */
#pragma once

#include <glib.h>

#include "cli/command.h"

typedef enum {
    RF_MANUAL_HEADING,   /* text */
    RF_MANUAL_PARAGRAPH, /* text, to be wrapped */
    RF_MANUAL_ITEM,      /* term, and text below or beside it */
    RF_MANUAL_VERBATIM,  /* text as it stands, in lines */
} RfManualKind;

typedef struct {
    RfManualKind kind;
    char *term, *text;
} RfManualPart;

typedef struct {
    char *name;    /* "risefall-run" */
    char *called;  /* "risefall run": how readers know it */
    int section;   /* of the manual: 1 commands, 5 files */
    char *purpose; /* without a full stop */
    GArray *parts; /* RfManualPart */
} RfManual;

RfManual *rf_manual_overview(void);                    /* (returns new) */
RfManual *rf_manual_command(const RfCommand *command); /* (returns new) */
RfManual *rf_manual_options(const RfCommand *command); /* only the options' items; (returns new) */
RfManual *rf_manual_sheet(void);                       /* the run sheet's keys; (returns new) */
void rf_manual_free(RfManual *manual);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfManual, rf_manual_free)

RfManual *rf_manual_new(const char *name, const char *called, int section, const char *purpose);
void rf_manual_add(RfManual *manual, RfManualKind kind, const char *term, const char *text); /* copies */
void rf_manual_add_paragraphs(RfManual *manual, const char *text); /* with an empty line between them */

char *rf_manual_text(const RfManual *manual, int columns);       /* (returns new) */
char *rf_manual_parts_text(const RfManual *manual, int columns); /* without the title; (returns new) */
char *rf_manual_roff(const RfManual *manual); /* for the man macros, ASCII; (returns new) */

/* A run sheet with the commonest keys, as the manual shows it; rf_settings_parse takes it. */
extern const char rf_manual_sheet_example[];
