/* What every subcommand is to main.c, and what they share: the help page, the common options, progress.
 * Not for the work itself: each command_<verb>.c calls pipeline.c or its own file for that. */
#pragma once

#include <glib.h>
#include <stdbool.h>
#include <stdint.h>

typedef enum {
    RF_EXIT_DONE = 0,
    RF_EXIT_INPUT = 1,        /* bad input: the message says what was seen, what was needed and where */
    RF_EXIT_USAGE = 2,        /* unknown command or option, missing argument */
    RF_EXIT_NOT_MEASURED = 3, /* ran, but nothing could be measured; the report says why */
} RfExit;

typedef struct {
    const char *verb;
    const char *arguments; /* "SHEET --out DIR" */
    const char *purpose;   /* one sentence */
    const char *example;   /* one worked example: a command line and what it leaves behind */
    const GOptionEntry *entries;
    /* Options are parsed; `arguments` are what is left. Errors are left in `error` for main.c to print once. */
    RfExit (*run)(char **arguments, GError **error);
} RfCommand;

extern const RfCommand rf_command_audit, rf_command_calibrate, rf_command_charge, rf_command_check, rf_command_paths,
    rf_command_plan, rf_command_run, rf_command_simulate;

/* Options that every command has; filled before `run` is called. */
typedef struct {
    int is_quiet; /* GOption writes an int */
    int threads; /* 0: as many as the machine has cores */
} RfCommonOptions;

const RfCommonOptions *rf_command_common(void);

typedef enum {
    RF_COMMAND_ERROR_USAGE,
} RfCommandError;

#define RF_COMMAND_ERROR (rf_command_error_quark())
GQuark rf_command_error_quark(void);

/* Exactly one argument, or RF_COMMAND_ERROR_USAGE saying what was expected. */
bool rf_command_one_argument(char **arguments, const char *what, const char **argument, GError **error);

/* A required option's value, or RF_COMMAND_ERROR_USAGE. */
bool rf_command_required(const char *value, const char *option, const char *what, GError **error);

/* Draws "label  42 %  00:13 left" on stderr while it is a terminal and --quiet isn't given; total <= 0: unknown. */
void rf_command_progress(const char *label, int64_t done, int64_t total);
void rf_command_progress_end(void);

/* Set by SIGINT and SIGTERM; long work polls it and ends cleanly. */
int rf_command_is_cancelled(void);

int rf_command_main(int argc, char **argv, const RfCommand *const *commands);
