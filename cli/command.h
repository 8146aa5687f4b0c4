/* What every subcommand is, and what they share: options, help, manual, completion, progress.
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
    const char *name, *what;
} RfCommandFile;

typedef struct {
    const char *verb;
    const char *arguments; /* "SHEET --out DIR"; SHEET, SCENE, DIR, X.csv before the first option steer completion */
    const char *purpose;   /* one sentence */
    const char *details;   /* for the manual: paragraphs with an empty line between; NULL: purpose says it all */
    const char *example;   /* one worked example: a command line, indented by two, and what it leaves behind */
    const RfCommandFile *files; /* for the manual: what it leaves behind, to an empty row; or NULL */
    const GOptionEntry *entries; /* the value's name steers completion: DIR, FILE, or words as in "grid|vertical" */
    bool has_json; /* takes --json: rf_command_common()->as_json */
    bool has_ledger; /* takes --ledger: rf_command_common()->ledger */
    /* Options are parsed; `arguments` are what is left. Errors are left in `error` for main.c to print once. */
    RfExit (*run)(char **arguments, GError **error);
} RfCommand;

/* Every command of `verbs` in cli/meson.build: rf_command_run and so on. */
#define RF_COMMAND(verb) extern const RfCommand rf_command_##verb;
#include "cli/commands.inc"
#undef RF_COMMAND

/* In the order in which help lists them, to a NULL. */
extern const RfCommand *const rf_commands[];

/* NULL if there is no such command. */
const RfCommand *rf_command_find(const char *verb);

/* The command's own options, then those that every command has, to an empty row. Texts are static.
 * (returns new; g_free) */
GOptionEntry *rf_command_options(const RfCommand *command);

/* Options that commands share; filled before `run` is called. */
typedef struct {
    int is_quiet; /* GOption writes ints */
    int as_json;  /* the result as JSON on stdout, and nothing else there; only where has_json */
    int threads;  /* 0: as many as the machine has cores */
    char *ledger; /* NULL: where it usually is (ledger.h); only where has_ledger */
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

/* SIGINT and SIGTERM end the program at once, whatever it computes; but between these two, where a temporary folder has to be
 * taken away first: there they only set rf_command_is_cancelled(), and release ends the program. result_folder.c calls both. */
void rf_command_hold_signals(void);
void rf_command_release_signals(void);
int rf_command_is_cancelled(void);

int rf_command_main(int argc, char **argv);
