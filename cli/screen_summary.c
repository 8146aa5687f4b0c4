#include "cli/screen_summary.h"

#include <glib.h>
#include <math.h>
#include <string.h>
#include <sys/ioctl.h>
#include <unistd.h>

#include "cli/tally.h"
#include "cli/text_number.h"
#include "cli/text_wrap.h"

enum { LABEL = 17, TABLE = 74, LEAST_LINES = 20, MOST_LINES = 60, KINDS_SHOWN = 3 };

static bool wants_colour(int fd)
{
    const char *refusal = g_getenv("NO_COLOR"), *terminal = g_getenv("TERM");
    if (refusal && *refusal) return false;
    return isatty(fd) && terminal && strcmp(terminal, "dumb") != 0;
}

RfScreen rf_screen_on(int fd)
{
    struct winsize size = {.ws_row = 24};
    if (ioctl(fd, TIOCGWINSZ, &size) != 0 || size.ws_row == 0) size.ws_row = 24;
    return (RfScreen){CLAMP((int)size.ws_row - 1, LEAST_LINES, MOST_LINES), rf_text_wrap_terminal_columns(fd),
                      wants_colour(fd)};
}

/* ---- lines with a label ---- */

static void styled(GString *out, bool colour, const char *code, const char *text)
{
    if (colour)
        g_string_append_printf(out, "\033[%sm%s\033[0m", code, text);
    else
        g_string_append(out, text);
}

/* Wrapped; the first `n_styled` bytes of the text in colour. */
static void labelled(GString *out, const RfScreen *screen, const char *label, const char *text,
                     const char *code, size_t n_styled)
{
    g_string_append_printf(out, "%-*s", LABEL, label);
    const gsize at = out->len;
    rf_text_wrap_append(out, text, LABEL, screen->columns, true);
    if (!screen->colour || n_styled == 0) return;
    g_autofree char *begin = g_strdup_printf("\033[%sm", code);
    g_string_insert(out, (gssize)(at + n_styled), "\033[0m");
    g_string_insert(out, (gssize)at, begin);
}

static void plain(GString *out, const RfScreen *screen, const char *label, const char *format, ...)
    G_GNUC_PRINTF(4, 5);
static void plain(GString *out, const RfScreen *screen, const char *label, const char *format, ...)
{
    va_list arguments;
    va_start(arguments, format);
    g_autofree char *text = g_strdup_vprintf(format, arguments);
    va_end(arguments);
    labelled(out, screen, label, text, NULL, 0);
}

static void verdict(GString *out, const RfResults *results, const RfScreen *screen)
{
    if (screen->colour) g_string_append(out, "\033[1m");
    rf_text_wrap_append(out, results->verdict ? results->verdict : "No verdict was reached.", 0,
                        screen->columns, false);
    if (screen->colour) g_string_append(out, "\033[0m");
    g_string_append_c(out, '\n');
}

static void unit(GString *out, const RfUnitResult *found, const RfScreen *screen)
{
    static const char unresolved[] = "not resolved";
    if (found->resolved) {
        g_autofree char *value = rf_text_number_concise_scaled(found->unit_C, -19),
                        *text = g_strconcat(value, "e-19 C", NULL);
        labelled(out, screen, "unit of charge", text, "32", strlen(text));
    } else {
        const char *reason = found->reason && *found->reason ? found->reason : "no reason given";
        g_autofree char *text = g_strdup_printf("%s: %s", unresolved, reason);
        labelled(out, screen, "unit of charge", text, "33", strlen(unresolved));
    }
}

/* ---- why spells were set aside ---- */

/* "charge too uncertain" of "charge too uncertain: u = 2e-20 C, seen ..." (returns new) */
static char *kind_of(const char *reason)
{
    return g_strndup(reason, strcspn(reason, ":"));
}

typedef struct {
    char *kind;
    unsigned spells;
} Kind;

static void clear_kind(Kind *kind)
{
    g_free(kind->kind);
}

