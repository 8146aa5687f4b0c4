#include "cli/command.h"

#include "cli/help.h"
#include "cli/likeness.h"
#include "cli/version.h"

#include <inttypes.h>
#include <signal.h>
#include <stdatomic.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

G_DEFINE_QUARK(rf - command - error, rf_command_error)

const RfCommand *const rf_commands[] = {
#define RF_COMMAND(verb) &rf_command_##verb,
#include "cli/commands.inc"
#undef RF_COMMAND
    NULL,
};

static RfCommonOptions common;
static volatile sig_atomic_t is_cancelled, is_held;

const RfCommonOptions *rf_command_common(void)
{
    return &common;
}

int rf_command_is_cancelled(void)
{
    return is_cancelled;
}

const RfCommand *rf_command_find(const char *verb)
{
    for (const RfCommand *const *command = rf_commands; *command; command++)
        if (g_str_equal((*command)->verb, verb)) return *command;
    return NULL;
}

static void stop(void)
{
    static const char clear[] = "\r\033[K", text[] = "risefall: stopped on request\n";
    if (isatty(STDERR_FILENO) && write(STDERR_FILENO, clear, sizeof clear - 1) < 0)
        _exit(RF_EXIT_INPUT);
    ssize_t written = write(STDERR_FILENO, text, sizeof text - 1);
    _exit(written < 0 ? RF_EXIT_USAGE : RF_EXIT_INPUT);
}

static void on_signal(int number)
{
    is_cancelled = number;
    if (!is_held)
        stop();
}

void rf_command_hold_signals(void)
{
    is_held = 1;
}

void rf_command_release_signals(void)
{
    is_held = 0;
    if (is_cancelled)
        stop();
}

static void catch_signals(void)
{
    struct sigaction action = {.sa_handler = on_signal, .sa_flags = SA_RESETHAND}; /* a second Ctrl-C kills */
    sigaction(SIGINT, &action, NULL);
    sigaction(SIGTERM, &action, NULL);
}

bool rf_command_one_argument(char **arguments, const char *what, const char **argument, GError **error)
{
    guint n = arguments ? g_strv_length(arguments) : 0;
    if (n == 1) {
        *argument = arguments[0];
        return true;
    }
    if (n == 0)
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "missing argument: %s", what);
    else
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "%u arguments given, one expected: %s",
                    n, what);
    return false;
}

bool rf_command_required(const char *value, const char *option, const char *what, GError **error)
{
    if (value && *value) return true;
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "missing option: %s %s", option, what);
    return false;
}

static void draw_progress(const char *label, int64_t done, int64_t total, double elapsed_s)
{
    if (total <= 0) {
        fprintf(stderr, "\r%s  %" PRId64 "  \033[K", label, done);
        return;
    }
    double share = MIN(1.0, (double)done / (double)total);
    int left_s = share > 0 ? (int)(elapsed_s * (1 - share) / share + 0.5) : 0;
    int bar = (int)(share * 30);
    fprintf(stderr, "\r%s  [%.*s%*s] %3.0f %%  %d:%02d left\033[K", label, bar,
            "##############################", 30 - bar, "", 100 * share, left_s / 60, left_s % 60);
}

void rf_command_progress(const char *label, int64_t done, int64_t total)
{
    static _Atomic int64_t last_us, start_us; /* drawing may be asked for from any worker */
    if (common.is_quiet || !isatty(STDERR_FILENO)) return;
    int64_t now_us = g_get_monotonic_time();
    if (done == 0 || start_us == 0) start_us = now_us;
    if (now_us - last_us < 100000 && done < total) return;
    last_us = now_us;
    draw_progress(label, done, total, (double)(now_us - start_us) / 1e6);
}

void rf_command_progress_end(void)
{
    if (!common.is_quiet && isatty(STDERR_FILENO)) fputs("\r\033[K", stderr);
}

static const GOptionEntry shared_options[] = {
    {"quiet", 'q', 0, G_OPTION_ARG_NONE, &common.is_quiet, "no progress, no summary", NULL},
    {"threads", 0, 0, G_OPTION_ARG_INT, &common.threads, "worker threads (default: one per core)", "N"},
};
static const GOptionEntry json_option = {
    "json", 0, 0, G_OPTION_ARG_NONE, &common.as_json, "the result as JSON on stdout, for scripts", NULL};
static const GOptionEntry ledger_option = {
    "ledger", 0, 0, G_OPTION_ARG_FILENAME, &common.ledger,
    "the ledger ('' for none; see risefall help ledger)", "FILE"};

