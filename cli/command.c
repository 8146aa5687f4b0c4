#include "cli/command.h"

#include "cli/version.h"

#include <inttypes.h>
#include <signal.h>
#include <stdatomic.h>
#include <stdio.h>
#include <string.h>
#include <unistd.h>

G_DEFINE_QUARK(rf-command-error, rf_command_error)

static RfCommonOptions common;
static volatile sig_atomic_t is_cancelled;

const RfCommonOptions *rf_command_common(void)
{
    return &common;
}

int rf_command_is_cancelled(void)
{
    return is_cancelled;
}

static void on_signal(int number)
{
    is_cancelled = number;
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
        g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "%u arguments given, one expected: %s", n, what);
    return false;
}

bool rf_command_required(const char *value, const char *option, const char *what, GError **error)
{
    if (value && *value)
        return true;
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
    fprintf(stderr, "\r%s  [%.*s%*s] %3.0f %%  %d:%02d left\033[K", label, bar, "##############################",
            30 - bar, "", 100 * share, left_s / 60, left_s % 60);
}

void rf_command_progress(const char *label, int64_t done, int64_t total)
{
    static _Atomic int64_t last_us, start_us; /* drawing may be asked for from any worker */
    if (common.is_quiet || !isatty(STDERR_FILENO))
        return;
    int64_t now_us = g_get_monotonic_time();
    if (done == 0 || start_us == 0)
        start_us = now_us;
    if (now_us - last_us < 100000 && done < total)
        return;
    last_us = now_us;
    draw_progress(label, done, total, (double)(now_us - start_us) / 1e6);
}

void rf_command_progress_end(void)
{
    if (!common.is_quiet && isatty(STDERR_FILENO))
        fputs("\r\033[K", stderr);
}

static void print_overview(FILE *to, const RfCommand *const *commands)
{
    fputs("usage: risefall COMMAND [OPTIONS]\n\n"
          "From a recording of a droplet charge cell to charges with their uncertainty.\n\n",
          to);
    for (; *commands; commands++)
        fprintf(to, "  %-10s %s\n", (*commands)->verb, (*commands)->purpose);
    fputs("\n'risefall COMMAND --help' tells more, with an example.\n"
          "'risefall --version' names the version.\n",
          to);
}

static const RfCommand *find_command(const char *verb, const RfCommand *const *commands)
{
    for (; *commands; commands++)
        if (g_str_equal((*commands)->verb, verb))
            return *commands;
    return NULL;
}

static GOptionContext *new_context(const RfCommand *command)
{
    const GOptionEntry shared[] = {
        {"quiet", 'q', 0, G_OPTION_ARG_NONE, &common.is_quiet, "no progress, no summary", NULL},
        {"threads", 0, 0, G_OPTION_ARG_INT, &common.threads, "worker threads (default: one per core)", "N"},
        {0},
    };
    GOptionContext *context = g_option_context_new(command->arguments);
    g_option_context_set_summary(context, command->purpose); /* a line of its own: 80 columns must do */
    g_autofree char *example = g_strdup_printf("Example:\n%s", command->example);
    g_option_context_set_description(context, example);
    if (command->entries)
        g_option_context_add_main_entries(context, command->entries, NULL);
    g_option_context_add_main_entries(context, shared, NULL);
    return context;
}

static bool parse_options(const RfCommand *command, int *argc, char ***argv, GError **error)
{
    g_autofree char *program = g_strdup_printf("risefall %s", command->verb);
    g_set_prgname(program);
    g_autoptr(GOptionContext) context = new_context(command);
    if (!g_option_context_parse(context, argc, argv, error))
        return false;
    if (common.threads >= 0 && common.threads <= 512)
        return true;
    g_set_error(error, RF_COMMAND_ERROR, RF_COMMAND_ERROR_USAGE, "--threads=%d: a number from 1 to 512 is needed",
                common.threads);
    return false;
}

static RfExit report_failure(const RfCommand *command, RfExit code, const GError *error)
{
    if (!error)
        return code;
    fprintf(stderr, "risefall: %s\n", error->message);
    bool is_usage = error->domain == G_OPTION_ERROR || error->domain == RF_COMMAND_ERROR;
    if (is_usage)
        fprintf(stderr, "'risefall %s --help' shows how it is called\n", command->verb);
    return is_usage ? RF_EXIT_USAGE : code;
}

static RfExit run_command(const RfCommand *command, int argc, char **argv)
{
    g_autoptr(GError) error = NULL;
    g_autofree char **rest = g_memdup2(argv, sizeof(char *) * (size_t)(argc + 1)); /* GOption reorders in place */
    if (!parse_options(command, &argc, &rest, &error))
        return report_failure(command, RF_EXIT_USAGE, error);
    catch_signals();
    RfExit code = command->run(rest + 1, &error);
    rf_command_progress_end();
    return report_failure(command, code, error);
}

int rf_command_main(int argc, char **argv, const RfCommand *const *commands)
{
    if (argc < 2 || g_str_equal(argv[1], "--help") || g_str_equal(argv[1], "-h") || g_str_equal(argv[1], "help")) {
        print_overview(argc < 2 ? stderr : stdout, commands);
        return argc < 2 ? RF_EXIT_USAGE : RF_EXIT_DONE;
    }
    if (g_str_equal(argv[1], "--version")) {
        puts("risefall " RF_VERSION);
        return RF_EXIT_DONE;
    }
    const RfCommand *command = find_command(argv[1], commands);
    if (command)
        return run_command(command, argc - 1, argv + 1);
    fprintf(stderr, "risefall: no command '%s'\n'risefall --help' lists the commands\n", argv[1]);
    return RF_EXIT_USAGE;
}
