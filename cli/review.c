#include "cli/review.h"

#include <string.h>

#include "calib/table.h"

G_DEFINE_QUARK(rf - review - error - quark, rf_review_error)

enum { NONE = -1, MOST_WORDS = 1000 };

static const double longest_s = 1e7, farthest_px = 1e6;

static const char *const actions[] = {"set aside", "restore", "cut", "join"};

const char *rf_review_action_to_string(RfReviewAction action)
{
    return actions[action];
}

const char *rf_review_outcome_to_string(RfReviewOutcome outcome)
{
    switch (outcome) {
    case RF_REVIEW_HONOURED:
        return "honoured";
    case RF_REVIEW_ALREADY:
        return "was so already";
    case RF_REVIEW_NOT_POSSIBLE:
        return "not possible";
    case RF_REVIEW_NOT_FOUND:
        break;
    }
    return "droplet not found";
}

void rf_review_settle(RfReviewRow *row, RfReviewOutcome outcome, char *detail)
{
    row->outcome = outcome;
    g_free(row->detail);
    row->detail = detail;
}

char *rf_review_recording(const RfResults *results)
{
    GString *digests = g_string_new(NULL);
    for (guint i = 0; i < results->inputs->len; i++) {
        const RfInputFile *file = &g_array_index(results->inputs, RfInputFile, i);
        if (strcmp(file->role, "recording") == 0)
            g_string_append_printf(digests, "%s%s", digests->len ? " " : "", file->sha256);
    }
    return g_string_free(digests, FALSE);
}

typedef struct {
    const RfTable *table;
    int action, droplet, time, x, y, cut, other_droplet, other_time, other_x, other_y, reason, name, date,
        recording; /* NONE: not there */
} Sheet;

static bool find_columns(Sheet *sheet, GError **error)
{
    const struct {
        const char *name;
        int *column;
        bool is_needed;
    } columns[] = {
        {"action", &sheet->action, true},
        {"droplet", &sheet->droplet, true},
        {"time_s", &sheet->time, true},
        {"x_px", &sheet->x, true},
        {"y_px", &sheet->y, true},
        {"reason", &sheet->reason, true},
        {"name", &sheet->name, true},
        {"cut_s", &sheet->cut, false},
        {"other_droplet", &sheet->other_droplet, false},
        {"other_time_s", &sheet->other_time, false},
        {"other_x_px", &sheet->other_x, false},
        {"other_y_px", &sheet->other_y, false},
        {"date", &sheet->date, false},
        {"recording_sha256", &sheet->recording, false},
    };
    for (size_t i = 0; i < G_N_ELEMENTS(columns); i++) {
        size_t found;
        *columns[i].column = rf_table_find(sheet->table, columns[i].name);
        if (columns[i].is_needed && !rf_table_require(sheet->table, columns[i].name, &found, error))
            return false;
    }
    return true;
}

static const char *text_at(const Sheet *sheet, size_t row, int column)
{
    return column == NONE ? "" : rf_table_text(sheet->table, row, (size_t)column);
}

/* A column that only some actions need. */
static bool require(const Sheet *sheet, int column, const char *name, GError **error)
{
    size_t found;
    return column != NONE || rf_table_require(sheet->table, name, &found, error);
}

static bool refuse(const Sheet *sheet, size_t row, int column, const char *needed, GError **error)
{
    rf_table_cell_error(sheet->table, row, (size_t)column, needed, error);
    return false;
}

static bool read_action(const Sheet *sheet, size_t row, RfReviewAction *action, GError **error)
{
    const char *text = text_at(sheet, row, sheet->action);
    for (size_t i = 0; i < G_N_ELEMENTS(actions); i++)
        if (g_ascii_strcasecmp(text, actions[i]) == 0) {
            *action = (RfReviewAction)i;
            return true;
        }
    return refuse(sheet, row, sheet->action, "set aside, restore, cut or join", error);
}

static bool read_number(const Sheet *sheet, size_t row, int column, double least, double most,
                        const char *needed, double *number, GError **error)
{
    if (!rf_table_number(sheet->table, row, (size_t)column, number, error)) return false;
    return (*number >= least && *number <= most) || refuse(sheet, row, column, needed, error);
}

static bool read_time(const Sheet *sheet, size_t row, int column, double *time_s, GError **error)
{
    return read_number(sheet, row, column, 0, longest_s, "seconds since the recording's first frame", time_s,
                       error);
}

static bool read_pixels(const Sheet *sheet, size_t row, int column, double *at_px, GError **error)
{
    return read_number(sheet, row, column, -farthest_px, farthest_px, "a place in the picture, in pixels",
                       at_px, error);
}