GOptionEntry *rf_command_options(const RfCommand *command)
{
    GArray *options = g_array_new(TRUE, FALSE, sizeof(GOptionEntry));
    for (const GOptionEntry *own = command->entries; own && own->long_name; own++)
        g_array_append_val(options, *own);
    if (command->has_json) g_array_append_val(options, json_option);
    if (command->has_ledger) g_array_append_val(options, ledger_option);
    g_array_append_vals(options, shared_options, G_N_ELEMENTS(shared_options));
    return (GOptionEntry *)(void *)g_array_free(options, FALSE);
}

static const char *like_option(const RfCommand *command, const char *word)
{
    g_autofree GOptionEntry *options = rf_command_options(command);
    g_autoptr(GPtrArray) names = g_ptr_array_new();
    for (const GOptionEntry *option = options; option->long_name; option++)
        g_ptr_array_add(names, (char *)option->long_name);
    return rf_likeness_nearest(word, (const char *const *)names->pdata, names->len);
}

static GOptionContext *new_context(const RfCommand *command)
{
    GOptionContext *context = g_option_context_new(NULL);
    g_option_context_set_help_enabled(context, FALSE); /* help.c knows what fits a page */
    g_autofree GOptionEntry *options = rf_command_options(command);
    g_option_context_add_main_entries(context, options, NULL);
    return context;
}

/* GOption's word, begun as our own messages begin; for an option that there isn't, the one that may have been meant. */
static void refuse_options(const RfCommand *command, const GError *complaint, GError **error)
{
    g_autoptr(GString) text = g_string_new(complaint->message);
    text->str[0] = (char)g_ascii_tolower(text->str[0]);
    const char *word = strstr(text->str, " --");
    const char *like = g_error_matches(complaint, G_OPTION_ERROR, G_OPTION_ERROR_UNKNOWN_OPTION) && word
                           ? like_option(command, word + 3)
                           : NULL;
    if (like) g_string_append_printf(text, "; did you mean --%s?", like);
    g_set_error_literal(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, text->str);
}

static bool parse_options(const RfCommand *command, int *argc, char ***argv, GError **error)
{
    g_autofree char *program = g_strdup_printf("risefall %s", command->verb);
    g_set_prgname(program);
    g_autoptr(GOptionContext) context = new_context(command);
    g_autoptr(GError) complaint = NULL;
    if (!g_option_context_parse(context, argc, argv, &complaint)) {
        refuse_options(command, complaint, error);
        return false;
    }
    if (common.threads >= 0 && common.threads <= 512) return true;
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE,
                "--threads=%d: a number from 1 to 512 is needed", common.threads);
    return false;
}

static RfExit report_failure(const RfCommand *command, RfExit code, const GError *error)
{
    if (!error) return code;
    fprintf(stderr, "risefall: %s\n", error->message);
    bool is_usage = error->domain == G_OPTION_ERROR || error->domain == RF_COMMAND_ERROR;
    if (is_usage) fprintf(stderr, "'risefall %s --help' shows how it is called\n", command->verb);
    return is_usage ? RF_EXIT_USAGE : code;
}

static bool asks_for_help(char **arguments)
{
    for (; *arguments && !g_str_equal(*arguments, "--"); arguments++)
        if (g_str_equal(*arguments, "--help") || g_str_equal(*arguments, "-h")) return true;
    return false;
}

static RfExit run_command(const RfCommand *command, int argc, char **argv)
{
    g_autoptr(GError) error = NULL;
    g_autofree char **rest =
        g_memdup2(argv, sizeof(char *) * (size_t)(argc + 1)); /* GOption reorders in place */
    if (asks_for_help(rest)) {
        rf_help_command(command);
        return RF_EXIT_DONE;
    }
    if (!parse_options(command, &argc, &rest, &error)) return report_failure(command, RF_EXIT_USAGE, error);
    catch_signals();
    RfExit code = command->run(rest + 1, &error);
    rf_command_progress_end();
    return report_failure(command, code, error);
}

int rf_command_main(int argc, char **argv)
{
    const char *first = argc > 1 ? argv[1] : NULL;
    if (!first) {
        rf_help_overview(stderr);
        return RF_EXIT_USAGE;
    }
    if (g_str_equal(first, "--help") || g_str_equal(first, "-h")) {
        rf_help_overview(stdout);
        return RF_EXIT_DONE;
    }
    if (g_str_equal(first, "help")) return rf_help_topic(argc > 2 ? argv[2] : NULL, argc - 2);
    if (g_str_equal(first, "--version")) {
        puts("risefall " RF_VERSION);
        return RF_EXIT_DONE;
    }
    const RfCommand *command = rf_command_find(first);
    if (command) return run_command(command, argc - 1, argv + 1);
    if (*first == '-') {
        fprintf(stderr, "risefall: %s: a command comes first, as in 'risefall run %s'\n'risefall --help' lists the commands\n",
                first, first);
        return RF_EXIT_USAGE;
    }
    return rf_help_no_such("command", first);
}
