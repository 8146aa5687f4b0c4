/* Stopwatch records as people type them: entry, label, motion, divisions (or distance_mm), time_s, voltage_V, start_s,
 * in any order, with the units that the headers name. calib/table.h reads the text; this file knows what the cells mean.
 * Not for judging them. A cell that can't be read spoils its own entry only. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stddef.h>

typedef struct {
    unsigned entry;   /* as written; the row's number, from 1, where there is no such column */
    char *label;      /* "" if none; may hold anything */
    bool is_rise;     /* against gravity */
    double divisions; /* lines passed; 0: distance_mm is given instead */
    double distance_mm;
    double time_s;     /* > 0 */
    char *time_text;   /* the cell, for slips of the pen */
    double time_scale; /* seconds per unit of that text; 0 where it has minutes */
    bool has_voltage, has_start;
    double voltage_V;
    double start_s; /* on the person's own clock */
    char *problem;  /* what couldn't be read, by line and column; NULL: all is well */
} RfHandEntry;

typedef struct {
    GArray *entries;     /* RfHandEntry, in the order of the file, those with a problem too */
    unsigned unreadable; /* how many have one */
} RfHandTimings;

/* Errors are those of calib/table.h: no such file, a column missing or there twice, rows that don't fit the header, no rows
 * at all. (returns new) */
RfHandTimings *rf_hand_timings_read(const char *path, GError **error);
RfHandTimings *rf_hand_timings_parse(const char *text, size_t length, const char *name, GError **error);
void rf_hand_timings_free(RfHandTimings *timings);
G_DEFINE_AUTOPTR_CLEANUP_FUNC(RfHandTimings, rf_hand_timings_free)