static void count_kind(GArray *kinds, const char *reason)
{
    g_autofree char *name = kind_of(*reason ? reason : "no reason given");
    for (guint i = 0; i < kinds->len; i++) {
        Kind *known = &g_array_index(kinds, Kind, i);
        if (strcmp(known->kind, name) != 0) continue;
        known->spells++;
        return;
    }
    const Kind fresh = {g_steal_pointer(&name), 1};
    g_array_append_val(kinds, fresh);
}

static int by_count(const void *one, const void *other)
{
    const unsigned a = ((const Kind *)one)->spells, b = ((const Kind *)other)->spells;
    return (a < b) - (a > b);
}

static void set_aside(GString *out, const RfResults *results, const RfScreen *screen)
{
    g_autoptr(GArray) kinds = g_array_new(FALSE, FALSE, sizeof(Kind));
    g_array_set_clear_func(kinds, (GDestroyNotify)clear_kind);
    for (guint i = 0; i < results->droplets->len; i++) {
        const RfDropletRow *row = &g_array_index(results->droplets, RfDropletRow, i);
        if (!row->accepted) count_kind(kinds, row->reason);
    }
    if (kinds->len == 0) return;
    g_array_sort(kinds, by_count); /* stable: of equals the first met */
    unsigned others = 0;
    for (guint i = 0; i < kinds->len; i++) {
        const Kind *kind = &g_array_index(kinds, Kind, i);
        if (i < KINDS_SHOWN)
            plain(out, screen, i == 0 ? "set aside" : "", "%u: %s", kind->spells, kind->kind);
        else
            others += kind->spells;
    }
    if (others) plain(out, screen, "", "%u: other reasons", others);
}

static void counts(GString *out, const RfResults *results, const RfScreen *screen)
{
    const RfTally tally = rf_tally_droplets(results);
    plain(out, screen, "droplets", "%u accepted, %u set aside", tally.droplets_accepted,
          tally.droplets - tally.droplets_accepted);
    set_aside(out, results, screen);
    plain(out, screen, "events", "%u field switches, %u charge steps", results->switches->len,
          results->steps->len);
    const RfBudgetRow *limit = rf_tally_limiting_input(results);
    if (!limit) return;
    char percent[G_ASCII_DTOSTR_BUF_SIZE];
    plain(out, screen, "limited by", "%s: %s %% of a typical charge", limit->input,
          g_ascii_formatd(percent, sizeof percent, "%.2g", 100 * fabs(limit->charge_relative_u)));
}

static void warnings(GString *out, const RfResults *results, const RfScreen *screen, const char *where)
{
    if (results->warnings->len) plain(out, screen, "warnings", "%u, in %s", results->warnings->len, where);
}

/* ---- the table ---- */

/* Right-aligned in `width` columns, with a blank before it. */
static void column(GString *out, const char *text, int width)
{
    g_string_append_printf(out, " %*s", width, text);
}

/* As much of the reason as the line has room for. */
static void reason(GString *out, const char *text, int room)
{
    if (!*text || room < 12) return;
    const int width = rf_text_wrap_width(text);
    if (width <= room - 2) {
        g_string_append_printf(out, ": %s", text);
        return;
    }
    g_autofree char *valid = g_utf8_make_valid(text, -1), *cut = g_utf8_substring(valid, 0, room - 5);
    char *last = strrchr(cut, ' ');
    if (last) *last = '\0'; /* whole words */
    g_string_append_printf(out, ": %s ...", cut);
}

