#include "cli/plotter.h"

#include <glib.h>
#include <stdint.h>

char *rf_plotter_script(const char *name, const char *title, const RfPlotterSize *size, const char *body)
{
    return g_strdup_printf(
        "# %s. Run in this folder: gnuplot %s.gp\n"
        "reset\nset encoding utf8\nset key off\nset border 3 lw 0.8\nset tics nomirror out scale 0.5\n"
        "set grid lt 1 lc rgb '#808080' lw 0.4\n"
        "set terminal svg size %s dynamic enhanced font 'sans-serif,14'\nset output '%s.svg'\n%s"
        "set output\n"
        "if (strstrt(GPVAL_TERMINALS, 'pdfcairo') > 0) {\n"
        "  set terminal pdfcairo size %s enhanced font 'sans,9'\n  set output '%s.pdf'\n  replot\n"
        "  set output\n}\n",
        title, name, size->screen, name, body, size->page, name);
}

/* Fixed surroundings: nobody's start-up file, locale or clock in the picture. */
bool rf_plotter_run(const char *program, const char *inside, const char *const *scripts, char **complaint)
{
    const char *const surroundings[] = {"PATH=/usr/local/bin:/usr/bin:/bin", "LC_ALL=C.UTF-8",
                                        "HOME=/nonexistent", "SOURCE_DATE_EPOCH=0", NULL};
    g_autoptr(GPtrArray) arguments = g_ptr_array_new();
    g_autoptr(GError) error = NULL;
    g_autofree char *talk = NULL;
    int status = 0;
    g_ptr_array_add(arguments, (void *)(uintptr_t)program);
    g_ptr_array_add(arguments, (void *)(uintptr_t) "-d");
    for (size_t i = 0; scripts[i]; i++) g_ptr_array_add(arguments, (void *)(uintptr_t)scripts[i]);
    g_ptr_array_add(arguments, NULL);
    bool is_done = g_spawn_sync(inside, (char **)arguments->pdata, (char **)surroundings,
                                G_SPAWN_STDOUT_TO_DEV_NULL | G_SPAWN_CLOEXEC_PIPES, NULL, NULL, NULL, &talk,
                                &status, &error) &&
                   g_spawn_check_wait_status(status, &error);
    if (!is_done)
        *complaint =
            g_strdup_printf("%s: %s%s%s", scripts[0], error->message, talk && *talk ? "; it said: " : "",
                            talk && *talk ? g_strstrip(talk) : "");
    return is_done;
}
