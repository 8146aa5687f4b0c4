#include "cli/pager.h"

#include <glib.h>
#include <signal.h>
#include <stdbool.h>
#include <stdio.h>
#include <sys/ioctl.h>
#include <unistd.h>

static bool fits_the_screen(const char *text)
{
    struct winsize size = {0};
    if (!isatty(STDOUT_FILENO) || ioctl(STDOUT_FILENO, TIOCGWINSZ, &size) != 0) return true;
    int lines = 1; /* the prompt that follows */
    for (const char *c = text; *c; c++) lines += *c == '\n';
    return size.ws_row == 0 || lines <= size.ws_row;
}

static const char *pager(void)
{
    const char *chosen = g_getenv("PAGER");
    if (chosen && *chosen) return chosen;
    g_autofree char *less = g_find_program_in_path("less");
    return less ? "less" : NULL;
}

void rf_pager_show(const char *text)
{
    const char *program = fits_the_screen(text) ? NULL : pager();
    if (program) {
        fflush(stdout);
        void (*before)(int) = signal(SIGPIPE, SIG_IGN); /* a pager that is left early is no failure */
        FILE *to = popen(program, "w");
        if (to) fputs(text, to);
        const bool is_shown = to && pclose(to) != 127 << 8; /* the shell's word for no such program */
        signal(SIGPIPE, before);
        if (is_shown) return;
    }
    fputs(text, stdout);
}
