/* The parts of report.html, each appending one section, and the few helpers that they share. Private to the report. */
#pragma once

#include <glib.h>

#include "calib/units.h"
#include "cli/bench.h"
#include "cli/figure.h"
#include "cli/results.h"

/* ---- report_text.c ---- */

/* Any text from outside goes through here: never run as markup, odd bytes marked. NULL writes nothing. */
void rf_report_text(GString *out, const char *text);
/* The same as a sentence: a capital at its start, a full stop at its end. */
void rf_report_text_sentence(GString *out, const char *text);
/* One cell, right-aligned where `is_number`. Escapes. */
void rf_report_text_cell(GString *out, bool is_number, const char *text);
void rf_report_text_number_cell(GString *out, RfValue value);
void rf_report_text_fixed_cell(GString *out, double value, int decimals);
/* "1.6049(13) × 10⁻¹⁹ C" */
void rf_report_text_charge(GString *out, RfValue charge_C);
void rf_report_text_charge_cell(GString *out, RfValue charge_C); /* in 1e-19 C, without the unit */
void rf_report_text_percent(GString *out, double fraction);      /* two digits: 0.61 % */
/* A droplet's number as a link to its row; the script makes it choose. */
void rf_report_text_droplet_cell(GString *out, unsigned droplet);
void rf_report_text_open(GString *out, const char *id, const char *heading);
void rf_report_text_close(GString *out);
/* Opens a wide table in a frame that scrolls sideways on narrow screens; `head` is trusted markup. */
void rf_report_text_table(GString *out, const char *label, const char *head);
void rf_report_text_table_end(GString *out);
/* The figure with its caption, or a line that says where its data are; nothing where there was nothing to draw. */
void rf_report_text_figure(GString *out, const RfFigureSet *figures, const char *name, const char *caption);

/* Opens the frames around a moment; nothing where they weren't filmed. */
void rf_report_moment_button(GString *out, const RfResults *results, RfMomentKind kind, unsigned number);

/* A cell with a time, and that button behind it. */
void rf_report_moment_time_cell(GString *out, const RfResults *results, RfMomentKind kind, unsigned number,
                                RfValue time_s);

/* ---- one file each ---- */
void rf_report_first_screen(GString *out, const RfResults *results);
void rf_report_view(GString *out, const RfResults *results);
void rf_report_preview(GString *out, const RfResults *results); /* the player with its film, hidden */
void rf_report_droplets(GString *out, const RfResults *results);
void rf_report_set_aside(GString *out, const RfResults *results);
void rf_report_review(GString *out, const RfResults *results);
void rf_report_review_form(GString *out, const RfResults *results);   /* within the review's section */
void rf_report_review_notice(GString *out, const RfResults *results); /* within the first screen */
void rf_report_events(GString *out, const RfResults *results);
void rf_report_audit(GString *out, const RfResults *results);
void rf_report_budget(GString *out, const RfResults *results, const RfFigureSet *figures);
void rf_report_health(GString *out, const RfResults *results);
void rf_report_sources(GString *out, const RfResults *results);
void rf_report_files(GString *out, const RfResults *results); /* report_sources.c: input files and program */
void rf_report_cautions(GString *out);                        /* report_sources.c */
void rf_report_recordings(GString *out, const RfResults *results,
                          const RfFigureSet *figures);               /* report_pool.c */
void rf_report_pool_sources(GString *out, const RfResults *results); /* report_pool.c */
void rf_report_bench(GString *out, const GPtrArray *charts, const RfFigureSet *figures);