static void droplet(GString *out, const RfDropletRow *row, const RfScreen *screen)
{
    const bool is_fitted = row->radius_um.value > 0;
    g_autofree char *fall = is_fitted ? rf_text_number_concise(row->fall_mm_s) : g_strdup("-"),
                    *radius = is_fitted ? rf_text_number_concise(row->radius_um) : g_strdup("-");
    g_autofree char *charge =
        row->has_charge ? rf_text_number_concise_scaled(row->charge_C, -19) : g_strdup("-");
    g_autofree char *units = row->has_units ? g_strdup_printf("%+d", row->units) : g_strdup("-");
    g_string_append_printf(out, "%7u %5u", row->droplet, row->spell);
    column(out, fall, 14);
    column(out, radius, 12);
    column(out, charge, 14);
    column(out, row->units == 0 && row->has_units ? "0" : units, 6);
    g_string_append(out, "  ");
    styled(out, screen->colour, row->accepted ? "32" : "33", row->accepted ? "accepted" : "set aside");
    if (!row->accepted) reason(out, row->reason, screen->columns - TABLE);
    g_string_append_c(out, '\n');
}

/* Rows of one verdict, up to `room`; how many were shown. */
static unsigned rows_of(GString *out, const GArray *rows, bool accepted, unsigned room,
                        const RfScreen *screen)
{
    unsigned shown = 0;
    for (guint i = 0; i < rows->len && shown < room; i++) {
        const RfDropletRow *row = &g_array_index(rows, RfDropletRow, i);
        if (row->accepted != accepted) continue;
        droplet(out, row, screen);
        shown++;
    }
    return shown;
}

static void table(GString *out, const GArray *rows, int room, const RfScreen *screen)
{
    if (rows->len == 0 || room < 4) return;
    g_string_append(out, "\ndroplet spell      fall mm/s    radius um   charge e-19C  units  verdict\n");
    const unsigned most = (int)rows->len <= room - 2 ? rows->len : (unsigned)(room - 3);
    unsigned shown = rows_of(out, rows, true, most, screen);
    shown += rows_of(out, rows, false, most - shown, screen);
    if (shown < rows->len)
        g_string_append_printf(out, "        and %u more rows in droplets.csv\n", rows->len - shown);
}

/* ---- the page ---- */

static int count_lines(const GString *text)
{
    int lines = 0;
    for (const char *c = text->str; *c; c++) lines += *c == '\n';
    return lines;
}

char *rf_screen_summary_new(const RfResults *results, const char *out_folder, const RfScreen *screen)
{
    g_autoptr(GString) out = g_string_new(NULL);
    verdict(out, results, screen);
    unit(out, &results->unit, screen);
    counts(out, results, screen);
    warnings(out, results, screen, "the report and summary.json");
    const int below = out_folder ? 2 : 0;
    table(out, results->droplets, screen->lines - count_lines(out) - below, screen);
    if (out_folder) g_string_append_printf(out, "\nreport           %s/report.html\n", out_folder);
    return g_string_free(g_steal_pointer(&out), FALSE);
}

static unsigned paths_in(const RfResults *results)
{
    unsigned paths = 0, last = 0;
    for (guint i = 0; i < results->paths->len; i++) { /* by droplet */
        const unsigned number = g_array_index(results->paths, RfPathRow, i).droplet;
        paths += i == 0 || number != last;
        last = number;
    }
    return paths;
}

char *rf_screen_summary_paths_new(const RfResults *results, const char *out_folder, const RfScreen *screen)
{
    g_autoptr(GString) out = g_string_new(NULL);
    verdict(out, results, screen);
    if (results->recording_summary) plain(out, screen, "recording", "%s", results->recording_summary);
    plain(out, screen, "paths", "%u droplets, %u positions", paths_in(results), results->paths->len);
    if (results->scale.found) {
        g_autofree char *across =
            rf_text_number_concise((RfValue){results->scale.px_per_mm_x, results->scale.u_px_per_mm_x});
        g_autofree char *down =
            rf_text_number_concise((RfValue){results->scale.px_per_mm_y, results->scale.u_px_per_mm_y});
        plain(out, screen, "scale", "%s across, %s down, in px/mm", across, down);
    }
    warnings(out, results, screen, "summary.json");
    if (out_folder) g_string_append_printf(out, "\nresult           %s/paths.csv\n", out_folder);
    return g_string_free(g_steal_pointer(&out), FALSE);
}