static bool read_droplet(const Sheet *sheet, size_t row, int column, unsigned *droplet, GError **error)
{
    guint64 number;
    if (!rf_table_whole(sheet->table, row, (size_t)column, &number, error)) return false;
    if (number < 1 || number > G_MAXUINT)
        return refuse(sheet, row, column, "a droplet's number, from 1", error);
    *droplet = (unsigned)number;
    return true;
}

static bool read_place(const Sheet *sheet, size_t row, RfReviewPlace *place, GError **error)
{
    return read_droplet(sheet, row, sheet->droplet, &place->droplet, error) &&
           read_time(sheet, row, sheet->time, &place->time_s, error) &&
           read_pixels(sheet, row, sheet->x, &place->x_px, error) &&
           read_pixels(sheet, row, sheet->y, &place->y_px, error);
}

static bool read_other(const Sheet *sheet, size_t row, RfReviewPlace *other, GError **error)
{
    return require(sheet, sheet->other_droplet, "other_droplet", error) &&
           require(sheet, sheet->other_time, "other_time_s", error) &&
           require(sheet, sheet->other_x, "other_x_px", error) &&
           require(sheet, sheet->other_y, "other_y_px", error) &&
           read_droplet(sheet, row, sheet->other_droplet, &other->droplet, error) &&
           read_time(sheet, row, sheet->other_time, &other->time_s, error) &&
           read_pixels(sheet, row, sheet->other_x, &other->x_px, error) &&
           read_pixels(sheet, row, sheet->other_y, &other->y_px, error);
}

static bool read_words(const Sheet *sheet, size_t row, int column, const char *needed, char **words,
                       GError **error)
{
    const char *text = text_at(sheet, row, column);
    if (needed && *text == '\0') return refuse(sheet, row, column, needed, error);
    if (g_utf8_strlen(text, -1) > MOST_WORDS)
        return refuse(sheet, row, column, "at most 1000 characters", error);
    *words = g_strdup(text);
    return true;
}

static bool read_row(const Sheet *sheet, size_t row, RfReviewRow *entry, GError **error)
{
    entry->line = (unsigned)rf_table_line(sheet->table, row);
    entry->detail = g_strdup("");
    if (!read_action(sheet, row, &entry->action, error) || !read_place(sheet, row, &entry->place, error))
        return false;
    if (entry->action == RF_REVIEW_CUT && (!require(sheet, sheet->cut, "cut_s", error) ||
                                           !read_time(sheet, row, sheet->cut, &entry->cut_s, error)))
        return false;
    if (entry->action == RF_REVIEW_JOIN && !read_other(sheet, row, &entry->other, error)) return false;
    return read_words(sheet, row, sheet->reason, "the reason, in words", &entry->reason, error) &&
           read_words(sheet, row, sheet->name, "the name of who decided it", &entry->name, error) &&
           read_words(sheet, row, sheet->date, NULL, &entry->date, error);
}

/* Counts the entries that don't say; refuses the one that says another. */
static bool check_recording(const Sheet *sheet, size_t row, const char *recording, unsigned *silent,
                            GError **error)
{
    const char *said = text_at(sheet, row, sheet->recording);
    *silent += *said == '\0';
    if (*said == '\0' || g_ascii_strcasecmp(said, recording) == 0) return true;
    g_autoptr(GError) where = NULL;
    g_autofree char *needed = g_strdup_printf("%s, the digest of the recording that this sheet names: the "
                                              "review was made for another one; name its own "
                                              "review, or empty the cell to use this one all the same",
                                              recording);
    rf_table_cell_error(sheet->table, row, (size_t)sheet->recording, needed, &where);
    g_set_error_literal(error, RF_REVIEW_ERROR, RF_REVIEW_ERROR_OTHER_RECORDING, where->message);
    return false;
}

bool rf_review_read(const char *path, RfResults *results, GError **error)
{
    g_autoptr(RfTable) table = rf_table_read(path, error);
    Sheet sheet = {.table = table};
    if (!table || !find_columns(&sheet, error)) return false;
    g_autofree char *recording = rf_review_recording(results);
    unsigned silent = 0;
    for (size_t row = 0; row < rf_table_rows(table); row++) {
        g_array_set_size(results->review, results->review->len + 1);
        RfReviewRow *entry = &g_array_index(results->review, RfReviewRow, results->review->len - 1);
        if (!read_row(&sheet, row, entry, error) || !check_recording(&sheet, row, recording, &silent, error))
            return false;
    }
    if (silent > 0)
        rf_results_warn(
            results,
            "%s: %u of %zu entries don't say which recording they belong to: they are taken to be this one's",
            path, silent, rf_table_rows(table));
    return true;
}
